"""What the search guesses: energies by phase, levels by interpolation, cuts of brackets."""

import mpmath
import numpy as np
import pytest
from interpreted import interpreted
from kernel_cells import EPS, LANES, WALL, table
from random_wells import Wells
from scipy.optimize import brentq

from eigen1d import _plan, _search

PLAIN = interpreted(_search, prepare=_plan.prepared)


# --- first guesses -----------------------------------------------------------------------------


def quartic(half=4.0, pieces=16):
    """V = x^4 for m = 0.5 between walls: levels 1.06, 3.80, 7.46, ..."""
    start = np.linspace(-half, half, pieces + 1)[:-1]
    width = 2 * half / pieces
    V = [np.poly1d([1, 0, 0, 0, 0])(np.poly1d([width, x])).coeffs[::-1] for x in start]
    cells = table([width] * pieces, V, [[0.5]] * pieces)
    return Wells(cells, WALL, WALL, 0.0, np.inf)


def test_a_guess_of_the_top_allows_so_many_levels():
    """Neither so low that a second try is likely, nor so high that cells are cut for nothing."""
    well = quartic()
    for count in (1, 2, 5, 20):
        top = PLAIN["_top_for"](*well.cells, 0.0, np.inf, count + 1.5)
        assert count <= well.count(top)[0] <= count + 3
    box = table([7.0], [[3.0]], [[0.6]])
    for count in (1, 2, 5, 20):
        top = PLAIN["_top_for"](*box, 3.0, np.inf, float(count))
        exact = (np.pi * count / 7.0) ** 2 / (2 * 0.6)  # of phase `count`, above the floor
        assert exact <= top - 3.0 <= 1.3 * exact + 1e-12
    assert PLAIN["_top_for"](*well.cells, 0.0, 10.0, 30.0) == 10.0  # the edge, if that is lower


@pytest.mark.parametrize("bottom, top", [(0.0, 60.0), (0.0, 3.0), (20.0, 60.0), (59.0, 60.0)])
def test_first_energies_are_spread_by_phase(bottom, top):
    """They ascend, end at the top, fill lanes, and between two of them lies a level at most."""
    well = quartic()
    cells = _plan.prepared(*well.cells, WALL, WALL, 0.0, top, True)[0]
    points = PLAIN["_spread"](cells, bottom, top, np.inf)
    assert points.size % LANES == 0 and points[-1] == top
    assert (np.diff(points) > 0).all() and points[0] > bottom
    assert (np.diff(well.count([bottom + 1e-9, *points], top=top)) <= 1).all()
    few = PLAIN["_spread"](cells, bottom, top, 4.0)
    assert few.size == LANES and few[-1] == top


# --- interpolation -----------------------------------------------------------------------------


@pytest.mark.parametrize("edge", [3.0, np.inf])
def test_steps_in_the_variable_of_the_continuum(edge):
    """u = -sqrt(edge - E) keeps its digits beside the edge, where edge - u^2 has none.

    Against 50 digits, from the bottom up to 1e-14 below the edge; u = E without an edge.
    """
    with mpmath.workdps(50):
        for a, b in [(0.5, 2.0), (2.9, 2.999), (3 - 1e-6, 3 - 1e-7), (3 - 2e-14, 3 - 1e-14)]:
            for energy, origin in ((a, b), (b, a)):
                exact = mpmath.mpf(energy) - mpmath.mpf(origin)
                if np.isfinite(edge):
                    u = [mpmath.sqrt(edge - mpmath.mpf(E)) for E in (energy, origin)]
                    exact = u[1] - u[0]
                offset = PLAIN["_offset"](energy, origin, edge)
                assert abs(offset - exact) <= 4 * EPS * abs(exact)
                back = PLAIN["_energy"](offset, origin, edge)
                assert abs(back - energy) <= np.spacing(3.0)


def sampled(D, energies):
    """A table of energies, turn and angle of a function, as `angles` would say it."""
    turn = np.round(D / np.pi)
    return np.array([energies, turn, D - turn * np.pi])


@pytest.mark.parametrize("edge", [12.0, np.inf])
@pytest.mark.parametrize("degree", range(1, 7))
def test_a_guess_is_exact_for_polynomials(degree, edge):
    """Seven samples give the energy exactly if it, or u, is a polynomial of degree 6 in D."""
    random = np.random.default_rng(degree)
    for _ in range(20):
        D = np.sort(random.uniform(0.0, 10.0, 12))
        D += 0.3 * np.arange(12)
        scaled = D / D[-1]
        c = random.uniform(0.1, 1.0, degree + 1)
        c *= (8.0 if np.isinf(edge) else 2.5) / c.sum()

        def energy(x, c=c):
            y = np.polynomial.polynomial.polyval(x, c)
            return y if np.isinf(edge) else edge - (np.sqrt(edge) - y) ** 2

        n = int((D[5] + D[6]) / 2 / np.pi)
        samples = sampled(D - (D[5] + D[6]) / 2 + (n + 1) * np.pi, energy(scaled))
        found, error = PLAIN["_guess"](samples, 12, 5, n, edge, 0.0, 0.0)
        exact = energy((D[5] + D[6]) / 2 / D[-1])
        assert samples[0, 5] < found < samples[0, 6]
        assert abs(found - exact) <= 1e-11 and error < np.inf


