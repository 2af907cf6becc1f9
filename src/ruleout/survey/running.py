"""A survey from start to end: blocks of topologies scored, stored, resumed, put into tables."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from multiprocessing import get_context
from pathlib import Path
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from ruleout import __version__
from ruleout.errors import InputError, RuleoutError
from ruleout.progress import Progress, Silent
from ruleout.seeds import generator
from ruleout.store import Store, digest, software
from ruleout.survey.enumeration import enumerate_family
from ruleout.survey.mechanisms import AnyFamily, MechanismFamily, VariantRoster
from ruleout.survey.reading import FamilyFile
from ruleout.survey.roster import MotifRoster, Roster
from ruleout.survey.scoring import Arrays, score_block
from ruleout.survey.tables import Counts, tabulate
from ruleout.survey.types import Settings, Survey

_SETS_PER_BLOCK: Final = 2**17
_MOST_PER_BLOCK: Final = 256
STEP: Final = "topologies"


def survey(
    source: FamilyFile,
    settings: Settings | None = None,
    *,
    out: Path | None = None,
    progress: Progress | None = None,
) -> Survey:
    """Score every wiring of a family and say what those that work have in common.

    Parameters
    ----------
    source : FamilyFile
        See :func:`read_family`.
    settings : Settings, optional
        Those of the file (sets, method) with seed 1 if not given.

    Other Parameters
    ----------------
    out : Path, optional
        Folder for finished blocks: a survey that was stopped goes on from there. Without it
        nothing is written.
    progress : Progress, optional

    Returns
    -------
    Survey
        Depends on the family, the settings' seed, sets and method, and on nothing else.

    Raises
    ------
    InputError
        If the family is empty or the settings cannot be used.
    """
    settings = settings or Settings(sets=source.sets, method=source.method)
    _check_settings(settings)
    tell = progress or Silent()
    everything = _roster(source.family)
    if not len(everything):
        raise InputError("no wiring fits this family; loosen the limits on edges, or 'must_reach'")
    roster = _sample(everything, settings)
    store = None if out is None else Store(out)
    counts = Counts.empty(roster, len(source.behaviours))
    tell.start(STEP, len(roster))
    for rows, block in _blocks(source, roster, settings, store):
        counts.take(rows, block)
        tell.advance(STEP, len(rows), note=_note(source, roster.pick(rows), block))
    tell.finish(STEP)
    if store:
        store.tell_redone(tell)
    meta = {
        "version": __version__,
        "title": source.family.title,
        "seed": settings.seed,
        "sets": settings.sets,
        "method": settings.method,
        "level": settings.level,
        "working": settings.working,
        "family_size": len(everything),
        "surveyed": len(roster),
        "behaviours": {b.name: repr(b) for b in source.behaviours},
    }
    return tabulate(source, counts, settings, meta)


def _check_settings(settings: Settings) -> None:
    if settings.sets < 1:
        raise InputError(f"--sets {settings.sets}: give at least 1 parameter set")
    if settings.sample is not None and settings.sample < 1:
        raise InputError(f"--sample {settings.sample}: give at least 1 topology")
    if not 0.5 <= settings.level < 1.0:
        raise InputError(f"level {settings.level:g}: give a confidence between 0.5 and 1")
    if settings.working < 1:
        raise InputError(f"working {settings.working}: give at least 1 showing set")


def _roster(family: AnyFamily) -> Roster:
    if isinstance(family, MechanismFamily):
        return VariantRoster(family)
    return MotifRoster(family, enumerate_family(family))


def _sample(roster: Roster, settings: Settings) -> Roster:
    if settings.sample is None or settings.sample >= len(roster):
        return roster
    chooser = generator(settings.seed, "survey", "sample")
    return roster.pick(np.sort(chooser.choice(len(roster), settings.sample, replace=False)))


def _blocks(
    source: FamilyFile, roster: Roster, settings: Settings, store: Store | None
) -> Iterator[tuple[NDArray[np.intp], Arrays]]:
    """Yield rows and scores of blocks as they are found or finished."""
    order, labels = roster.order(), roster.labels()
    size = max(1, min(_MOST_PER_BLOCK, _SETS_PER_BLOCK // settings.sets))
    waiting = []
    for first in range(0, len(order), size):
        rows = order[first : first + size]
        key = f"block-{labels[rows[0]].replace('|', '_')}-{len(rows)}"
        fingerprint = digest(
            software(), source.family, source.behaviours, settings.sets, settings.method,
            settings.seed, [labels[t] for t in rows],
        )  # fmt: skip
        found = store.get(key, fingerprint) if store else None
        if found is not None:
            yield rows, found
        else:
            waiting.append((rows, key, fingerprint))
    for (rows, key, fingerprint), block in _computed(source, roster, settings, waiting):
        if store:
            store.put(key, fingerprint, block)
        yield rows, block


Task = tuple[NDArray[np.intp], str, str]


def _computed(
    source: FamilyFile, roster: Roster, settings: Settings, waiting: list[Task]
) -> Iterator[tuple[Task, Arrays]]:
    """Yield blocks as they are computed, in this process or in several."""
    more = (settings.sets, settings.method, settings.seed)
    if settings.workers == 1 or len(waiting) < 2:
        for task in waiting:
            yield task, score_block(roster.pick(task[0]), source.behaviours, *more)
        return
    pool = ProcessPoolExecutor(
        settings.workers, mp_context=get_context("spawn"), initializer=_prepare_worker
    )
    try:
        running: dict[Future[Arrays], Task] = {}
        todo = iter(waiting)
        while True:
            while len(running) < 2 * settings.workers and (new := next(todo, None)) is not None:
                future = pool.submit(score_block, roster.pick(new[0]), source.behaviours, *more)
                running[future] = new
            if not running:
                break
            for future in wait(running, return_when=FIRST_COMPLETED).done:
                yield running.pop(future), future.result()
    except BrokenProcessPool as error:
        raise RuleoutError(
            "a worker process ended unexpectedly, most often for lack of memory; finished "
            "topologies are kept: give the same command again, with fewer --workers"
        ) from error
    finally:
        pool.shutdown(wait=False, cancel_futures=True)


def _prepare_worker() -> None:
    """One thread each, as the processes share the cores; interrupts are the parent's affair."""
    import signal

    from ruleout.kernel.compiled import set_threads

    signal.signal(signal.SIGINT, signal.SIG_IGN)
    set_threads(1)


def _note(source: FamilyFile, roster: Roster, block: Arrays) -> str:
    """Return the most robust find of a block in words, empty if there is none."""
    with np.errstate(invalid="ignore"):
        share = np.nan_to_num(block["shown"] / block["judged"])
    b, h = np.unravel_index(int(np.argmax(share)), share.shape)
    if not share[b, h]:
        return ""
    name: Any = source.behaviours[h].name
    return f"{roster.words()[b]}: {name} in {100 * share[b, h]:.2g} % of sets"
