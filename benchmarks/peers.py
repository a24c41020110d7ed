"""How long eigen1d takes for an error of 1e-10, and how long four other methods take.

    python -m benchmarks.peers [--only problems many huge]

The other methods are in `peer_methods`, each at its best size and span (`best`); the problems and
their reference levels in `problems`. Errors are the largest over all wanted levels, relative to the
depth of the well or table, for the quartic oscillator relative to each level's own height.

For eigen1d: `solve` with a profile made just before, of which nothing is known yet; making the
profile and solving it; and solving it again. The times of the others include their matrices.
"""

import argparse
import json
import os
import subprocess
import sys

import numpy as np

from benchmarks.peer_methods import lowest
from benchmarks.problems import (
    ATOMIC,
    invented_table,
    layered_problems,
    smooth_problems,
    table_problems,
    walled,
)
from benchmarks.timing import Timing, machine, measure
from eigen1d import solve

WANTED = 1e-10
TRIDIAGONAL = ("3-point", "extrapolated")  # which use one thread whatever there is
# At least so many times faster: than the fastest method that reaches 1e-10; than eigh_tridiagonal.
SMOOTH, LAYERS, TABLE, MANY, HUGE = 3, 100, 5, 10, 4


def the_others():
    """What each method needs, the faster of all threads and one: {problem: {method: found}}."""
    one_thread = {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}
    found = {}
    for threads, options, extra in (
        ("all threads", [], {}),
        ("one thread", ["--dense-only"], one_thread),
    ):
        run = subprocess.run(
            [sys.executable, "-m", "benchmarks.best", *options],
            env=os.environ | extra,
            stdout=subprocess.PIPE,
            check=True,
            text=True,
        )
        for line in run.stdout.splitlines():
            new = json.loads(line)
            new["timing"], new["threads"] = Timing(**new["timing"]), threads
            methods = found.setdefault(new["problem"], {})
            old = methods.get(new["method"])
            if old is None or new["timing"].median < old["timing"].median:
                methods[new["method"]] = new
    return found


def eigen1d_times(problem):
    """(error, {what: Timing}) for the span that reaches WANTED soonest."""
    fastest = None
    for decay in problem.decays if problem.kind == "smooth" else problem.decays[:1]:
        make = problem.make(decay)
        error = problem.error(solve(make(), count=problem.count).energy)
        if error > WANTED:
            continue
        timing = measure(lambda p: solve(p, count=problem.count).energy, make, 0.1)
        if fastest is None or timing.median < fastest[0]:
            fastest = timing.median, make, error
    if fastest is None:
        raise SystemExit(f"{problem.name}: eigen1d does not reach {WANTED:g} with any span")
    _, make, error = fastest
    known = make()
    return error, {
        "solve": measure(lambda p: solve(p, count=problem.count).energy, make),
        "make, solve": measure(lambda: solve(make(), count=problem.count).energy),
        "solve again": measure(lambda: solve(known, count=problem.count).energy),
    }


def row_matrix(x, V, mass):
    """The 3-point matrix of equidistant rows as they are, psi = 0 at the first and last.

    V may be a stack of tables; then the diagonals are.
    """
    h = x[1] - x[0]
    mass = np.broadcast_to(mass, x.shape)
    k = 1 / (h**2 * (mass[:-1] + mass[1:]))  # 1 / (2 h^2 m half way)
    return k[:-1] + k[1:] + V[..., 1:-1], -k[1:-1]


def on_the_rows(x, V, mass, count, driver="stebz"):
    """Levels of a table by eigh_tridiagonal on its rows."""
    return lowest(row_matrix(x, V, mass), count, driver)


def show(name, what, error, timing, note=""):
    """Print one row of the table of times."""
    print(f"{name:25s} {what:21s} {error:8.1e}  {timing!s:28s} {note}", flush=True)


def compare_problems():
    """Print all times of all problems; return rows of the final table."""
    print(f"{'problem':25s} {'method':21s} {'error':8s}  time (middle half of the runs)")
    others, wanted = the_others(), []
    for problem in smooth_problems() + layered_problems() + table_problems():
        error, times = eigen1d_times(problem)
        for what, timing in times.items():
            show(problem.name, f"eigen1d: {what}", error, timing)
        reach = {}
        for method, found in others[problem.name].items():
            threads = "" if method in TRIDIAGONAL else f", {found['threads']}"
            note = found["choice"] + threads
            if found["error"] > WANTED:
                note += "; its best"
            else:
                reach[method] = found["timing"].median
            show(problem.name, method, found["error"], found["timing"], note)
        if problem.kind == "table":
            wanted.append(compare_on_rows(problem, times))
        else:
            wanted += ratios(problem, times, reach)
        print()
    return wanted


