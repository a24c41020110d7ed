"""How the cost of a solution grows with rows and levels, and what the second opinion adds.

    python benchmarks/speed.py [--rows 1000 10000 ...] [--constant-mass]

Times depend on the machine; the ratios within one run are what to compare. Tables are invented: a
band that bends, with noise, 12 wells. Each time is the least of several.
"""

import argparse
import resource
import time

import numpy as np

from eigen1d import Profile, solve


def table(rows, constant_mass=False):
    """An invented profile of so many rows over 120 nm: no two cells alike, none merged."""
    x = np.linspace(0.0, 120.0, rows)
    noise = np.random.default_rng(20).normal(size=rows)
    V = 0.15 * (1 + np.cos(2 * np.pi * x / 10)) + 1e-5 * (x - 60) ** 2 + 1e-3 * noise
    mass = 0.067 if constant_mass else 0.067 + 0.02 * V
    return Profile.from_rows(x, V, mass, left="wall", right="wall")


def seconds(task, least=3, budget=2.0):
    """The least time of some runs of a task."""
    times = []
    while len(times) < least or (sum(times) < budget and len(times) < 50):
        start = time.perf_counter()
        task()
        times.append(time.perf_counter() - start)
    return min(times)


def main():
    """Print one row a size: energies alone, with states, by the other method; and the growth."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--rows", type=int, nargs="+", default=[1000, 10_000, 100_000, 1_000_000])
    parser.add_argument("--constant-mass", action="store_true")
    args = parser.parse_args()
    rows, constant = args.rows, args.constant_mass
    seconds(lambda: solve(table(100), count=2).mean_x)  # compiles
    print("constant mass" if constant else "a mass in each row", end=", ")
    print("10 levels of a table of so many rows, each a cell")
    print("     rows    read it  energies  ns/row/level  growth  + <x>  finite differences")
    before = None
    for count in rows:
        profile = table(count, constant)
        making = seconds(lambda count=count: table(count, constant))
        energies = seconds(lambda p=profile: solve(p, count=10))
        states = seconds(lambda p=profile: solve(p, count=10).mean_x)
        other = seconds(lambda p=profile: solve(p, count=10, method="finite-difference"), least=1)
        growth = energies / before[1] * before[0] / count if before else 1.0
        print(
            f"{count:9d}  {making:7.4f} s {energies:7.4f} s  {energies / count / 10 * 1e9:10.0f}"
            f"  {growth:6.2f}  x{states / energies:4.1f}  x{other / energies:4.1f}"
        )
        before = count, energies
    print(f"most memory so far: {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e3:.0f} MB")
    profile = table(10_000, constant)
    base = seconds(lambda: solve(profile, count=1))
    print("\nlevels of a table of 10,000 rows, times the cost of one")
    for levels in (1, 2, 5, 10, 20, 40):
        cost = seconds(lambda levels=levels: solve(profile, count=levels))
        print(f"{levels:9d}  x{cost / base:5.1f}")


if __name__ == "__main__":
    main()
