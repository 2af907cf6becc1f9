"""Variants: every admissible wiring of a mechanism, their nesting, loops and claims."""

from ruleout.variants.alternatives import alternatives
from ruleout.variants.types import (
    ClaimSplit,
    Contest,
    Loop,
    Option,
    Variant,
    VariantSet,
    Wiring,
)
from ruleout.variants.variantset import expand

__all__ = [
    "ClaimSplit",
    "Contest",
    "Loop",
    "Option",
    "Variant",
    "VariantSet",
    "Wiring",
    "alternatives",
    "expand",
]
