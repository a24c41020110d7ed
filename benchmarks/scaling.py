"""How times grow with rows, with levels and with profiles, and how near the core's limit they are.

    python -m benchmarks.scaling [--most-rows 10000000] [--only rows levels profiles cells]

Tables are invented: a well with noise between two walls, no two cells alike. Profiles are made anew
before each run, so that nothing is known of them.
"""

import argparse

import numpy as np

from benchmarks.limits import memory, multiply_add
from benchmarks.problems import ATOMIC, invented_table, walled
from benchmarks.timing import machine, measure
from eigen1d import solve

MASSES = (("constant mass", False), ("a mass in each row", True))


def by_rows(args, count=10):
    """Time and memory of ten levels against rows; growth is time over time in proportion."""
    for name, mass_column in MASSES:
        print(f"{count} levels, {name}")
        print(
            f"{'rows':>9s}  {'make the profile':28s} {'solve':28s} ns/row/level  growth"
            "  memory: make  and solve"
        )
        before = None
        for rows in 10 ** np.arange(2, 1 + int(np.log10(args.most_rows))):
            data = invented_table(int(rows), mass_column)
            making = measure(lambda data=data: walled(*data))
            solving = measure(
                lambda p: solve(p, count=count).energy, lambda data=data: walled(*data)
            )
            each = solving.median / rows
            growth = f"{each / before:6.2f}" if before else " " * 6
            before = each
            most = memory(int(rows), mass_column, count) if rows >= 100_000 else None
            arrays = f"{most[0]:14.1f}  {most[1]:9.1f}" if most else ""
            print(
                f"{rows:9d}  {making!s:28s} {solving!s:28s} {each / count * 1e9:12.1f}  {growth}"
                f"{arrays}",
                flush=True,
            )
        print("memory: most beyond the input, in arrays of the table's length\n")


def by_levels(args, rows=10_000):
    """Time against the number of levels."""
    for name, mass_column in MASSES:
        data = invented_table(rows, mass_column)
        print(f"{rows} rows, {name}\n{'levels':>9s}  {'solve':28s} ns/row/level")
        for count in (1, 2, 5, 10, 20, 50, 100, 200, 500, 1000):
            timing = measure(
                lambda p, count=count: solve(p, count=count).energy,
                lambda data=data: walled(*data),
            )
            print(
                f"{count:9d}  {timing!s:28s} {timing.median / rows / count * 1e9:12.1f}",
                flush=True,
            )
        print()


def by_profiles(args, rows=200, count=5):
    """Time against the number of profiles that are solved together."""
    from eigen1d import solve_many

    for name, mass_column in MASSES:
        x, V, mass = invented_table(rows, mass_column)
        print(f"{rows} rows, {count} levels, {name}\n{'profiles':>9s}  {'solve_many':28s} a second")
        for profiles in (1, 10, 100, 1000, 10_000, 100_000):
            noise = np.random.default_rng(21).normal(size=(profiles, rows))
            timing = measure(
                lambda V=V + 0.5 * noise, x=x, mass=mass: (
                    solve_many(
                        x=x, V=V, mass=mass, count=count, left="wall", right="wall", units=ATOMIC
                    ).energy
                )
            )
            print(f"{profiles:9d}  {timing!s:28s} {profiles / timing.median:8.0f}", flush=True)
        print()


def by_cells(args, rows=10_000, energies=160):
    """Time of a cell and trial energy when levels are counted, beside the limit of the core."""
    from eigen1d.shooting import Search

    limit = multiply_add()
    print(f"counting levels below {energies} energies, {rows} rows")
    print(f"{'':20s}  ns/cell/energy  in fused multiply-adds at the limit of {limit:.3f} ns")
    for name, mass_column in MASSES:
        profile = walled(*invented_table(rows, mass_column))
        top = solve(profile, count=10).energy[-1]
        search = Search(profile)
        trial = np.linspace(profile.V_min, top, energies)
        timing = measure(lambda search=search, trial=trial: search.count(trial))
        each = timing.median / (rows - 1) / energies * 1e9
        print(f"{name:20s}  {each:14.2f}  {each / limit:.0f}", flush=True)
    print()


PARTS = {"rows": by_rows, "levels": by_levels, "profiles": by_profiles, "cells": by_cells}


def main(argv=None):
    """Print the parts that are asked for."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--most-rows", type=float, default=1e6)
    parser.add_argument("--only", nargs="+", choices=PARTS, default=list(PARTS))
    args = parser.parse_args(argv)
    print(machine(), end="\n\n")
    for part in args.only:
        PARTS[part](args)


if __name__ == "__main__":
    main()
