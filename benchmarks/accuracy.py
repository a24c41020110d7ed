"""How far both methods are from the reference levels, and whether brackets and estimates hold.

    python -m benchmarks.accuracy

The reference, tests/reference/levels.json, has 27 digits or more. Errors are relative to a level's
height above the least V; the largest of each case is shown.
"""

import pathlib
import sys
from decimal import Decimal

import numpy as np

from eigen1d import solve

sys.path.insert(0, str(pathlib.Path(__file__).resolve().parent.parent / "tests"))
from problems import SOLVABLE  # noqa: E402


def compared(case, method):
    """(count, largest error, all in their brackets, largest half width of a bracket)."""
    profile = case.profile()
    levels = solve(profile, count=case.count, method=method)
    known = case.n
    height = levels.energy[known] - profile.V_min
    # In decimal arithmetic: the difference of two doubles would have no digits left.
    off = [Decimal(float(levels.energy[n])) - E for n, E in zip(known, case.energy, strict=True)]
    held = all(
        Decimal(float(low)) <= E <= Decimal(float(high))
        for (low, high), E in zip(levels.bracket[known], case.energy, strict=True)
    )
    half = levels.budget.numeric[known]
    return len(levels), np.max(np.abs(np.array(off, float)) / height), held, np.max(half / height)


def main():
    """Print one row a case."""
    print("case   levels  shooting: error  bracket  holds  ", end="")
    print("finite differences: error  estimate  holds")
    for case in SOLVABLE:
        count, error, held, half = compared(case, "shooting")
        _, other, other_held, estimate = compared(case, "finite-difference")
        wanted = case.bound or case.n[-1] + 1
        print(
            f"{case.id:5s} {count:3d}/{wanted:<3d}  {error:15.1e}  {half:7.1e}  {str(held):5s}"
            f"  {other:26.1e}  {estimate:8.1e}  {other_held}"
        )


if __name__ == "__main__":
    main()
