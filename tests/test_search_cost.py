"""How many passes over the cells a search may take: speed without a clock."""

import math

import numpy as np
import pytest
from hard_problems import HARD
from interpreted import interpreted
from kernel_cells import LANES
from problems import ATOMIC, SOLVABLE
from random_wells import Wells

from eigen1d import Profile, _angles, _plan, _search


@pytest.fixture
def passes():
    """Count passes over the cells, each from both ends for up to LANES energies."""
    spent = []

    def angles(cells, left, right, stop, energies, turn, angle):
        spent.append(math.ceil(energies.size / LANES))
        _angles.angles(cells, left, right, stop, energies, turn, angle)

    def homes(cells, left, right, energies):
        spent.append(math.ceil(energies.size / LANES))
        return _angles.homes(cells, left, right, energies)

    spied = interpreted(_search, angles=angles, homes=homes, prepare=_plan.prepared)

    def cost(profile, count=None):
        spent.clear()
        well = Wells.of(profile)
        if not well.edge > well.floor:
            return 0, 0
        found = well.find(0, count or 10**5, most=10**5, run=spied["find"])
        return sum(spent), found[2].size

    return cost


def morse(x):
    return 50 * ((1 - np.exp(-x)) ** 2 - 1)


def long_table():
    """A thousand rows of a noisy well."""
    x = np.linspace(0, 30, 1000)
    noise = 0.05 * np.random.default_rng(1).normal(size=1000)
    V = 50 * (1 - np.exp(-(((x - 11) / 6) ** 2))) + 0.02 * (x - 11) + noise
    return x, V


EVERYDAY = {
    "quartic": (
        lambda: Profile.from_function(
            lambda x: x**4, (-3.8, 3.8), 0.5, left="wall", right="wall", units=ATOMIC
        ),
        5, 5, 4,
    ),
    "morse": (
        lambda: Profile.from_function(morse, (-1.43, 31.3), units=ATOMIC, left="wall"),
        None, 10, 8,
    ),
    "square": (
        lambda: Profile.from_layers([2, 2, 2], [24.5, 0, 24.5], units=ATOMIC), None, 5, 6,
    ),
    "table": (
        lambda: Profile.from_rows(*long_table(), 1.0, left="wall", right="wall", units=ATOMIC),
        10, 10, 9,
    ),
    "graded-table": (
        lambda: Profile.from_rows(
            *long_table(), 1 + 4e-4 * long_table()[1], left="wall", right="wall", units=ATOMIC
        ),
        10, 10, 9,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", EVERYDAY)
def test_everyday_problems_take_a_handful_of_passes(name, passes):
    """Less than one pass of 16 energies a level, brackets included, without a clock."""
    make, count, levels, most = EVERYDAY[name]
    spent, found = passes(make(), count)
    assert found == levels
    assert spent <= most


# Levels that are nearly equal, which only counts can part.
CLUSTERED = {"P16", "P22"}
DOUBLETS = {
    "doublet-1e-12", "doublet-1e-40", "doublet-1e-112", "almost-doublet", "quartic-double",
}  # fmt: skip


@pytest.mark.parametrize("case", SOLVABLE, ids=lambda case: case.id)
def test_reference_levels_take_few_passes(case, passes):
    """Two counts a level are an eighth of a pass; halving intervals down to rounding takes 50
    energies, three passes. A lost order of the interpolation shows here.
    """
    spent, found = passes(case.profile(), case.count)
    assert found >= len(case.n)
    assert spent <= 6 + (3 if case.id in CLUSTERED else 0.6) * found


@pytest.mark.parametrize("problem", HARD, ids=lambda problem: problem.name)
def test_hard_problems_take_a_bounded_number_of_passes(problem, passes):
    """Thresholds and rough tables cost little more. Near-degenerate doublets are parted by cutting
    an interval into 16 from the depth down to rounding, 12 times, by all that are left.
    """
    assert DOUBLETS <= {problem.name for problem in HARD}
    spent, found = passes(problem.make(), problem.count)
    assert spent <= 10 + (10 if problem.name in DOUBLETS else 4) * found
