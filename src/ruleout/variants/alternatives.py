"""What a variant is checked against: its neighbours, and all that is in dispute together."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.variants.types import VariantSet

MOST_LARGEST = 3


def alternatives(variants: VariantSet, name: str) -> Mapping[str, tuple[str, ...]]:
    """Return the variants that a variant's edge statistics let in, by the choices they add.

    Besides the neighbours these are the largest variants that contain it (at most three, in file
    order): two choices that do nothing alone, such as a reservoir and the way back from it, have
    no neighbour through which they could show.

    Returns
    -------
    mapping
        ``{"a": ("v2",), "a+b": ("v4",)}``: choices added, and the variants that have them.
    """
    found = dict(variants.neighbours[name])
    near = {other for group in found.values() for other in group}
    above = [other for other, smaller in variants.contains.items() if name in smaller]
    largest = [
        other
        for other in above
        if other not in near and not any(other in variants.contains[more] for more in above)
    ]
    here = variants.variants[name].choices
    for other in largest[:MOST_LARGEST]:
        there = variants.variants[other].choices
        added = "+".join(choice for choice, option in there.items() if option != here[choice])
        found[added] = (*found.get(added, ()), other)
    return found
