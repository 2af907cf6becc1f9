"""Work against precision: this kernel, SciPy and CVODE on the same problems, in one run.

    python benchmarks/kernel.py [--json FILE] [--figure FILE] [--core N] [--rows 512]

Measures processor time per solve and the true error against Radau at 1e-12 on four problems with
drawn parameters. All run on one pinned core:

- this kernel, one thread;
- ``scipy.integrate.solve_ivp`` (LSODA) and ``odeint``, with a right-hand side in plain Python and
  with one compiled by numba;
- a C program on SUNDIALS CVODE (Debian: ``apt install libsundials-dev``), BDF with a dense Newton
  iteration and, where the problem is not stiff, Adams with fixed points; skipped with a message
  where it cannot be built.

The error of a solve is its largest deviation over states and times, each state's divided by the
largest it reaches; curves show the median over solves. Ratios are taken at equal error, by
interpolating the kernel's curve in logarithms. The other solvers' right-hand sides and CVODE's
difference-quotient Jacobian are what their users write; the kernel derives its own Jacobian.
"""

from __future__ import annotations

import argparse
import json
import os
import platform
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from kernel_problems import PROBLEMS, RELAY, Array, Problem
from scipy.integrate import odeint, solve_ivp

from ruleout.kernel import Program, Protocol, Status, set_threads

HERE = Path(__file__).parent
RTOLS = (1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-8, 1e-9, 1e-10)
COMPARED = (1e-4, 1e-6, 1e-8)
CHECKED = 12
"""Solves with a Radau solution, on which errors and the slower solvers are measured."""
KERNEL = "kernel"
NAMES = {
    KERNEL: "this kernel",
    "solve_ivp": "solve_ivp LSODA",
    "odeint": "odeint",
    "solve_ivp_numba": "solve_ivp LSODA, numba",
    "odeint_numba": "odeint, numba",
    "cvode_bdf": "C on CVODE, BDF",
    "cvode_adams": "C on CVODE, Adams",
}
TARGETS = {"solve_ivp": 400.0, "odeint": 150.0, "cvode": 25.0}

Run = Callable[[float], tuple[float, Array]]
"""From rtol to seconds per solve and states (CHECKED, M, N)."""


def exact_states(problem: Problem) -> Array:
    """Return Radau's solutions at 1e-12 of the checked parameter sets."""
    slopes, jacobian = problem.compiled(), problem.jacobian()
    states = []
    for p in problem.draw(CHECKED):
        done = solve_ivp(
            slopes,
            (0.0, problem.times[-1]),
            problem.start,
            "Radau",
            problem.times,
            args=(p,),
            jac=jacobian,
            rtol=1e-12,
            atol=1e-10 * problem.small,
        )
        if not done.success:
            raise RuntimeError(f"{problem.name}: {done.message}")
        states.append(done.y.T)
    return np.array(states)


def error_of(states: Array, exact: Array) -> float:
    """Return the median over solves of the largest scaled deviation."""
    scale = np.abs(exact).max(axis=1, keepdims=True)
    return float(np.median(np.max(np.abs(states - exact) / scale, axis=(1, 2))))


def best_time(run: Callable[[], Any], seconds: float = 0.5) -> float:
    """Return the least processor time of ``run`` over repeats that last about ``seconds``."""
    run()
    times: list[float] = []
    while len(times) < 3 or sum(times) < seconds:
        begin = time.process_time()
        run()
        times.append(time.process_time() - begin)
        if len(times) >= 1000:
            break
    return min(times)


def kernel_run(problem: Problem, rows: int) -> Run:
    """Return the kernel, solving ``rows`` parameter sets a call."""
    system = problem.system()
    program = Program(system)
    n, m = len(system.states), len(system.parameters)
    plan = Protocol(
        breaks=np.zeros(1),
        factor=np.ones((1, m)),
        shift=np.zeros((1, m)),
        keep=np.ones((1, n)),
        add=np.zeros((1, n)),
        times=problem.times,
    )
    p = problem.draw(rows)
    y0 = np.tile(problem.start, (rows, 1))
    which = np.zeros(rows, dtype=np.int64)

    def run(rtol: float) -> tuple[float, Array]:
        atol = rtol * problem.small

        def solve() -> Any:
            return program.solve(y0, p, [plan], which, rtol=rtol, atol=atol)

        solution = solve()
        if not (solution.status == Status.OK).all():
            raise RuntimeError(f"{problem.name}: a solve failed at rtol {rtol:g}")
        return best_time(solve) / rows, solution.states[:CHECKED]

    return run


