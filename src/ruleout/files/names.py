"""What nodes, edges and readouts may be called, and what conditions and replicates may."""

from __future__ import annotations

import re

from ruleout.errors import InputError

RESERVED = frozenset(
    {"time", "exp", "log", "sqrt", "sin", "cos", "tanh", "min", "max", "absent", "present"}
)
LONGEST = 64
_NAME = re.compile(r"[A-Za-z_][A-Za-z0-9_]*")


def check_name(name: str, what: str, where: str) -> None:
    """Raise InputError unless ``name`` may be used in expressions and parameter names."""
    if len(name) > LONGEST:
        raise InputError(f"the name has {len(name)} characters; use at most {LONGEST}", where=where)
    if not _NAME.fullmatch(name):
        raise InputError(
            f"{name!r} cannot name a {what}; use letters a-z, digits and underscores, with no "
            "digit first",
            where=where,
        )
    if name in RESERVED:
        raise InputError(
            f"'{name}' has a meaning of its own in expressions or choices; use another name for "
            f"this {what}",
            where=where,
        )


def check_label(label: str, what: str, where: str) -> None:
    """Raise InputError unless ``label`` may name a condition or a replicate."""
    if not label or label != label.strip():
        raise InputError(
            f"{label!r} cannot name a {what}: it is empty or has spaces at its ends", where=where
        )
    if len(label) > LONGEST:
        raise InputError(
            f"the {what}'s name has {len(label)} characters; use at most {LONGEST}", where=where
        )
    if not label.isprintable() or "@" in label or ";" in label:
        raise InputError(
            f"{label!r} cannot name a {what}; leave out '@', ';' and control characters",
            where=where,
        )