def test_a_guess_is_not_exact_beyond():
    """A polynomial of degree 12 is no longer met exactly: the test above can fail."""
    D = np.linspace(0.0, 11.0, 12)
    samples = sampled(D - 5.4 + np.pi, 8 * (D / 11) ** 12)
    found, error = PLAIN["_guess"](samples, 12, 5, 0, np.inf, 0.0, 0.0)
    assert abs(found - 8 * (5.4 / 11) ** 12) > 1e-6 and error > 1e-6


def test_the_error_of_a_guess_is_honest():
    """It decides between two last counts and another round: too small by ten is rare."""
    random = np.random.default_rng(0)
    shares = []
    while len(shares) < 500:
        power, slope, wave = random.uniform([0.5, 2, 0.3], [1.5, 6, 2.5])
        wiggle = random.uniform(-0.2, 0.2) * slope * power
        edge = random.choice([np.inf, 12.0])

        def D(E, power=power, slope=slope, wiggle=wiggle, wave=wave):
            return slope * E**power + wiggle * np.sin(wave * E) / wave

        energies = np.sort(random.uniform(0.5, 10, int(random.integers(2, 30))))
        values = D(energies)
        below, above = int(values[0] // np.pi), int(values[-1] // np.pi)
        if (np.diff(values) < 1e-6).any() or above <= below:
            continue
        n = int(random.integers(below, above))
        samples = sampled(values, energies)
        i = PLAIN["_bracket"](samples, energies.size, n)
        assert values[i] <= (n + 1) * np.pi <= values[i + 1]
        found, error = PLAIN["_guess"](samples, energies.size, i, n, edge, 0.0, 0.0)
        true = brentq(lambda E, n=n: D(E) - (n + 1) * np.pi, *energies[i : i + 2], xtol=1e-15)
        shares.append(abs(found - true) / (error + 1e-13))
    assert np.quantile(shares, 0.95) <= 10


@pytest.mark.parametrize("end", [0, 1])
def test_a_sample_may_be_the_level_itself(end):
    """To rounding: the guess then falls on it, or beyond it by less than a bracket's half width."""
    energies = np.linspace(1.0, 2.0, 6)
    above = energies - energies[2 + end]
    D = np.pi + above + 0.1 * above**2
    samples = sampled(D, energies)
    samples[2, 2 + end] = [-1e-17, 1e-17][end]  # below the level, or above
    found, error = PLAIN["_guess"](samples, 6, 2, 0, np.inf, 16 * EPS, 1.0)
    assert found == energies[2 + end] and error < 1e-3


def test_a_guess_on_a_staircase_has_no_error():
    """Where the angle does not rise, the middle is as good as any place, and is known to be."""
    energies = np.linspace(1.0, 2.0, 6)
    D = np.array([0.0, 0.0, 0.0, np.pi, np.pi, np.pi]) + 0.4
    found, error = PLAIN["_guess"](sampled(D, energies), 6, 2, 0, np.inf, 0.0, 0.0)
    assert energies[2] < found < energies[3]
    assert error == np.inf or error > 0.01


# --- brackets ----------------------------------------------------------------------------------


def test_bracket_lies_around_its_level():
    """Counts of samples ascend: the pair at which they pass n, also with several levels inside."""
    count = np.array([0, 0, 1, 1, 4, 4, 4, 7])
    angle = np.array([0.3, -0.2, 0.1, -1.0, 0.0, 1.0, -0.5, 0.2])
    samples = np.array([np.arange(8.0), count + (angle < 0), angle])
    for n in range(7):
        k = PLAIN["_bracket"](samples, 8, n)
        assert count[k] <= n < count[k + 1]


def test_merged_samples_are_sorted():
    """All samples, old and new, in the order of energy, each with its own angle."""
    random = np.random.default_rng(5)
    for old, first, last in ((0, 0, 4), (5, 3, 3), (1, 2, 3), (20, 1, 8), (3, 4, 34)):
        new, points = last - first, random.uniform(size=last + 3)
        before, table = points.copy(), np.full((3, old + new + 1), np.nan)
        table[0, :old] = np.sort(random.uniform(size=old))
        table[1, :old], table[2, :old] = np.floor(1000 * table[0, :old]), -table[0, :old]
        everything = np.sort(np.concatenate([table[0, :old], points[first:last]]))
        turn, angle = (1000 * points).astype(int), -points
        PLAIN["_merge"](table, old, points, turn, angle, first, last)
        np.testing.assert_array_equal(table[0, :-1], everything)
        np.testing.assert_array_equal(table[1, :-1], np.floor(1000 * everything))
        np.testing.assert_array_equal(table[2, :-1], -everything)
        assert np.isnan(table[:, -1]).all()
        np.testing.assert_array_equal(points[:first], before[:first])
        np.testing.assert_array_equal(points[last:], before[last:])


@pytest.mark.parametrize("each", [1, 2, 3, 4, 15])
@pytest.mark.parametrize("error", [1e-9, 0.05, 10.0, np.inf])
def test_cuts_lie_inside_and_hold_the_guess(each, error):
    """As many energies as were allowed, none outside of the bracket."""
    points = np.full(20, np.nan)
    size = PLAIN["_cuts"](points, 1.0, 2.0, 1.3, error, each)
    cuts = points[:size]
    assert size == each and np.isnan(points[size:]).all()
    assert ((1.0 < cuts) & (cuts < 2.0)).all()
    assert (1.3 in cuts) == (error < np.inf)
    if each > 2 and error < 0.1:
        assert {1.3 - 3 * error, 1.3 + 3 * error} <= set(cuts)
