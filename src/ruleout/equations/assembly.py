"""From a wiring to the right-hand side: gains, losses and fluxes put together.

For a node X that is not an input::

    gain = (basal + sum of additive terms) * necessary factors / (1 + (s/half)^hill) ...
    loss = (loss_rate + sum of additive terms) * factors
    expressed: dX/dt = gain - loss * X
    switched:  dX/dt = gain * a(1 - X) - loss * a(X)

with a(u) = u or u / (K + u), plus the fluxes of material edges for any node.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, field

from ruleout.equations.laws import Laws
from ruleout.expressions import ONE, ZERO, Expr, const, substitute, sym, symbols
from ruleout.mechanism.parameters import divides
from ruleout.mechanism.types import Edge, Node
from ruleout.variants import Wiring
from ruleout.variants.contests import cut_with_onto, has_half, has_hill
from ruleout.variants.graph import net_amounts
from ruleout.variants.rates import rate_expression


@dataclass(frozen=True, slots=True)
class Bend:
    """How a condition bends the equations.

    Attributes
    ----------
    levels : mapping of node to Expr
        What stands for the nodes that are no states: inputs, clamped, removed or held ones. A node
        that is missing here is a state under its own name.
    cut : collection of str
        Edges left out.
    switched_nodes, switched_edges : collection of str
        Those multiplied by ``on:NAME``.
    """

    levels: Mapping[str, Expr] = field(default_factory=dict)
    cut: Collection[str] = ()
    switched_nodes: Collection[str] = ()
    switched_edges: Collection[str] = ()


@dataclass(slots=True)
class _Side:
    """One side (gain or loss) of a node's balance."""

    base: Expr
    shared: list[Expr] = field(default_factory=list)
    own: list[tuple[Edge, Expr]] = field(default_factory=list)
    factors: list[Expr] = field(default_factory=list)
    divisors: list[Expr] = field(default_factory=list)

    def scaled(self, term: Expr) -> Expr:
        """Return ``term`` times the factors of this side."""
        for factor in self.factors:
            term = term * factor
        for divisor in self.divisors:
            term = term / divisor
        return term

    def total(self) -> Expr:
        """Return the sum of the terms that share the node's own a(u)."""
        total = self.base
        for term in self.shared:
            total = total + term
        return total


