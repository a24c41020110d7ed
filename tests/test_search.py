"""The compiled search: angles, levels in brackets, whatever was guessed."""

import numpy as np
import pytest
from hard_problems import HARD
from interpreted import interpreted
from kernel_cells import WALL, table
from random_wells import MAKERS, Wells, random_wells

from eigen1d import _angles, _kernels, _plan, _search

NAMED = {problem.name: problem for problem in HARD}
# Sweeps and plans stay compiled: they are compared in tests of their own, and are slow in Python.
COMPILED = {"angles": _angles.angles, "homes": _angles.homes, "prepare": _plan.prepared}
PLAIN = interpreted(_search, **COMPILED)
PLAIN_ANGLES = interpreted(_angles, sweep=_kernels.swept)


@pytest.fixture(scope="module", params=["rough", "quartic-double", "alpha", "mass-100"])
def hard(request):
    """The arrays of a hard problem."""
    return Wells.of(NAMED[request.param].make())


def grid(hard, count=70):
    """Energies over all of the well: more than four times the lanes, and no multiple of them."""
    top = hard.edge if np.isfinite(hard.edge) else hard.floor + 60
    return np.linspace(hard.floor, top, count + 2)[1:-1]


# --- angles ------------------------------------------------------------------------------------


def test_the_angle_grows_with_energy(hard):
    """D(E) rises steadily, which is why one sign says on which side of a level an energy lies."""
    turn, angle = hard.angles(grid(hard))
    assert (np.abs(angle) <= np.pi / 2).all()
    assert (np.diff(turn * np.pi + angle) > 0).all()


def test_where_the_solutions_meet_does_not_change_the_count(hard):
    """floor(D / pi) is the number of levels below E, at every node."""
    energies = grid(hard)
    expected = hard.count(energies)
    assert expected[-1] > expected[0]
    for stop in (0, 1, 2, 3, 5, 8, 20, 1000, 10**6):
        np.testing.assert_array_equal(hard.count(energies, stop=stop), expected, err_msg=f"{stop}")


@pytest.mark.parametrize("scale", [1e-3, 1.0, 300.0])
def test_the_scale_of_the_slope_does_not_change_the_count(hard, scale):
    """sigma only shapes the angle between levels; any positive number gives the same count."""
    scaled = interpreted(_angles, sweep=_kernels.swept, _scale=lambda *_: scale)
    energies = grid(hard)
    cells, _, left, right, home = _plan.prepared(
        *hard.cells, hard.left, hard.right, hard.floor, energies[-1], True
    )
    turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
    stop = np.full(energies.size, home)
    scaled["angles"](cells, left, right, stop, energies, turn, angle)
    np.testing.assert_array_equal(turn - (angle < 0), hard.count(energies))


def test_angles_and_homes_are_what_their_python_says(hard):
    """Compiled and interpreted, the same turn, angle and place."""
    energies = grid(hard, 37)
    cells, _, left, right, home = _plan.prepared(
        *hard.cells, hard.left, hard.right, hard.floor, energies[-1], True
    )
    found, stop = [], np.arange(energies.size) % (cells[0].size + 1)
    for angles in (_angles.angles, PLAIN_ANGLES["angles"]):
        turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
        angles(cells, left, right, stop, energies, turn, angle)
        found.append((turn, angle))
    np.testing.assert_array_equal(found[0][0], found[1][0])
    np.testing.assert_allclose(found[0][1], found[1][1], rtol=1e-13, atol=1e-15)
    places = [
        homes(cells, left, right, energies) for homes in (_angles.homes, PLAIN_ANGLES["homes"])
    ]
    np.testing.assert_array_equal(*places)


def test_a_state_is_at_home_in_its_own_well():
    """Levels 1e-9 apart, each in a well of its own: the deeper one on the left holds the lower."""
    hard = Wells.of(NAMED["almost-doublet"].make())
    *_, energy, bracket, _ = hard.find(0, 6)
    cells, _, left, right, _ = _plan.prepared(
        *hard.cells, hard.left, hard.right, hard.floor, bracket[-1, 1], True
    )
    home = _angles.homes(cells, left, right, energy)
    assert energy.size == 6 and (np.isin(home[::2], [1, 2])).all()
    assert (np.isin(home[1::2], [3, 4])).all()


# --- the search --------------------------------------------------------------------------------


