"""Equations of a variant, symbolically, and how a condition bends them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from ruleout.expressions import Expr
from ruleout.kernel.types import Protocol, System
from ruleout.variants.types import Variant

ParameterKind = Literal["rate", "level", "half", "hill", "delay", "start"]


@dataclass(frozen=True, slots=True)
class Parameter:
    """A parameter of the equations.

    Attributes
    ----------
    name : str
        ``NODE.basal``, ``EDGE.half``, ...
    kind : str
        Decides the default prior: ``rate`` (per time), ``level`` (of unit 1), ``half`` (in units
        of the source), ``hill``, ``delay`` (time), ``start`` (amount).
    unit : str
        For display, such as ``1/min`` or ``fraction``.
    source : str
        The node a ``half`` refers to, else empty.
    """

    name: str
    kind: ParameterKind
    unit: str
    source: str = ""


@dataclass(frozen=True, slots=True)
class Structure:
    """What a condition changes in the shape of the equations; equal structures share a system.

    Attributes
    ----------
    removed : frozenset of str
        Nodes held at zero throughout.
    clamped : frozenset of str
        Nodes held at the system parameter ``clamp:NODE``.
    cut : frozenset of str
        Edges gone throughout.
    switched_nodes, switched_edges : frozenset of str
        Nodes or edges that vanish at some time: multiplied by the system parameters
        ``on:NODE`` and ``on:EDGE`` (1, then 0).
    sloped : frozenset of str
        Inputs whose course is interpolated: level ``input:NODE`` + ``slope:NODE`` * time.
    """

    removed: frozenset[str] = frozenset()
    clamped: frozenset[str] = frozenset()
    cut: frozenset[str] = frozenset()
    switched_nodes: frozenset[str] = frozenset()
    switched_edges: frozenset[str] = frozenset()
    sloped: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class Start:
    """Where a state begins: ``rest`` True, or a number or an expression of parameters."""

    rest: bool
    value: Expr | None = None


@dataclass(frozen=True, slots=True)
class Model:
    """A variant's equations.

    Attributes
    ----------
    variant : Variant
    parameters : mapping of name to Parameter
        All that occur in the equations or in start expressions, in a stable order (file order of
        nodes, then of edges).
    states : tuple of str
        Nodes that move, then delay stages ``EDGE:1`` ....
    rhs : tuple of Expr
        dy/dt with nothing removed, over states, parameter names, input node names and ``time``.
    starts : mapping of state to Start
    assumptions : tuple of str
        What the rate laws rest on, as sentences.
    """

    variant: Variant
    parameters: Mapping[str, Parameter]
    states: tuple[str, ...]
    rhs: tuple[Expr, ...]
    starts: Mapping[str, Start]
    assumptions: tuple[str, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Setup:
    """One condition of one model, ready for the kernel.

    Attributes
    ----------
    condition : str
    system : System
        Its parameters are parameter names and the special ``input:``, ``slope:``, ``clamp:`` and
        ``on:`` ones; a parameter the condition frees is named ``NAME@CONDITION``.
    protocol : Protocol
        For special parameters ``factor`` is 0 and ``shift`` the value; for others ``factor`` holds
        acute changes. Lasting changes are in ``factor`` too (and in ``rest_factor``).
    starts : tuple of Start, one per state of ``system``
        Parameter names in them are already the condition's own (``NAME@CONDITION``).
    start_factors : mapping of name to float
        Lasting change factors, for parameters used in start expressions.
    rest_system : System or None
        Equations under which the ``rest`` starts are found: states with a given start are held
        there as parameters ``start:STATE``, and nodes with one that are no states of ``system``
        (clamped ones, say) at its value; None if no state starts at rest.
    rest_factor, rest_shift : tuple of float
        Per parameter of ``rest_system``: value = factor * p + shift (inputs at resting level).
    fixed_levels : mapping of node to tuple of float
        Amounts at the output times of the nodes that are no states of ``system``: inputs, clamped
        and removed nodes.
    """

    condition: str
    system: System
    protocol: Protocol
    starts: tuple[Start, ...]
    start_factors: Mapping[str, float]
    rest_system: System | None
    rest_factor: tuple[float, ...]
    rest_shift: tuple[float, ...]
    fixed_levels: Mapping[str, tuple[float, ...]]
