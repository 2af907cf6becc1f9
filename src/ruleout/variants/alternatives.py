"""What a variant is checked against: its neighbours, and all that is in dispute together."""

from __future__ import annotations

from collections.abc import Mapping

from ruleout.variants.types import VariantSet

MOST_LARGEST = 4


def alternatives(variants: VariantSet, name: str) -> Mapping[str, tuple[str, ...]]:
    """Return the variants that a variant's edge statistics let in, by the choices they add.

    Besides the neighbours these are the largest variants, those that no other contains (at most
    four, in order). Two choices that do nothing alone, such as a reservoir and the way back from
    it, have no neighbour through which they could show; and where rules let only one of several
    rivals stand, the truth may be several choices away.

    Returns
    -------
    mapping
        ``{"a": ("v2",), "a+b": ("v4",)}``: choices added or changed, and the variants that have
        them.
    """
    found = dict(variants.neighbours[name])
    near = {name, *variants.contains[name]} | {o for group in found.values() for o in group}
    inside = frozenset[str]().union(*variants.contains.values())
    largest = [other for other in variants.variants if other not in inside]
    here = variants.variants[name].choices
    for other in [o for o in largest if o not in near][:MOST_LARGEST]:
        there = variants.variants[other].choices
        added = "+".join(
            choice if option.present else f"{choice}=absent"
            for choice, option in there.items()
            if option != here[choice]
        )
        found[added] = (*found.get(added, ()), other)
    return found
