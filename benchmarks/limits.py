"""What the core can do at most, and how much memory a solution takes."""

import json
import pathlib
import re
import subprocess
import sys
import tempfile

import numba
import numpy as np

from benchmarks.problems import invented_table, walled
from benchmarks.timing import measure
from eigen1d import solve

_NUMBERS, _ROUNDS, _DEGREE = 512, 1000, 32  # 4 kB each: they stay in the nearest cache


@numba.njit(fastmath={"contract"})
def _polynomials(x, y, rounds):
    # One fused multiply-add after another for each number; the numbers are independent of each
    # other, so vector lanes are full and latencies overlap.
    for _ in range(rounds):
        for i in range(x.size):
            a, s = x[i], y[i]
            for _ in range(_DEGREE):
                s = s * a + 0.5
            y[i] = s


def multiply_add():
    """Nanoseconds a fused multiply-add of doubles on one core, with all lanes full: the limit."""
    x, y = np.linspace(-0.5, 0.5, _NUMBERS), np.zeros(_NUMBERS)
    timing = measure(lambda: _polynomials(x, y, _ROUNDS), budget=0.5)
    return timing.low / (_NUMBERS * _ROUNDS * _DEGREE) * 1e9


def memory(rows, mass_column, count=10):
    """Most memory beyond the input, in arrays of the table's length: (making, and solving) it.

    Measured in a process of its own, as the system sees it; None where the system is not Linux.
    """
    if not pathlib.Path("/proc/self/clear_refs").exists():
        return None
    with tempfile.TemporaryDirectory() as folder:
        for name, values in zip("xVm", invented_table(rows, mass_column), strict=True):
            np.save(f"{folder}/{name}.npy", values)
        run = [sys.executable, "-m", "benchmarks.limits", folder, str(count)]
        made, solved = json.loads(subprocess.check_output(run, text=True))
    return made / (8 * rows), solved / (8 * rows)


def _most_bytes():
    # Not ru_maxrss: it begins with what the parent held.
    status = pathlib.Path("/proc/self/status").read_text()
    return 1024 * int(re.search(r"VmHWM:\s*(\d+) kB", status)[1])


def _measured_here(folder, count):
    """Read a table, forget what came before, make its profile and solve it."""
    for mass_column in (False, True):
        solve(walled(*invented_table(1000, mass_column)), count=count)  # loads the kernels
    x, V, mass = (np.load(f"{folder}/{name}.npy") for name in "xVm")
    pathlib.Path("/proc/self/clear_refs").write_text("5")  # the peak is the present from here on
    before = _most_bytes()
    profile = walled(x, V, mass)
    made = _most_bytes()
    solve(profile, count=count)
    return made - before, _most_bytes() - before


if __name__ == "__main__":
    print(json.dumps(_measured_here(sys.argv[1], int(sys.argv[2]))))
