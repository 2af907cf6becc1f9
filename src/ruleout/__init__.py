"""Rule out wirings of a biological mechanism that the data contradict.

Each stage is one verb with one frozen result: :func:`read_case`, :func:`inspect_case`,
:func:`judge`, :func:`rehearse`, :func:`write_report`, and :func:`ruleout.survey.survey`. They are
loaded when first used, so that importing this package costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOMES = {
    "InputError": "ruleout.errors",
    "Settings": "ruleout.pipeline",
    "inspect_case": "ruleout.inspection",
    "judge": "ruleout.pipeline",
    "load_judgement": "ruleout.store",
    "read_case": "ruleout.case",
    "rehearse": "ruleout.rehearsal",
    "write_report": "ruleout.report",
}

__all__ = [*_HOMES, "__version__"]


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'ruleout' has no attribute '{name}'")
