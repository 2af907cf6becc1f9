"""The SBML reference library, imported only where it is needed."""

from __future__ import annotations

from typing import Any

from ruleout.errors import InputError


def libsbml() -> Any:
    """Return the module ``libsbml``.

    Raises
    ------
    InputError
        If it is not installed.
    """
    try:
        import libsbml as module
    except ModuleNotFoundError as error:
        raise InputError(
            "SBML needs python-libsbml, which is not installed; run pip install 'ruleout[exchange]'"
        ) from error
    return module
