"""A mechanism with contested edges as a family: its variants, surveyed instead of judged."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
from numpy.typing import NDArray

from ruleout.equations import build
from ruleout.errors import InputError
from ruleout.experiments.types import Experiments
from ruleout.expressions import symbols
from ruleout.kernel import System, compile_system
from ruleout.mechanism.types import Fixed, LogNormal, LogUniform, Mechanism, Tied
from ruleout.survey.behaviours import Subject
from ruleout.survey.features import Features
from ruleout.survey.roster import Choices, Rows
from ruleout.survey.types import Family, Range
from ruleout.variants import Variant, VariantSet, expand
from ruleout.variants.contests import ABSENT, choice_name

Array = NDArray[np.float64]

RANGES: Final[Mapping[str, Range]] = {
    "basal": LogUniform(0.01, 1.0),
    "loss_rate": LogUniform(0.1, 10.0),
    "half_gain": LogUniform(0.01, 10.0),
    "half_loss": LogUniform(0.01, 10.0),
    "strength": LogUniform(0.1, 10.0),
    "rate": LogUniform(0.1, 10.0),
    "rate_back": LogUniform(0.1, 10.0),
    "release": LogUniform(0.1, 10.0),
    "half": LogUniform(0.1, 10.0),
    "hill": LogUniform(1.0, 4.0),
    "target_half": LogUniform(1e-3, 100.0),
    "delay": LogUniform(0.1, 10.0),
}
"""Ranges by part of the name, where neither the family file nor the mechanism gives one."""
_WITHOUT_DATA: Final = Experiments({}, {})


@dataclass(frozen=True, slots=True)
class MechanismFamily:
    """The variants of a mechanism.

    Attributes
    ----------
    title : str
    mechanism : Mechanism
    source : str
        Name of the input that behaviours change, empty if none does; others rest.
    output : str
        Name of the output node.
    ranges : mapping of str to LogUniform or Fixed
        By part or by full name. What it does not name takes its range from the mechanism's priors
        (a lognormal one reaches from median / fold to median x fold), then from ``RANGES``.
    start : float
        Where the flow to rest begins, for every state.
    """

    title: str
    mechanism: Mechanism
    source: str
    output: str
    ranges: Mapping[str, Range]
    start: float = 0.1
    style: Literal["mechanism"] = "mechanism"

    @property
    def output_name(self) -> str:
        """Name of the output node."""
        return self.output

    def resolved(self, name: str) -> str:
        """Return the parameter that ``name`` is tied to, itself if it is free."""
        prior = self.mechanism.priors.get(name)
        while isinstance(prior, Tied) and name not in self.ranges:
            name = prior.to
            prior = self.mechanism.priors.get(name)
        return name

    def range_of(self, name: str) -> Range:
        """Return the range of the parameter ``name``.

        Raises
        ------
        InputError
            If nothing gives it one.
        """
        part = name.rpartition(".")[2]
        prior = self.mechanism.priors.get(name)
        if name in self.ranges:
            return self.ranges[name]
        if isinstance(prior, LogUniform | Fixed):
            return prior
        if isinstance(prior, LogNormal):
            return LogUniform(prior.median / prior.fold, prior.median * prior.fold)
        found = self.ranges.get(part, RANGES.get(part))
        if found is None or prior is not None:
            raise InputError(
                f"'{name}' has no range; write [range] \"{name}\" = {{ low = ..., high = ... }} in "
                "the family file"
            )
        return found


AnyFamily = Family | MechanismFamily


class VariantMember:
    """One variant, ready to be scored."""

    def __init__(self, family: MechanismFamily, variant: Variant) -> None:
        self._family, self._wiring = family, variant.wiring
        model = build(variant, family.mechanism, _WITHOUT_DATA)
        found = symbols(*model.rhs) - set(model.states) - {"time"}
        self._inputs = tuple(sorted(found & family.mechanism.nodes.keys()))
        named = tuple(name for name in model.parameters if name in found)
        self._own = {name: family.resolved(name) for name in named}
        self._system = System(model.states, (*named, *self._inputs), model.rhs)
        self.parameters = tuple(dict.fromkeys(self._own.values()))

    def subject(self, values: Array) -> Subject:
        """Return the variant with parameter sets ``values`` (M, len(parameters))."""
        family, states = self._family, self._system.states
        known = dict(zip(self.parameters, values.T, strict=True))
        columns = [known[own] for own in self._own.values()]
        nodes = family.mechanism.nodes
        columns += [np.full(len(values), nodes[name].resting) for name in self._inputs]
        names = self._system.parameters
        loss = f"{family.output}.loss_rate"
        source = names.index(family.source) if family.source in names else None
        if family.source and source is None:
            # A variant that the input does not reach answers no change of it.
            names = (*names, family.source)
            columns.append(np.zeros(len(values)))
            source = len(names) - 1
        system = System(states, names, self._system.rhs)
        return Subject(
            program=compile_system(system),
            p=np.column_stack(columns) if columns else np.empty((len(values), 0)),
            start=np.full(len(states), family.start),
            ceiling=self._ceiling(known, len(values)),
            output=states.index(family.output),
            source=source,
            loss=names.index(loss) if loss in names else None,
        )

    def _ceiling(self, known: Mapping[str, Array], count: int) -> Array:
        """Return most gain over least loss for expressed nodes, else 1."""
        ceiling = np.ones((count, len(self._system.states)))
        for k, name in enumerate(self._system.states):
            node = self._wiring.nodes.get(name)
            if node is None or node.kind != "expressed":
                continue
            most = known.get(self._own.get(f"{name}.basal", ""), np.zeros(count))
            for edge in self._wiring.edges.values():
                if edge.onto is None and not edge.material and edge.targets[0][0] == name:
                    strength = self._own.get(f"{edge.name}.strength", "")
                    most = most + known.get(strength, np.zeros(count))
            ceiling[:, k] = most / known.get(self._own.get(f"{name}.loss_rate", ""), 1.0)
        return np.maximum(ceiling, 1e-6)


class VariantRoster:
    """Variants of a mechanism."""

    def __init__(self, family: MechanismFamily, names: Sequence[str] | None = None) -> None:
        self.family = family
        self._set: VariantSet = expand(family.mechanism, _WITHOUT_DATA)
        self._variants = [self._set.variants[name] for name in (names or self._set.variants)]

    def __reduce__(self) -> tuple[type[VariantRoster], tuple[MechanismFamily, list[str]]]:
        return VariantRoster, (self.family, self.labels())

    def __len__(self) -> int:
        return len(self._variants)

    def range_of(self, name: str) -> Range:
        """Return the range of a parameter."""
        return self.family.range_of(name)

    def labels(self) -> list[str]:
        """Return the variants' names."""
        return [variant.name for variant in self._variants]

    def options(self) -> dict[str, dict[str, str]]:
        """Return how each variant settles what is contested, by the variant's name."""
        return {
            variant.name: {name: str(option) for name, option in variant.choices.items()}
            for variant in self._variants
        }

    def words(self) -> list[str]:
        """Return the choices of each variant: ``edge; other=hill``."""
        contests = {contest.name: contest for contest in self._set.contests}
        return [
            "; ".join(
                choice_name(contests[name], option)
                for name, option in variant.choices.items()
                if option.present
            )
            for variant in self._variants
        ]

    def choices(self) -> Choices:
        """Return the number of the option each variant takes in each contest, 0 for absent."""
        return np.array(
            [
                [
                    0 if option == ABSENT else 1 + contest.options.index(option)
                    for contest, option in (
                        (contest, variant.choices[contest.name]) for contest in self._set.contests
                    )
                ]
                for variant in self._variants
            ],
            dtype=np.int8,
        ).reshape(len(self._variants), len(self._set.contests))

    def class_sizes(self) -> NDArray[np.int64]:
        """Return one for each: every variant stands for itself."""
        return np.ones(len(self._variants), dtype=np.int64)

    def order(self) -> Rows:
        """Return the order they have."""
        return np.arange(len(self._variants))

    def features(self) -> Features:
        """Return contested choices, feedback loops and feed-forward pairs."""
        columns: dict[str, list[bool]] = {}
        count = len(self._variants)

        def add(name: str, row: int) -> None:
            columns.setdefault(name, [False] * count)[row] = True

        contests = {contest.name: contest for contest in self._set.contests}
        signs = {1: "positive", -1: "negative", 0: "sign-changing"}
        kinds = {1: "coherent", -1: "incoherent", 0: "sign-changing"}
        for row, variant in enumerate(self._variants):
            for name, option in variant.choices.items():
                if option.present:
                    add(choice_name(contests[name], option), row)
            for loop in variant.loops:
                if loop.kind == "feedback":
                    add(f"a {signs[loop.sign]} loop", row)
                    add(f"a {signs[loop.sign]} loop {'-'.join(loop.nodes)}", row)
                else:
                    article = "an" if loop.sign < 0 else "a"
                    ends = f"from {loop.nodes[0]} to {loop.nodes[-1]}"
                    add(f"{article} {kinds[loop.sign]} feed-forward {ends}", row)
        telling = {n: v for n, v in columns.items() if not all(v)}
        have = np.array(list(telling.values()), dtype=bool).T.reshape(count, len(telling))
        return Features(tuple(telling), have)

    def member(self, t: int) -> VariantMember:
        """Return one variant."""
        return VariantMember(self.family, self._variants[t])

    def pick(self, rows: Sequence[int] | Rows) -> VariantRoster:
        """Return some of the variants."""
        return VariantRoster(self.family, [self._variants[int(t)].name for t in rows])