def ratios(problem, times, reach):
    """Rows of the final table: (what, wanted, measured)."""
    target = SMOOTH if problem.kind == "smooth" else LAYERS
    rows = []
    for what in ("solve", "make, solve"):
        least = min(reach, key=reach.get)
        rows.append((f"{problem.name}: {what}, {least}", target, reach[least] / times[what].median))
        whole = {method: time for method, time in reach.items() if "by layers" not in method}
        if len(whole) < len(reach):
            least = min(whole, key=whole.get)
            name = f"{problem.name}: {what}, {least}"
            rows.append((name, target, whole[least] / times[what].median))
    return rows


def compare_on_rows(problem, times):
    """Print eigh_tridiagonal on the rows of a table; return the row of the final table."""
    data = problem.x, problem.V, problem.mass, problem.count
    fastest = None
    for driver in ("stebz", "stemr", "sterf"):
        timing = measure(lambda driver=driver: on_the_rows(*data, driver))
        if fastest is None or timing.median < fastest.median:
            fastest, note = timing, driver
    show(problem.name, "on the rows", problem.error(on_the_rows(*data)), fastest, note)
    return f"{problem.name}: solve, on its rows", TABLE, fastest.median / times["solve"].median


def compare_many(profiles=2000, rows=200, count=5):
    """Print profiles a second; return a row of the final table."""
    from eigen1d import solve_many

    x, V, mass = invented_table(rows)
    V = V + 0.5 * np.random.default_rng(21).normal(size=(profiles, rows))
    walls = {"left": "wall", "right": "wall", "units": ATOMIC}
    ours = measure(lambda: solve_many(x=x, V=V, mass=mass, count=count, **walls).energy)
    energy = solve_many(x=x, V=V, mass=mass, count=count, **walls).energy
    depth = np.ptp(V, axis=1)[:, None]
    some = range(0, profiles, profiles // 20)
    single = np.array([solve(walled(x, V[i], mass), count=count).energy for i in some])
    error = np.max(np.abs(energy[some] - single) / depth[some])
    name = f"{profiles} x {rows} rows"
    show(name, "solve_many", error, ours, f"{profiles / ours.median:.0f} profiles a second")

    def loop(driver):
        diagonals, beside = row_matrix(x, V, mass)
        return np.array([lowest((diagonal, beside), count, driver) for diagonal in diagonals])

    fastest = None
    for driver in ("stebz", "stemr", "sterf"):
        timing = measure(lambda driver=driver: loop(driver), budget=0.0, least=3)
        if fastest is None or timing.median < fastest.median:
            fastest, note = timing, driver
    error = np.max(np.abs(loop("stebz") - energy) / depth)
    note += f", {profiles / fastest.median:.0f} profiles a second"
    show(name, "loop on the rows", error, fastest, note)
    print()
    return [("many profiles: solve_many, loop on rows", MANY, fastest.median / ours.median)]


def compare_huge(rows=1_000_000, count=10):
    """Print times of one large table; return a row of the final table.

    stemr would need a square matrix, and sterf all levels: stebz is the only driver.
    """
    x, V, mass = invented_table(rows)
    ours = measure(lambda p: solve(p, count=count).energy, lambda: walled(x, V, mass), 3.0)
    levels = solve(walled(x, V, mass), count=count)
    depth, name = np.ptp(V), f"{rows} rows"
    show(name, "eigen1d: solve", np.max(levels.budget.numeric) / depth, ours, "error: its bracket")
    show(name, "eigen1d: make", 0.0, measure(lambda: walled(x, V, mass), budget=3.0))
    theirs = measure(lambda: on_the_rows(x, V, mass, count), budget=0.0, least=3)
    error = np.max(np.abs(on_the_rows(x, V, mass, count) - levels.energy)) / depth
    show(name, "on the rows", error, theirs, "stebz")
    print()
    return [(f"{rows} rows: solve, on its rows", HUGE, theirs.median / ours.median)]


PARTS = {"problems": compare_problems, "many": compare_many, "huge": compare_huge}


def main(argv=None):
    """Print all, then what was wanted and what was measured."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--only", nargs="+", choices=PARTS, default=list(PARTS))
    args = parser.parse_args(argv)
    print(machine(), end="\n\n")
    rows = [row for part in args.only for row in PARTS[part]()]
    print(f"{'times faster':66s} wanted  measured")
    for what, wanted, measured in rows:
        print(f"{what:66s} {wanted:6.0f}  {measured:8.3g}")


if __name__ == "__main__":
    main()
