"""Errors a user can cause, told in one or two plain lines."""

from __future__ import annotations

import errno
from collections.abc import Iterable
from difflib import get_close_matches


class RuleoutError(Exception):
    """Base of every error this package raises on purpose.

    Attributes
    ----------
    exit_status : int
        What the command line returns: 2 for bad input, 1 for our own failure.
    """

    exit_status = 1


class InputError(RuleoutError):
    """Something in the user's files or options cannot be used.

    Parameters
    ----------
    message : str
        What was given, what is allowed, what to do.
    where : str, optional
        File and line or field, such as ``mechanism.toml:12: edge.brake.law``.
    """

    exit_status = 2

    def __init__(self, message: str, *, where: str | None = None) -> None:
        self.where = where
        super().__init__(f"{where}: {message}" if where else message)


def did_you_mean(given: str, allowed: Iterable[str]) -> str:
    """Return `` (did you mean 'x'?)`` for the nearest allowed word, or an empty string."""
    near = get_close_matches(given, list(allowed), n=1, cutoff=0.6)
    return f" (did you mean '{near[0]}'?)" if near else ""


def lacks_room(error: BaseException) -> bool:
    """Tell whether a write failed for want of space: a full disk, a quota, a limit on files."""
    codes = (errno.ENOSPC, errno.EFBIG, errno.EDQUOT)
    seen: BaseException | None = error
    while seen is not None:
        if isinstance(seen, OSError) and seen.errno in codes:
            return True
        # HDF5 has the number in its message only.
        if any(f"errno = {code}," in str(seen) for code in codes):
            return True
        seen = seen.__cause__ or seen.__context__
    return False