class Assembly:
    """Puts the equations of one wiring together under one bend.

    Parameters
    ----------
    wiring : Wiring
    without_basal : collection of str
        Nodes whose basal term is fixed at zero.
    bend : Bend
    laws : Laws
    """

    def __init__(
        self,
        wiring: Wiring,
        without_basal: Collection[str],
        bend: Bend | None = None,
        laws: Laws | None = None,
    ) -> None:
        self.wiring = wiring
        self.without_basal = without_basal
        self.bend = bend or Bend()
        self.laws = laws or Laws()
        cut = cut_with_onto(wiring.edges, self.bend.cut)
        self.edges = {n: e for n, e in wiring.edges.items() if n not in cut}
        self.onto: dict[str, list[Edge]] = {}
        for edge in self.edges.values():
            if edge.onto is not None:
                self.onto.setdefault(edge.onto, []).append(edge)

    def level(self, node: str) -> Expr:
        """Return the amount of a node; a node the wiring lacks has none."""
        if node not in self.wiring.nodes:
            return ZERO
        return self.bend.levels.get(node, sym(node))

    def _on(self, edge: Edge) -> Expr:
        return sym(f"on:{edge.name}") if edge.name in self.bend.switched_edges else ONE

    def _stage_rate(self, edge: Edge) -> Expr:
        mean = sym(f"{edge.name}.delay") if edge.delay is True else const(float(edge.delay))
        return float(edge.stages) / mean

    def _delayed(self, edge: Edge) -> bool:
        """Return whether an edge has delay stages here; a chain fed by nothing stays empty."""
        if edge.delay is False or edge.name not in self.edges:
            return False
        if edge.material:
            return self._flux(edge) is not ZERO
        return self.level(edge.sources[0][0]) is not ZERO

    def _signal(self, edge: Edge) -> Expr:
        """Return what a regulating edge senses: its source, or the last stage of its delay."""
        if self._delayed(edge):
            return sym(f"{edge.name}:{edge.stages}")
        return self.level(edge.sources[0][0])

    def _half(self, edge: Edge) -> Expr:
        half: Expr = sym(f"{edge.name}.half")
        for modifier in self.onto.get(f"{edge.name}.half", ()):
            half = self._modified(half, modifier)
        return half

    def _hill(self, edge: Edge) -> Expr | None:
        return sym(f"{edge.name}.hill") if has_hill(edge) else None

    def _response(self, edge: Edge, s: Expr) -> Expr:
        """Return f(s) of an edge's law."""
        if s is ZERO or not has_half(edge):
            return s
        hill = self._hill(edge)
        if hill is None:
            return self.laws.saturating(s, self._half(edge))
        return self.laws.hill(s, self._half(edge), hill)

    def _modified(self, term: Expr, modifier: Edge) -> Expr:
        """Return ``term`` under an ``onto`` edge: times 1 + strength f, or divided."""
        if divides(modifier, modifier.effects[0]):
            return term / self._divisor(modifier)
        return term * (1.0 + self._additive(modifier))

    def _scaled(self, edge: Edge, term: Expr) -> Expr:
        """Return a term of an edge under every edge onto it."""
        for modifier in self.onto.get(edge.name, ()):
            term = self._modified(term, modifier)
        return term

    def _additive(self, edge: Edge) -> Expr:
        response = self._response(edge, self._signal(edge))
        term = sym(f"{edge.name}.strength") * response
        return self._on(edge) * self._scaled(edge, term)

    def _factor(self, edge: Edge) -> Expr:
        """Return the factor of a necessary edge: one once it is cut, as in a wiring without it."""
        term = self._scaled(edge, self._response(edge, self._signal(edge)))
        on = self._on(edge)
        return term if on is ONE else 1.0 + on * (term - 1.0)

    def _divisor(self, edge: Edge) -> Expr:
        ratio = self.laws.ratio(self._signal(edge), self._half(edge), self._hill(edge))
        return 1.0 + self._on(edge) * self._scaled(edge, ratio)

    def _flux(self, edge: Edge) -> Expr:
        """Return the turnover of a material edge, net of its way back."""
        name = edge.name
        if edge.rates:
            levels = {n: self.level(n) for n in self.wiring.names}
            (flux,) = substitute([rate_expression(edge, self.wiring.names)], levels)
        elif edge.effects[0] == "binds":
            back = sym(f"{name}.release") * self._mass_action(edge.targets)
            flux = sym(f"{name}.rate") * self._mass_action(edge.sources) - back
        elif edge.laws[0] == "linear":
            flux = sym(f"{name}.rate") * self._mass_action(edge.sources)
            if edge.reversible:
                flux = flux - sym(f"{name}.rate_back") * self._mass_action(edge.targets)
        else:
            flux = sym(f"{name}.rate") * self._saturable(edge, edge.sources)
            if edge.reversible:
                flux = flux - sym(f"{name}.rate_back") * self._saturable(edge, edge.targets)
        return self._on(edge) * self._scaled(edge, flux)

    def _mass_action(self, ends: tuple[tuple[str, float], ...]) -> Expr:
        product = ONE
        for node, order in ends:
            product = product * self.laws.power(self.level(node), order)
        return product

    def _saturable(self, edge: Edge, ends: tuple[tuple[str, float], ...]) -> Expr:
        """Return the law in the first reactant times mass action in any others (an enzyme)."""
        if not ends:
            return ONE
        return self._response(edge, self.level(ends[0][0])) * self._mass_action(ends[1:])

    def _sides(self, node: Node) -> tuple[_Side, _Side]:
        basal = ZERO if node.name in self.without_basal else sym(f"{node.name}.basal")
        gain, loss = _Side(basal), _Side(sym(f"{node.name}.loss_rate"))
        for edge in self.edges.values():
            if edge.material or edge.onto is not None or edge.targets[0][0] != node.name:
                continue
            side = gain if edge.on == "gain" else loss
            if divides(edge, edge.effects[0]):
                side.divisors.append(self._divisor(edge))
            elif edge.necessary:
                side.factors.append(self._factor(edge))
            elif edge.acts_on is None or node.kind != "switched":
                side.shared.append(self._additive(edge))
            else:
                side.own.append((edge, self._additive(edge)))
        return gain, loss

    def _availability(self, node: Node, side: _Side, u: Expr, half: str) -> Expr:
        """Return a side's total rate: its terms times the a(u) each of them acts on."""
        shared = u
        if node.kind == "switched" and node.acts_on == "saturating":
            shared = self.laws.saturating(u, sym(half))
        total = side.total() * shared
        for edge, term in side.own:
            own = u
            if edge.acts_on == "saturating":
                own = self.laws.saturating(u, sym(f"{edge.name}.target_half"))
            total = total + term * own
        return side.scaled(total)

    def balance(self, node: Node) -> tuple[Expr, Expr]:
        """Return gain and loss of a node by regulation, both as amounts per time."""
        if node.kind not in ("switched", "expressed"):
            return ZERO, ZERO
        gain, loss = self._sides(node)
        x = self.level(node.name)
        left = self._availability(node, loss, x, f"{node.name}.half_loss")
        if node.kind == "switched":
            return self._availability(node, gain, 1.0 - x, f"{node.name}.half_gain"), left
        return gain.scaled(gain.total()), left

    def flows(self, node: str) -> list[tuple[float, Expr]]:
        """Return what material edges bring to a node: amounts per turnover, and turnovers."""
        found: list[tuple[float, Expr]] = []
        for edge in self.edges.values():
            if not edge.material:
                continue
            if self._delayed(edge):
                last = self._stage_rate(edge) * sym(f"{edge.name}:{edge.stages}")
                found += [(-n, self._flux(edge)) for name, n in edge.sources if name == node]
                found += [(n, last) for name, n in edge.targets if name == node]
            elif node in (net := net_amounts(edge)):
                found.append((net[node], self._flux(edge)))
        return found

    def stages(self, edge: Edge) -> dict[str, Expr]:
        """Return the delay chain of an edge: states ``EDGE:1`` ... and their rates of change."""
        if not self._delayed(edge):
            return {}
        rate = self._stage_rate(edge)
        first = f"{edge.name}:1"
        if edge.material:
            chain = {first: self._flux(edge) - rate * sym(first)}
        else:
            chain = {first: rate * (self.level(edge.sources[0][0]) - sym(first))}
        for i in range(2, edge.stages + 1):
            before, here = sym(f"{edge.name}:{i - 1}"), sym(f"{edge.name}:{i}")
            chain[f"{edge.name}:{i}"] = rate * (before - here)
        return chain

    def equations(self, wanted: Collection[str] = ()) -> dict[str, Expr]:
        """Return the rate of change of every state: nodes in file order, then delay stages.

        A delay that leads nowhere (its target is gone) has no stages unless they are ``wanted``.
        """
        rhs: dict[str, Expr] = {}
        for name, node in self.wiring.nodes.items():
            if node.kind == "input" or name in self.bend.levels:
                continue
            gain, loss = self.balance(node)
            change = gain - loss
            for amount, flux in sorted(self.flows(name), key=lambda flow: flow[0] < 0.0):
                change = change + flux * amount if amount > 0.0 else change - flux * -amount
            if name in self.bend.switched_nodes:
                change = sym(f"on:{name}") * change
            rhs[name] = change
        chains = {f"{e.name}:{e.stages}": self.stages(e) for e in self.edges.values()}
        used: set[str] = set()
        while found := (symbols(*rhs.values()).union(wanted) & chains.keys()) - used:
            used |= found
            for last, chain in chains.items():
                if last in found:
                    rhs.update(chain)
        return rhs