def scipy_run(problem: Problem, solver: str, *, compiled: bool) -> Run:
    """Return ``solve_ivp`` (LSODA) or ``odeint`` over the checked parameter sets."""
    slopes = problem.compiled() if compiled else problem.python()
    sets = problem.draw(CHECKED)
    if not compiled:
        sets = [tuple(p) for p in sets.tolist()]  # type: ignore[assignment]
    grid = np.concatenate([[0.0], problem.times])
    span = (0.0, problem.times[-1])
    exact_shape = (len(problem.times), len(problem.start))

    def run(rtol: float) -> tuple[float, Array]:
        atol = rtol * problem.small

        def one(p: Any) -> Array:
            if solver == "odeint":
                result: Array = odeint(
                    slopes,
                    problem.start,
                    grid,
                    args=(p,),
                    tfirst=True,
                    rtol=rtol,
                    atol=atol,
                    mxstep=10**6,
                )[1:]
                return result
            done = solve_ivp(
                slopes, span, problem.start, "LSODA", problem.times, args=(p,), rtol=rtol, atol=atol
            )
            return np.asarray(done.y.T) if done.success else np.full(exact_shape, np.nan)

        states = np.array([one(p) for p in sets])
        return best_time(lambda: [one(p) for p in sets]) / len(sets), states

    return run


def cvode_run(problem: Problem, method: str, folder: Path) -> Run:
    """Build the C program for ``problem`` and return it; RuntimeError if it cannot be built."""
    header, program = folder / f"{problem.name}.h", folder / f"{problem.name}_cvode"
    header.write_text(problem.c_source())
    libraries = ["sundials_cvode", "sundials_nvecserial", "m"]
    command = ["cc", "-O3", "-march=native", f'-DPROBLEM_FILE="{header}"']
    command += [str(HERE / "cvode_solve.c"), "-o", str(program), *(f"-l{x}" for x in libraries)]
    try:
        built = subprocess.run(command, capture_output=True, text=True, check=False)
    except FileNotFoundError as error:
        raise RuntimeError(f"no C compiler ({error})") from error
    if built.returncode:
        raise RuntimeError(built.stderr.strip().splitlines()[0])
    sets = problem.draw(CHECKED)

    def run(rtol: float) -> tuple[float, Array]:
        head = [len(sets), len(problem.times), rtol, rtol * problem.small]
        numbers = np.concatenate([head, problem.start, problem.times, sets.ravel()])
        source, target = folder / "input", folder / "output"
        numbers.tofile(source)
        arguments = [str(program), str(source), str(target), method, "40"]
        done = subprocess.run(arguments, capture_output=True, text=True, check=True)
        states = np.fromfile(target).reshape(len(sets), len(problem.times), -1)
        return float(done.stdout) / len(sets), states

    return run


def solvers(problem: Problem, rows: int, folder: Path) -> dict[str, Run]:
    """Return every solver that can be run on ``problem``."""
    runs = {KERNEL: kernel_run(problem, rows)}
    for solver in ("solve_ivp", "odeint"):
        runs[solver] = scipy_run(problem, solver, compiled=False)
        runs[f"{solver}_numba"] = scipy_run(problem, solver, compiled=True)
    try:
        runs["cvode_bdf"] = cvode_run(problem, "b", folder)
        if not problem.stiff:
            runs["cvode_adams"] = cvode_run(problem, "a", folder)
    except RuntimeError as error:
        print(f"C on CVODE is skipped: {error}")
    return runs


def measure(problem: Problem, rows: int, folder: Path) -> dict[str, list[dict[str, float]]]:
    """Return the work-precision curve of every solver."""
    exact = exact_states(problem)
    curves: dict[str, list[dict[str, float]]] = {}
    for name, run in solvers(problem, rows, folder).items():
        curves[name] = []
        for rtol in RTOLS:
            seconds, states = run(rtol)
            error = error_of(states, exact)
            if not np.isfinite(error):
                print(f"{NAMES[name]} fails at rtol {rtol:g}: left out")
                continue
            curves[name].append({"rtol": rtol, "microseconds": seconds * 1e6, "error": error})
    return curves


def time_at(curve: list[dict[str, float]], error: float) -> float:
    """Return the microseconds at ``error``, interpolated in logarithms.

    For an error beyond its loosest tolerance, a solver's time there; NaN beyond its tightest.
    """
    x = np.log([point["error"] for point in curve])[::-1]
    y = np.log([point["microseconds"] for point in curve])[::-1]
    order = np.argsort(x)
    inside = np.interp(np.log(error), x[order], y[order], left=np.nan)
    return float(np.exp(inside))


def ratios(curves: dict[str, list[dict[str, float]]]) -> dict[str, dict[str, float]]:
    """Return how many times the kernel is faster, at each solver's own error for each rtol."""
    found: dict[str, dict[str, float]] = {}
    for name, curve in curves.items():
        if name == KERNEL:
            continue
        found[name] = {
            f"{point['rtol']:g}": point["microseconds"] / time_at(curves[KERNEL], point["error"])
            for point in curve
            if point["rtol"] in COMPARED
        }
    return found


def headline(curves: dict[str, list[dict[str, float]]]) -> dict[str, float]:
    """Return the ratios of the targets.

    SciPy's at the error that LSODA has at rtol 1e-6, CVODE's (the faster of its two methods) at
    the error that it has itself there.
    """
    lsoda = next(p for p in curves["solve_ivp"] if p["rtol"] == 1e-6)
    own = time_at(curves[KERNEL], lsoda["error"])
    found = {name: time_at(curves[name], lsoda["error"]) / own for name in ("solve_ivp", "odeint")}
    cvode = [
        next(p for p in curves[name] if p["rtol"] == 1e-6)
        for name in ("cvode_bdf", "cvode_adams")
        if name in curves
    ]
    if cvode:
        found["cvode"] = min(p["microseconds"] / time_at(curves[KERNEL], p["error"]) for p in cvode)
    return found


