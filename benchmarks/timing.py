"""How times are taken and shown: the median of repeats, with the middle half beside it."""

import os
import platform
import time
from dataclasses import dataclass

import numpy as np


@dataclass
class Timing:
    """Seconds: the median of so many runs, and the quartiles below and above it."""

    median: float
    low: float
    high: float
    runs: int

    def __str__(self):
        unit, factor = next(u for u in _UNITS if self.median * u[1] >= 1 or u is _UNITS[-1])
        median, low, high = (
            f"{value * factor:.3g}" for value in (self.median, self.low, self.high)
        )
        return f"{median} {unit} ({low}-{high})"


_UNITS = (("s", 1.0), ("ms", 1e3), ("us", 1e6))


def measure(task, prepare=None, budget=1.0, least=3, most=1000, warm_up=True):
    """Time a task again and again until the budget, in seconds, is spent.

    Parameters
    ----------
    task : callable
        Called with what `prepare` returns, if there is one, else without arguments.
    prepare : callable, optional
        Called before each run and not timed: what a task needs fresh.
    budget : float, optional
        No further run is begun when the runs together took so long.
    least, most : int, optional
        Bounds of the number of runs.
    warm_up : bool, optional
        Whether the first run is left out.

    Returns
    -------
    Timing
    """
    times = []
    while len(times) < least + warm_up or (sum(times) < budget and len(times) < most + warm_up):
        arguments = () if prepare is None else (prepare(),)
        start = time.perf_counter()
        task(*arguments)
        times.append(time.perf_counter() - start)
    low, median, high = np.quantile(times[warm_up:], [0.25, 0.5, 0.75])
    return Timing(float(median), float(low), float(high), len(times) - warm_up)


def machine():
    """One line about the machine, by its kind only."""
    return f"{os.cpu_count()} processor cores as seen by {platform.system()}, {platform.machine()}"
