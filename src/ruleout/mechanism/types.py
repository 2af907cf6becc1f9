"""What a mechanism is: nodes, edges, rules, claims and priors, as read from ``mechanism.toml``."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

NodeKind = Literal["input", "switched", "expressed", "pool"]
Effect = Literal["stimulates", "inhibits", "converts", "binds"]
Law = Literal["linear", "saturating", "hill"]

REST = "rest"
FREE = "free"


@dataclass(frozen=True, slots=True)
class LogNormal:
    """Lognormal prior: 95 % of its mass lies within a factor ``fold`` of ``median``."""

    median: float
    fold: float


@dataclass(frozen=True, slots=True)
class LogUniform:
    """Uniform in the logarithm between ``low`` and ``high`` (both positive)."""

    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Normal:
    """Normal prior on the natural scale."""

    mean: float
    sd: float


@dataclass(frozen=True, slots=True)
class Uniform:
    """Flat on the natural scale between ``low`` and ``high``."""

    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Fixed:
    """A parameter held at ``value``."""

    value: float


@dataclass(frozen=True, slots=True)
class Tied:
    """A parameter equal to another one at all times."""

    to: str


Prior = LogNormal | LogUniform | Normal | Uniform | Fixed | Tied


@dataclass(frozen=True, slots=True)
class Node:
    """A molecular species, an activity or an externally set input.

    Attributes
    ----------
    start : float or str
        A number, ``"rest"``, ``"free"`` or the text of an expression of parameters.
    resting : float
        Level under rest; inputs only.
    acts_on : {"linear", "saturating"}
        Form of a(u): ``u`` or ``u / (K + u)``; switched nodes only.
    contested : bool
        The node itself is in dispute: it is absent together with its edges.
    """

    name: str
    kind: NodeKind
    start: float | str = REST
    resting: float = 0.0
    acts_on: Literal["linear", "saturating"] = "linear"
    contested: bool = False


@dataclass(frozen=True, slots=True)
class Edge:
    """An interaction from nodes to a node, to other nodes (material) or onto another edge.

    Attributes
    ----------
    sources, targets : tuple of (str, float)
        Node names with stoichiometry (1 for regulating edges). Inflow has no source, loss no
        target; an ``onto`` edge has no target.
    effects, laws : tuple
        Admitted effects and rate laws, in file order; more than one means they are in dispute.
    rates : tuple of (str, str)
        Labelled rate expressions of a material edge; one with label ``""`` if there is no dispute,
        empty without a ``rate``.
    removable : bool
        ``absent`` is one of the options.
    necessary : bool
        Factor of the whole gain (or loss) instead of an additive term.
    on : {"gain", "loss"}
        Which side of the target a regulating edge acts on.
    onto : str or None
        ``"EDGE"`` or ``"EDGE.half"``: the edge or parameter that is multiplied.
    acts_on : str or None
        The edge's own a(u) with its own ``target_half`` (leaves the node's shared factor).
    reversible : bool
        A material edge that also runs backwards (``EDGE.rate_back``).
    delay : bool or float
        False, True (a parameter ``EDGE.delay``) or the mean delay itself in time units.
    stages : int
        First-order steps of the delay chain.
    contains : tuple of (str, str)
        Declared nesting between options (larger, smaller).
    """

    name: str
    sources: tuple[tuple[str, float], ...]
    targets: tuple[tuple[str, float], ...]
    effects: tuple[Effect, ...]
    laws: tuple[Law, ...] = ("linear",)
    rates: tuple[tuple[str, str], ...] = ()
    removable: bool = False
    necessary: bool = False
    on: Literal["gain", "loss"] = "gain"
    onto: str | None = None
    acts_on: Literal["linear", "saturating"] | None = None
    reversible: bool = False
    delay: bool | float = False
    stages: int = 3
    contains: tuple[tuple[str, str], ...] = ()

    @property
    def material(self) -> bool:
        """Whether the edge moves amounts (converts, binds) rather than regulating a rate."""
        return self.effects[0] in ("converts", "binds")


@dataclass(frozen=True, slots=True)
class Rule:
    """Which contested choices may stand together.

    A member is ``EDGE``, ``NODE`` or ``EDGE=option`` (an effect, a law or a rate label).
    """

    name: str
    kind: Literal["at_most_one", "exactly_one", "together", "implies"]
    members: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Claim:
    """A structural hypothesis of the user's own.

    ``kind`` is ``any_of``, ``all_of`` or ``none_of`` over members as in :class:`Rule`, or
    ``loop`` with the one member ``"negative"`` or ``"positive"``.
    """

    name: str
    text: str
    kind: Literal["any_of", "all_of", "none_of", "loop"]
    members: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Mechanism:
    """One interaction graph with its contested parts.

    ``priors`` holds what the file gives, by parameter name, in file order; defaults are resolved
    later, against the experiments. ``lines`` maps dotted fields (``edge.brake.law``) to line
    numbers in the file, for messages.
    """

    title: str
    time_unit: str
    amount_unit: str
    nodes: Mapping[str, Node]
    edges: Mapping[str, Edge]
    rules: tuple[Rule, ...] = ()
    claims: tuple[Claim, ...] = ()
    priors: Mapping[str, Prior] = field(default_factory=dict)
    lines: Mapping[str, int] = field(default_factory=dict)
