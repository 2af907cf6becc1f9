"""What a wiring lacks that a neighbouring one has."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence

from ruleout.variants.contests import ABSENT, choice_name
from ruleout.variants.types import Contest, Option


def find_neighbours(
    contests: Sequence[Contest],
    choices: Sequence[Mapping[str, Option]],
    contained: Sequence[Collection[int]],
    effective: Sequence[Collection[str]],
) -> list[dict[str, tuple[int, ...]]]:
    """Return, for every wiring, the neighbours that have something it lacks, by what that is.

    Of the wirings that a wiring V does not contain, N is a neighbour if no other one differs from V
    by a proper part of the choices in which N does. Wirings that differ only by parts without any
    influence on the readouts are passed over.

    Parameters
    ----------
    contests : sequence of Contest
    choices : sequence of mapping
        The settled choices of every wiring.
    contained : sequence of collection of int
        Positions of the wirings nested in each.
    effective : sequence of collection of str
        Nodes and edges of each wiring that can influence a readout.

    Returns
    -------
    list of dict
        ``{"a": (3,), "b+c": (5, 6)}``: choices that enter together are joined by ``+``; leaving
        out what cannot fade away is written ``EDGE=absent``.
    """
    pairs = [(c, o) for c in contests for o in dict.fromkeys((*c.options, ABSENT))]
    bit = {(c.name, o): 1 << i for i, (c, o) in enumerate(pairs)}
    masks = [sum(bit[name, option] for name, option in own.items()) for own in choices]
    present = sum(bit[c.name, o] for c, o in pairs if o.present)
    live = [
        sum(
            bit[name, option]
            for name, option in own.items()
            if option.present and name in effective[i]
        )
        for i, own in enumerate(choices)
    ]
    result: list[dict[str, tuple[int, ...]]] = []
    for i, mask in enumerate(masks):
        rivals: list[tuple[int, int]] = []
        for j, other in enumerate(masks):
            if j == i or j in contained[i]:
                continue
            # What N has and V lacks must be able to act in N, or what only V has in V.
            if live[j] & ~mask or live[i] & ~other:
                rivals.append((other & ~mask, j))
        rivals.sort(key=lambda pair: (pair[0].bit_count(), pair[1]))
        minimal: list[tuple[int, int]] = []
        for difference, j in rivals:
            if not any(d & difference == d and d != difference for d, _ in minimal):
                minimal.append((difference, j))
        named: dict[str, tuple[int, ...]] = {}
        for difference, j in minimal:
            shown = difference & present or difference
            name = "+".join(choice_name(c, o) for c, o in pairs if shown & bit[c.name, o])
            named[name] = (*named.get(name, ()), j)
        result.append(named)
    return result
