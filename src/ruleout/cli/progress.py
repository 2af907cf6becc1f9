"""Progress as live bars, as plain lines or as JSON lines."""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, TextIO

if TYPE_CHECKING:
    from rich.console import Console

    from ruleout.progress import Progress


def duration(seconds: float) -> str:
    """Return a duration as people say it: ``0.4 s``, ``12 s``, ``3 min 5 s``, ``2 h 10 min``."""
    if seconds < 10:
        return f"{seconds:.1f} s"
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60} s"
    return f"{whole // 3600} h {whole % 3600 // 60} min"


class PlainLines:
    """One line for each finished step, for logs and pipes."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream
        self._begun: dict[str, float] = {}
        self._notes: dict[str, str] = {}

    def start(self, step: str, total: int) -> None:  # noqa: ARG002
        """Remember when ``step`` began."""
        self._begun[step] = time.monotonic()

    def advance(self, step: str, done: int = 1, note: str = "") -> None:  # noqa: ARG002
        """Remember the latest note."""
        if note:
            self._notes[step] = note

    def finish(self, step: str) -> None:
        """Write the line of ``step``."""
        took = time.monotonic() - self._begun.pop(step, time.monotonic())
        note = self._notes.pop(step, "")
        print(_finished(step, took, note), file=self._stream, flush=True)

    def say(self, message: str) -> None:
        """Write the message."""
        print(message, file=self._stream, flush=True)


class JsonLines:
    """Every event as one JSON object on a line."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream
        self._begun = time.monotonic()

    def _write(self, event: str, **fields: object) -> None:
        seconds = round(time.monotonic() - self._begun, 3)
        line = json.dumps({"event": event, "seconds": seconds, **fields})
        print(line, file=self._stream, flush=True)

    def start(self, step: str, total: int) -> None:
        """Write that ``step`` began."""
        self._write("start", step=step, total=total)

    def advance(self, step: str, done: int = 1, note: str = "") -> None:
        """Write that ``step`` went on."""
        self._write("advance", step=step, done=done, note=note)

    def finish(self, step: str) -> None:
        """Write that ``step`` is over."""
        self._write("finish", step=step)

    def say(self, message: str) -> None:
        """Write the message as an event."""
        self._write("note", message=message)


class LiveBars:
    """Bars with the time left for running steps; finished ones scroll away as lines."""

    def __init__(self, console: Console) -> None:
        from rich.progress import (
            BarColumn,
            Progress,
            TaskID,
            TaskProgressColumn,
            TextColumn,
            TimeRemainingColumn,
        )

        self._bars = Progress(
            TextColumn("{task.description}", markup=False),
            BarColumn(bar_width=20),
            TaskProgressColumn(),
            TimeRemainingColumn(elapsed_when_finished=True),
            TextColumn("{task.fields[note]}", markup=False, style="dim"),
            console=console,
            transient=True,
        )
        self._tasks: dict[str, TaskID] = {}

    def __enter__(self) -> LiveBars:
        self._bars.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._bars.stop()

    def start(self, step: str, total: int) -> None:
        """Show a bar for ``step``."""
        self._tasks[step] = self._bars.add_task(step, total=total or None, note="")

    def advance(self, step: str, done: int = 1, note: str = "") -> None:
        """Move the bar and show the latest note."""
        task = self._tasks.get(step)
        if task is not None:
            self._bars.advance(task, done)
            if note:
                self._bars.update(task, note=note)

    def finish(self, step: str) -> None:
        """Replace the bar by a line."""
        task = self._tasks.pop(step, None)
        if task is None:
            return
        found = next(t for t in self._bars.tasks if t.id == task)
        line = _finished(step, found.elapsed or 0.0, found.fields["note"])
        self._bars.remove_task(task)
        self._bars.console.print(line, style="dim", markup=False, highlight=False)

    def say(self, message: str) -> None:
        """Write the message above the bars."""
        self._bars.console.print(message, markup=False, highlight=False)


def _finished(step: str, seconds: float, note: str) -> str:
    return f"{step}: {note + ', ' if note else ''}{duration(seconds)}"


@contextmanager
def shown_progress(*, as_json: bool) -> Iterator[Progress]:
    """Give the progress display that suits where the output goes.

    JSON lines go to standard output; everything else goes to standard error, so that results can
    be piped.
    """
    if as_json:
        yield JsonLines(sys.stdout)
    elif sys.stderr.isatty():
        from rich.console import Console

        with LiveBars(Console(stderr=True)) as bars:
            yield bars
    else:
        yield PlainLines(sys.stderr)