def compile_milliseconds() -> float:
    """Return the least time to compile the relay's equations."""
    system = RELAY.system()
    return 1e3 * best_time(lambda: Program(system))


def first_use_seconds() -> float:
    """Return the processor time of importing, compiling and solving once in a new interpreter.

    The kernel's own: importing NumPy and SciPy, which the benchmark needs anyway, is taken off.
    """
    once = "kernel.best_time = lambda run: 0.0; kernel.kernel_run(kernel.RELAY, 12)(1e-6)"
    use = f"import kernel; {once}"
    taken = []
    for code in (use, "import numpy, scipy.integrate"):
        times = []
        for _ in range(3):
            begin = os.times()
            subprocess.run([sys.executable, "-c", code], cwd=HERE, check=True)
            end = os.times()
            user = end.children_user - begin.children_user
            times.append(user + end.children_system - begin.children_system)
        taken.append(min(times))
    return taken[0] - taken[1]


def print_problem(problem: Problem, curves: dict[str, list[dict[str, float]]]) -> None:
    """Print the table of one problem."""
    print(f"\n{problem.title}")
    head = "".join(f"{f'rtol {rtol:g}':>24}" for rtol in COMPARED)
    units = f"{'us':>12}{'error':>12}" * len(COMPARED)
    print(f"{'':24}{head}\n{'':24}{units}")
    for name, curve in curves.items():
        points = {point["rtol"]: point for point in curve}
        cells = [
            f"{points[r]['microseconds']:12.2f}{points[r]['error']:12.1e}"
            if r in points
            else f"{'failed':>24}"
            for r in COMPARED
        ]
        print(f"{NAMES[name]:24}{''.join(cells)}")
    print("times faster than, at the same true error:")
    for name, values in ratios(curves).items():
        cells = [f"{values.get(f'{rtol:g}', float('nan')):24.0f}" for rtol in COMPARED]
        print(f"{NAMES[name]:24}{''.join(cells)}")


def draw_curves(results: dict[str, Any], path: Path) -> None:
    """Draw the work-precision curves of all problems."""
    import matplotlib as mpl

    mpl.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(2, 2, figsize=(9.0, 7.0), layout="constrained")
    for axis, problem in zip(axes.flat, PROBLEMS, strict=True):
        for name, curve in results["problems"][problem.name]["curves"].items():
            errors = [p["error"] for p in curve]
            style = {"lw": 2.5, "marker": "o"} if name == KERNEL else {"lw": 1.2, "marker": "."}
            axis.loglog(errors, [p["microseconds"] for p in curve], label=NAMES[name], **style)
        axis.set_title(problem.title, fontsize=10)
        axis.invert_xaxis()
        axis.set_xlabel("true error (median over solves)")
        axis.set_ylabel("microseconds per solve")
        axis.grid(alpha=0.3)
    axes.flat[0].legend(fontsize=7)
    path.parent.mkdir(parents=True, exist_ok=True)
    figure.savefig(path, dpi=150)


def main() -> None:
    """Measure, print, and write what was asked for."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0] if __doc__ else None)
    parser.add_argument("--json", type=Path, help="write all numbers here")
    parser.add_argument("--figure", type=Path, help="draw the curves here")
    parser.add_argument("--core", type=int, default=0, help="core to run on")
    parser.add_argument("--rows", type=int, default=512, help="solves per call of the kernel")
    options = parser.parse_args()
    if hasattr(os, "sched_setaffinity"):
        os.sched_setaffinity(0, {options.core})
    set_threads(1)
    results: dict[str, Any] = {"machine": platform.processor() or platform.machine()}
    results["compile_milliseconds"] = compile_milliseconds()
    results["first_use_seconds"] = first_use_seconds()
    results["rows_per_call"] = options.rows
    results["problems"] = {}
    with tempfile.TemporaryDirectory() as folder:
        for problem in PROBLEMS:
            curves = measure(problem, options.rows, Path(folder))
            print_problem(problem, curves)
            found = {"title": problem.title, "curves": curves, "ratios": ratios(curves)}
            results["problems"][problem.name] = found
    results["targets"] = {
        name: {"wanted": TARGETS[name], "measured": ratio}
        for name, ratio in headline(results["problems"]["relay"]["curves"]).items()
    }
    print("\nrelay, at equal true error, against the targets:")
    for name, pair in results["targets"].items():
        print(f"{name:24}{pair['measured']:10.0f} times faster, wanted {pair['wanted']:.0f}")
    print(f"compiling a variant: {results['compile_milliseconds']:.1f} ms, wanted 30")
    print(f"first use of a warm installation: {results['first_use_seconds']:.2f} s, wanted 1")
    if options.json:
        options.json.parent.mkdir(parents=True, exist_ok=True)
        options.json.write_text(json.dumps(results, indent=1) + "\n")
    if options.figure:
        draw_curves(results, options.figure)


if __name__ == "__main__":
    main()
