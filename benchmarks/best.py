"""The other methods, each at its best: the fastest size and span that reach the wanted error.

    python -m benchmarks.best [--dense-only]

prints what was found as JSON, one object a problem and method. `benchmarks.peers` runs it with all
threads and with one, and takes the faster.
"""

import argparse
import itertools
import json
import time
from dataclasses import asdict, dataclass

import numpy as np

from benchmarks import peer_methods
from benchmarks.problems import DECAYS, layered_problems, smooth_problems, table_problems
from benchmarks.timing import measure

WANTED = 1e-10
SLOWEST = 3.0  # seconds; no larger size is tried after one that took so long
RISING = 30.0  # times the least error: from here on rounding only makes it worse


@dataclass
class Peer:
    """A method with what there is to choose: sizes n, ascending, spans, and sets of keywords."""

    name: str
    function: object
    sizes: np.ndarray
    decays: tuple
    keywords: tuple = ({},)


def peers_for(problem, dense_only=False):
    """The methods with their choices; few where a method cannot reach the wanted error anyway.

    Only dense matrices make use of threads: `dense_only` leaves the others out.
    """
    if problem.kind == "table":  # grids that meet its rows
        rows = problem.x.size - 1
        fine, coarse, dense = rows * 2 ** np.arange(9), [rows], [250, 500, rows, 2 * rows]
    else:
        smooth = problem.kind == "smooth"
        fine, coarse = ladder(10_000, 2e6, 1.3), ladder(10, 2000, 1.08)
        dense = ladder(12, 400, 1.03) if smooth else ladder(25, 800, 1.5)
    spans = problem.decays if problem.kind == "smooth" else problem.decays[:1]
    peers = [
        Peer("sinc", peer_methods.sinc, dense, spans),
        Peer("Chebyshev", peer_methods.chebyshev_whole, dense, spans),
    ]
    if problem.kind == "layers":
        sizes = ladder(6, 99, 1.04)
        peers.append(Peer("Chebyshev by layers", peer_methods.chebyshev, sizes, DECAYS))
    if dense_only:
        return peers
    precision = 1e-12 * float(np.max(problem.scale))  # of LAPACK's bisection: 15 % faster
    drivers = ("stebz", "sterf") if problem.kind == "smooth" else ("stebz",)
    grids = [
        {"first": first, "grids": grids, "driver": driver, "precision": precision}
        for first, grids, driver in itertools.product((1, 2, 3), range(3, 9), drivers)
    ]
    single = [{"precision": precision}]
    return [
        Peer("3-point", peer_methods.differences, fine, problem.decays[2:3] or (None,), single),
        Peer("extrapolated", peer_methods.extrapolated, coarse, problem.decays[:4], grids),
        *peers,
    ]


def ladder(low, high, ratio):
    """Whole numbers from low to high, each larger than the one before by a ratio."""
    steps = 1 + round(np.log(high / low) / np.log(ratio))
    return np.unique(np.geomspace(low, high, steps).astype(int))


@dataclass
class Trial:
    """One choice of a method, its largest error over all levels, and its seconds."""

    n: int
    decay: float | None
    keywords: dict
    error: float
    seconds: float


def once(problem, peer, n, decay, keywords):
    """Try one choice once."""
    pieces = problem.pieces(decay)
    start = time.perf_counter()
    energy = peer.function(pieces, int(n), problem.count, **keywords)
    seconds = time.perf_counter() - start
    return Trial(int(n), decay, keywords, problem.error(energy), seconds)


def best(problem, peer):
    """The fastest trial that reaches WANTED, or the one of least error where none does."""
    reached, nearest = None, None
    for decay, keywords in itertools.product(peer.decays, peer.keywords):
        least = np.inf
        for n in peer.sizes:
            if n * keywords.get("first", 1) < 2 * problem.count:
                continue
            trial = once(problem, peer, n, decay, keywords)
            least = min(least, trial.error)
            if nearest is None or trial.error < nearest.error:
                nearest = trial
            if trial.error <= WANTED:
                again = (once(problem, peer, n, decay, keywords).seconds for _ in range(5))
                trial.seconds = min(again)
                if reached is None or trial.seconds < reached.seconds:
                    reached = trial
                break
            limit = SLOWEST if reached is None else 2 * reached.seconds
            if trial.seconds > limit or trial.error > RISING * least:
                break
    return reached or nearest


def timed(problem, peer):
    """Search, and time what was found: a dictionary for JSON."""
    trial = best(problem, peer)
    pieces = problem.pieces(trial.decay)
    timing = measure(
        lambda: peer.function(pieces, trial.n, problem.count, **trial.keywords), budget=0.5
    )
    return {
        "problem": problem.name,
        "method": peer.name,
        "choice": choice(trial),
        "error": trial.error,
        "timing": asdict(timing),
    }


def choice(trial):
    """What a trial chose, in words."""
    if "grids" not in trial.keywords:
        return f"n = {trial.n}"
    first, grids = trial.keywords["first"], trial.keywords["grids"]
    return f"n = {trial.n} x ({first} to {first + grids - 1}), {trial.keywords['driver']}"


def main(argv=None):
    """Print one line of JSON a problem and method."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--dense-only", action="store_true", help="leave out what uses no threads")
    args = parser.parse_args(argv)
    for problem in smooth_problems() + layered_problems() + table_problems():
        for peer in peers_for(problem, args.dense_only):
            print(json.dumps(timed(problem, peer)), flush=True)


if __name__ == "__main__":
    main()
