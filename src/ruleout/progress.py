"""Progress of long steps, as calls on an object that may do nothing."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """What a long computation tells about itself."""

    def start(self, step: str, total: int) -> None:
        """Announce ``step`` with ``total`` units of work."""

    def advance(self, step: str, done: int = 1, note: str = "") -> None:
        """Report ``done`` more units of ``step``; ``note`` says what was just found."""

    def finish(self, step: str) -> None:
        """Report that ``step`` is over, possibly before all its units were needed."""

    def say(self, message: str) -> None:
        """Tell ``message``, a whole sentence."""


class Silent:
    """A :class:`Progress` that says nothing."""

    def start(self, step: str, total: int) -> None:
        """Do nothing."""

    def advance(self, step: str, done: int = 1, note: str = "") -> None:
        """Do nothing."""

    def finish(self, step: str) -> None:
        """Do nothing."""

    def say(self, message: str) -> None:
        """Do nothing."""