def assert_found(well, first, last, found, bottom=None):
    """Count, order, brackets by counts at two nodes, their widths, and energies by bisecting."""
    below, sure, energy, bracket, done = found
    n = np.arange(first, first + energy.size)
    assert energy.size == max(min(last, below) - first, 0)
    if below < last:  # all that are bound
        near = well.edge - 1e-10 * (well.edge - well.floor)
        assert well.count(near)[0] <= below
    if not energy.size:
        return
    assert (np.diff(energy) >= 0).all()
    assert (done > 0).all()
    assert ((bracket[:, 0] <= energy) & (energy <= bracket[:, 1])).all()
    half = well.half_width(energy)
    width = bracket[:, 1] - bracket[:, 0]
    assert (width <= np.where(done == 2, 3.2, 2.2) * half).all()
    # Narrower ones would not hold what rounding does; at the edge of the continuum they end.
    assert ((width >= 1.5 * half) | (bracket[:, 1] == well.edge)).all()
    for stop in (None, 1 + energy.size):
        counts = well.count(bracket.ravel(), stop=stop).reshape(-1, 2)
        assert (counts[:, 0] <= n).all() and (counts[:, 1] > n).all()
    exact = well.bisected(n, min(well.edge, bracket[-1, 1]))
    assert (np.abs(exact - energy) <= np.where(done == 2, 1.0, 0.5) * half).all()
    # What a count is rounded by is a tenth of that.
    assert (exact - bracket[:, 0] >= 0.25 * half).all()
    assert ((bracket[:, 1] - exact >= 0.25 * half) | (bracket[:, 1] == well.edge)).all()
    if energy.size > 1:
        gaps = np.diff(energy, prepend=-np.inf, append=np.inf)
        nearest = np.minimum(gaps[:-1], gaps[1:]) / half
        assert (done[nearest > 1.5] == 1).all()
        assert (done[(nearest < 0.5) & (n > first) & (n < n[-1])] == 2).all()


@pytest.mark.parametrize("seeds", [range(i, i + 20) for i in range(0, 60, 20)])
@pytest.mark.parametrize("kind", MAKERS)
def test_levels_are_those_of_bisecting_counts(kind, seeds):
    """On random profiles, whatever is guessed and interpolated changes only the time."""
    solved = 0
    for seed in seeds:
        well = random_wells(kind, seed)
        if well is None:
            continue
        last = seed % 23 + 1
        if np.isfinite(well.edge) and seed % 3 == 0:
            last = 1000
        found = well.find(0, last)
        assert_found(well, 0, last, found)
        solved += found[2].size
    assert solved > 50


@pytest.mark.parametrize("well", [1.0, 1.7, 2.0, 2.9])
def test_doublets_about_as_far_apart_as_a_bracket_is_wide(well):
    """Neither one level nor two: the angle is curved on the very scale of the last two counts."""
    for barrier in np.arange(4.0, 9.0, 0.1):
        cells = table([2, well, barrier, well, 2], [[10], [0], [10], [0], [10]], np.ones((5, 1)))
        pair = Wells(cells, WALL, WALL, 0.0, np.inf)
        assert_found(pair, 0, 4, pair.find(0, 4))


@pytest.mark.parametrize("kind", MAKERS)
def test_windows_hold_the_levels_inside_them(kind):
    """Levels first to last between two energies are those that a search from below finds."""
    windows = 0
    for seed in range(30):
        well = random_wells(kind, seed)
        if well is None:
            continue
        energy = well.find(0, 20)[2]
        gaps = np.flatnonzero(np.diff(energy) > 1e-9 * (energy[1:] - well.floor))
        if gaps.size < 2:
            continue
        middle = 0.5 * (energy[gaps] + energy[gaps + 1])
        first, last = gaps[0] + 1, gaps[-1] + 1
        found = well.find(first, last, bottom=middle[0], top=middle[-1])
        assert found[0] == last
        assert_found(well, first, last, found)
        half = well.half_width(energy[first:last])
        assert (np.abs(found[2] - energy[first:last]) <= half).all()
        windows += 1
    assert windows > 8


@pytest.mark.parametrize("energy, length", [(2.0**40, 2.0**-20), (2.0**-80, 2.0**40)])
@pytest.mark.parametrize("kind", MAKERS)
def test_units_change_no_digit(kind, energy, length):
    """In units larger by powers of two all is the same to the last bit: nothing is absolute."""
    for seed in range(0, 40, 3):
        well = random_wells(kind, seed)
        if well is None:
            continue
        one, other = well.find(0, 12), well.scaled(energy, length).find(0, 12)
        assert one[:2] == other[:2]
        for a, b in zip(one[2:4], other[2:4], strict=True):
            np.testing.assert_array_equal(a * energy, b)
        np.testing.assert_array_equal(one[4], other[4])


