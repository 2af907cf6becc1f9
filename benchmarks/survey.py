"""How fast a survey runs, and how much faster than a loop over SciPy's solver.

    python benchmarks/survey.py [--topologies 200] [--sets 2048] [--scipy-sets 40]

Surveys a random sample of the 16,038 three-node enzyme networks for adaptation on one core,
projects the time for all of them with 10,000 sets each, and scores some of the same parameter sets
with ``scipy.integrate.solve_ivp`` (LSODA, the same tolerances), once with right-hand sides written
by hand as plain Python, to compare both time and outcome.
"""

from __future__ import annotations

import argparse
import os
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
from scipy.integrate import solve_ivp

from ruleout.kernel.compiled import set_threads
from ruleout.survey import Settings, read_family, survey
from ruleout.survey.behaviours.adaptation import TIMES, Adaptation, top_of
from ruleout.survey.behaviours.base import ATOL, RTOL
from ruleout.survey.enumeration import enumerate_family, label
from ruleout.survey.sampling import parameter_sets
from ruleout.survey.systems import Member

FAMILY = Path(__file__).parent.parent / "families" / "adaptation.toml"
LONG = 1e6


def plain_rhs(member: Member, values: np.ndarray):
    """Return dy/dt of one parameter set, as a careful user of SciPy would write it."""
    family, signs = member.family, member.signs
    known = dict(zip(member.parameters, values.tolist(), strict=True))
    terms = []
    for j, node in enumerate(family.nodes):
        for i in range(3):
            if signs[i, j]:
                name = family.edge_name(i, j)
                terms.append((j, i, None, int(signs[i, j]), name))
        if any(j == target for target, _ in family.drives):
            terms.append((j, None, "input", 1, f"I_on_{node}"))
        for word, sign in (("raise", 1), ("lower", -1)):
            if f"{word}_{node}.strength" in known:
                terms.append((j, None, family.constant, sign, f"{word}_{node}"))
    rates = [
        (j, i, level, sign, known[f"{name}.strength"], known[f"{name}.target_half"])
        for j, i, level, sign, name in terms
    ]

    def rhs(_t: float, y: np.ndarray, dose: float) -> list[float]:
        change = [0.0, 0.0, 0.0]
        x = y.tolist()
        for j, i, level, sign, strength, half in rates:
            amount = x[i] if i is not None else dose if level == "input" else level
            side = 1.0 - x[j] if sign > 0 else x[j]
            change[j] += sign * strength * amount * side / (half + max(side, 0.0))
        return change

    return rhs


def scipy_score(member: Member, values: np.ndarray, of: Adaptation) -> tuple[bool, bool]:
    """Return whether one parameter set adapts and whether all solves succeeded."""
    rhs = plain_rhs(member, values)
    more = {"method": "LSODA", "rtol": RTOL, "atol": ATOL}
    start = np.array(member.family.starts)
    first = solve_ivp(rhs, (0.0, LONG), start, args=(of.before,), **more)
    rest = first.y[:, -1]
    if not (first.success and np.isfinite(rest).all()):
        return False, False
    last = solve_ivp(rhs, (0.0, LONG), rest, args=(of.after,), t_eval=[*TIMES, LONG], **more)
    if not (last.success and np.isfinite(last.y).all()):
        return False, False
    step = abs(of.after - of.before) / of.before
    departure = np.abs(last.y[2] / rest[2] - 1.0) / step
    peak = top_of(departure[None, :-1])[0]
    shown = rest[2] > of.floor and peak > of.sensitivity and departure[-1] < 1.0 / of.precision
    return bool(shown), True


def main() -> None:
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--topologies", type=int, default=200)
    options.add_argument("--sets", type=int, default=2048)
    options.add_argument("--scipy-sets", type=int, default=40)
    given = options.parse_args()
    set_threads(1)
    source = read_family(FAMILY)
    (behaviour,) = source.behaviours
    everything = enumerate_family(source.family)
    settings = Settings(sets=given.sets, sample=given.topologies)
    warm = replace(settings, sets=8, sample=2)
    survey(source, warm)
    begin, cpu = time.perf_counter(), time.process_time()
    result = survey(source, settings)
    wall, cpu = time.perf_counter() - begin, time.process_time() - cpu
    per_set = cpu / (given.topologies * given.sets)
    print(f"{given.topologies} topologies x {given.sets} sets: {wall:.1f} s wall, {cpu:.1f} s CPU")
    print(f"  {1e6 * per_set:.1f} us a set (CPU), {60 * given.topologies / cpu:.0f} topologies/min")
    whole = len(everything) * 10_000 * per_set / 3600
    print(
        f"  all {len(everything):,} topologies x 10,000 sets: {whole:.1f} h on one core, "
        f"{whole / 2:.1f} h on two"
    )
    rng = np.random.default_rng(1)
    rows = result.topologies.sort_values("robustness", ascending=False)
    names = [*rows["topology"][:4], *rng.choice(rows["topology"][4:], 6, replace=False)]
    chosen = [s for s in everything if label(s) in set(names)]
    ours, theirs, spent = [], [], 0.0
    for signs in chosen:
        member = Member(source.family, signs)
        sets = parameter_sets(
            source.family, member.parameters, given.sets, source.method, 1, label(signs)
        )
        score = behaviour.score(member.subject(sets))
        showing = np.flatnonzero(score.shown)[: given.scipy_sets // 2]
        some = rng.choice(given.sets, given.scipy_sets // 4, replace=False)
        for k in {*showing.tolist(), *some.tolist()}:
            begin = time.process_time()
            shown, solved = scipy_score(member, sets[k], behaviour)
            spent += time.process_time() - begin
            if solved and score.judged[k]:
                ours.append(score.shown[k])
                theirs.append(shown)
    count = len(ours)
    print(f"SciPy loop on {count} of these sets: {1e3 * spent / count:.1f} ms a set (CPU)")
    print(f"  {spent / count / per_set:.0f} times slower")
    print(f"  same outcome in {np.sum(np.array(ours) == np.array(theirs))} of {count}, ", end="")
    print(f"of which {np.sum(ours)} adapt by us and {np.sum(theirs)} by SciPy")
    print(f"Load during the run: {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores")


if __name__ == "__main__":
    main()