def test_find_is_what_its_python_says(hard):
    """Compiled and interpreted, the same levels and brackets to rounding."""
    one, other = hard.find(0, 4), hard.find(0, 4, run=PLAIN["find"])
    assert one[:2] == other[:2]
    half = hard.half_width(one[2])
    assert (np.abs(one[2] - other[2]) <= 0.25 * half).all()
    assert (np.abs(one[3] - other[3]) <= 0.5 * half[:, None]).all()
    np.testing.assert_array_equal(one[4], other[4])


@pytest.mark.parametrize("factor", [0.0, 0.02, 0.3, 3.0])
@pytest.mark.parametrize("kind", ["stack", "far", "rough"])
def test_a_wrong_phase_costs_rounds_but_no_level(kind, factor):
    """Semiclassical phases only guess: a table may hide its wells from the sample they take.

    Interpreted, an array too small for what is found would be an IndexError.
    """
    phases = PLAIN["_phases"]
    lying = interpreted(_search, _phases=lambda *given: factor * phases(*given), **COMPILED)
    for seed in range(0, 40, 5):
        well = random_wells(kind, seed)
        if well is None or not np.isfinite(well.edge):
            continue
        one, other = well.find(0, 1000), well.find(0, 1000, run=lying["find"])
        assert one[0] == other[0]
        assert (np.abs(one[2] - other[2]) <= well.half_width(one[2])).all()


def test_the_ground_state_does_not_depend_on_how_many_are_wanted():
    """Cells made ready for high energies lose no digit of low ones, a millionth as high."""
    for power, half in ((4, 16.0), (12, 6.0)):
        V = np.poly([0.47] * power)[::-1] * half**power
        well = Wells(table([half], [V], [[1.0]]), WALL, WALL, 0.0, np.inf)
        few, many = (well.find(0, count, most=10**5)[2] for count in (2, 3000))
        assert (np.abs(many[:2] - few) <= 0.25 * well.half_width(few)).all()


def test_more_levels_than_allowed_are_counted_but_not_sought():
    """A profile in the wrong unit has a million of them: the caller says so."""
    well = random_wells("stack", 1)
    below, _, energy, bracket, done = well.find(0, 1000)
    assert energy.size > 4
    counted = well.find(0, 1000, most=3)
    assert counted[0] == below and counted[2].size == counted[3].size == counted[4].size == 0


def test_a_profile_that_is_too_long_is_refused():
    """Over a million wavelengths that no closed form crosses: -1, and no attempt."""
    sloped = Wells(table([1e7], [[1.0, 1e-3]], [[1.0]]), WALL, WALL, 1.0, np.inf)
    assert sloped.find(0, 3, top=2.0)[0] == -1
    flat = Wells(table([1e7], [[1.0]], [[1.0]]), WALL, WALL, 1.0, np.inf)
    assert flat.find(0, 3)[2].size == 3


def test_counts_at_the_edge_are_sure_or_say_so():
    """A level within rounding of the continuum is the caller's to judge; a sure count is right."""
    for problem in HARD:
        if problem.bound is None:
            continue
        well = Wells.of(problem.make())
        if not well.edge > well.floor:
            continue
        below, sure, *_ = well.find(0, 1000)
        assert below == problem.bound or not sure
    edge = np.array([1.0, 0.0, 1.0, 0.0])
    for beyond in (-0.1, -1e-9, -1e-14, 0.0, 1e-14, 1e-9, 0.1):
        # Level 1 is bound from k = pi / 2 on, for a well of half width 1.
        depth = (np.pi / 2 * (1 + beyond)) ** 2 / 2
        box = table([1.0, 2.0, 1.0], [[0.0], [-depth], [0.0]], [[1.0]] * 3)
        below, sure, *_ = Wells(box, edge, edge, -depth, 0.0).find(0, 10)
        assert below == (2 if beyond > 0 else 1) or not sure
        if abs(beyond) < 1e-12:
            assert not sure
        if abs(beyond) > 1e-2:
            assert sure
    for name in ("rough", "stack-of-20", "alpha"):
        assert Wells.of(NAMED[name].make()).find(0, 1000)[1]
