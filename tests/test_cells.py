"""Arithmetic of piecewise polynomials: one function before and after, on fewer or more cells."""

import math
from fractions import Fraction

import numpy as np
import pytest
from numpy.polynomial import polynomial
from scipy.interpolate import PPoly

from eigen1d import _cells

EPS = np.finfo(float).eps
T = np.linspace(0.0, 1.0, 21)


def table(coefficients, t=T):
    """Values of each cell at all t: shape (cells, t.size)."""
    return polynomial.polyval(t, np.asarray(coefficients, dtype=float).T)


def random_cells(seed, cells=7, degree=5):
    return np.random.default_rng(seed).normal(size=(cells, degree + 1))


# --- values, shifts, mirrors ---------------------------------------------------------------------


def test_evaluated_is_the_power_sum():
    """Everything a user sees of V goes through it; numpy's own Horner scheme judges."""
    cells, t = random_cells(0), np.random.default_rng(1).random(7)
    expected = [polynomial.polyval(ti, row) for ti, row in zip(t, cells, strict=True)]
    assert _cells.evaluated(cells, t) == pytest.approx(expected, rel=4 * EPS, abs=4 * EPS)


def test_reexpanded_is_exact_where_doubles_are():
    """(1 + 2 s + 3 s^2 + 4 s^3) at s = 1/2 + t/4, by binomials in rational numbers.

    All intermediate values are dyadic, so a single wrong product would show as a whole number.
    """
    given = [1, 2, 3, 4]
    expected = [
        sum(
            Fraction(given[k]) * math.comb(k, j) * Fraction(1, 2) ** (k - j) * Fraction(1, 4) ** j
            for k in range(j, 4)
        )
        for j in range(4)
    ]
    found = _cells.reexpanded(np.array([given]), 0.5, 0.25)[0]
    assert [Fraction(c) for c in found] == expected


def test_reexpanded_keeps_the_function_cell_by_cell():
    """Each cell has its own offset and ratio; mixing them up would mix cells up."""
    cells = random_cells(2)
    offset, ratio = np.random.default_rng(3).uniform(-1, 1, size=(2, 7))
    found = table(_cells.reexpanded(cells, offset, ratio))
    expected = [
        polynomial.polyval(o + r * T, row) for o, r, row in zip(offset, ratio, cells, strict=True)
    ]
    assert found == pytest.approx(np.array(expected), abs=1e-13)


def test_reexpanded_leaves_its_argument_alone():
    """Profiles share their arrays; one changed in place would change another profile."""
    cells = random_cells(4)
    before = cells.copy()
    _cells.reexpanded(cells, 0.3, 0.5)
    _cells.mirrored(cells)
    np.testing.assert_array_equal(cells, before)


def test_mirrored_reverses_cells_and_what_is_in_them():
    """A profile and its image have the same levels only if both reversals happen."""
    cells = random_cells(5)
    np.testing.assert_allclose(table(_cells.mirrored(cells)), table(cells)[::-1, ::-1], atol=1e-13)
    np.testing.assert_allclose(_cells.mirrored(_cells.mirrored(cells)), cells, atol=1e-12)
    assert not np.allclose(_cells.mirrored(cells), cells[::-1])


# --- the least value -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("cells", "least"),
    [
        ([[3.0], [2.0], [4.0]], 2.0),
        ([[1.0, 2.0], [3.0, -2.5]], 0.5),  # at the right end of the second
        ([[1.0, -4.0, 4.0]], 0.0),  # (1 - 2 t)^2, inside
        ([[1.0, 1.0, 1.0]], 1.0),  # the parabola's own minimum lies outside the cell
        ([[1.0, 4.0, -4.0]], 1.0),  # a maximum inside is not a minimum
        ([[1 / 81, -4 / 27, 2 / 3, -4 / 3, 1.0]], 0.0),  # (t - 1/3)^4: triple zero of the slope
        ([[0.0, 0.0, 0.0, 0.0], [1.0, -4.0, 4.0, 0.0]], 0.0),
        ([[5.0, -4.0, 4.0, 0.0, 0.0], [6.0, -8.0, 0.0, 0.0, 8.0]], 6 - 6 * 0.25 ** (1 / 3)),
    ],
)
def test_minimum(cells, least):
    """No level lies below it: every search starts there, so a value too high loses levels.

    Closed forms; the last is 6 - 8 t + 8 t^4, least where t^3 = 1/4.
    """
    assert _cells.minimum(np.array(cells)) == pytest.approx(least, abs=4 * EPS)


def test_minimum_against_dense_samples():
    """Random quintics: never above any of 20001 samples, and as low as the lowest but for h^2."""
    t = np.linspace(0, 1, 20001)
    for seed in range(20):
        cells = random_cells(seed, cells=9)
        sampled = table(cells, t).min()
        assert sampled - 1e-6 < _cells.minimum(cells) <= sampled + 1e-14


@pytest.mark.parametrize("noise", [0.0, 1e-17, -3e-16, 1e-13])
def test_minimum_is_not_misled_by_rounding_in_the_leading_coefficient(noise):
    """(t - 0.3)^2 with a seventh power of rounding size, as a fit to a parabola leaves it."""
    cells = np.array([[0.09, -0.6, 1.0, 0.0, 0.0, 0.0, 0.0, noise]])
    assert _cells.minimum(cells) == pytest.approx(noise * 0.3**7, abs=2e-17)


# --- joining cells ----------------------------------------------------------------------------


def test_equal_neighbours_are_joined():
    """A thousand rows of three flat layers are three cells: cost follows structure, not rows."""
    x = np.linspace(0.0, 30.0, 1001)
    V = np.where(x[:-1] < 9.99, 0.3, np.where(x[:-1] < 20.01, 0.0, 0.2))[:, None]
    mass = np.broadcast_to([[0.067]], V.shape)
    ends, (V_joined, mass_joined) = _cells.merged(x, [V, mass])
    assert V_joined.tolist() == [[0.3], [0.0], [0.2]]
    assert mass_joined.tolist() == [[0.067]] * 3
    assert ends[[0, -1]].tolist() == [0.0, 30.0] and ends.size == 4


@pytest.mark.parametrize("degree", [1, 2, 3])
def test_a_cut_polynomial_is_joined_again(degree):
    """Cutting a cell changes nothing about the function, so joining must undo it."""
    whole = random_cells(degree, cells=1, degree=degree)
    x = np.sort(np.concatenate([[-2.0, 5.0], np.random.default_rng(8).uniform(-2, 5, 12)]))
    offset, ratio = (x[:-1] + 2) / 7, np.diff(x) / 7
    parts = _cells.reexpanded(np.repeat(whole, 13, axis=0), offset, ratio)
    ends, (joined,) = _cells.merged(x, [parts])
    assert ends.tolist() == [-2.0, 5.0]
    np.testing.assert_allclose(joined, whole, rtol=0, atol=1e-13)


@pytest.mark.parametrize("rows", [10**3, 10**5])
def test_small_bends_do_not_add_up(rows):
    """A finely sampled parabola looks straight from row to row; joining it would flatten a well.

    With 10^5 rows each bend is 2e-10 of the depth, and with 10^7 below rounding: hence the chord
    over the whole run is what decides, and V must survive at every row.
    """
    x = np.linspace(-1.0, 1.0, rows)
    V = x**2
    cells = np.column_stack([V[:-1], np.diff(V)])
    ends, (joined,) = _cells.merged(x, [cells])
    cell = np.clip(np.searchsorted(ends, x, side="right") - 1, 0, ends.size - 2)
    t = (x - ends[cell]) / np.diff(ends)[cell]
    assert np.abs(_cells.evaluated(joined[cell], t) - V).max() < 16 * EPS
    assert ends.size - 1 > 0.9 * rows


def test_bends_below_rounding_do_not_add_up_either():
    """Bends of an eighth of an ulp from cell to cell: every neighbour agrees, the run does not."""
    count, bend = 4000, EPS / 8
    slope = 1.0 + bend * np.arange(count)
    start = np.concatenate([[0.0], np.cumsum(slope)[:-1]])
    x = np.arange(count + 1.0)
    ends, (joined,) = _cells.merged(x, [np.column_stack([start / count, slope / count])])
    cell = np.clip(np.searchsorted(ends, x[:-1], side="right") - 1, 0, ends.size - 2)
    t = (x[:-1] - ends[cell]) / np.diff(ends)[cell]
    assert np.abs(_cells.evaluated(joined[cell], t) - start / count).max() < 32 * EPS


@pytest.mark.parametrize(
    ("V", "mass", "cells"),
    [
        ([[1.0], [1.0], [1.0]], [[1.0], [1.0], [1.0]], 1),
        ([[1.0], [1.0], [2.0]], [[1.0], [1.0], [1.0]], 2),
        ([[1.0], [1.0], [1.0]], [[1.0], [2.0], [2.0]], 2),  # a jump of the mass alone
        ([[1.0, 1.0], [2.0, 1.0], [3.0, 1.0]], [[1.0], [1.0], [1.0]], 1),
        ([[1.0, 1.0], [2.0, 1.0], [3.1, 1.0]], [[1.0], [1.0], [1.0]], 2),  # a jump of 0.1
        ([[1.0, 1.0], [2.0, 1.5], [3.5, 1.0]], [[1.0], [1.0], [1.0]], 3),  # kinks
        ([[1.0, 1.0], [2.0, 1.0], [3.0, 1.0]], [[1.0, 0.0], [1.0, 0.0], [1.0, 0.1]], 2),
    ],
)
def test_cells_join_only_where_all_fields_go_on(V, mass, cells):
    """A cell is one polynomial of V and one of the mass: a jump in either ends it."""
    x = np.arange(4.0)
    ends, fields = _cells.merged(x, [np.array(V), np.array(mass)])
    assert ends.size - 1 == cells
    assert {f.shape[0] for f in fields} == {cells}


def test_a_cell_that_is_alone_keeps_its_digits():
    """Joining must not round what it does not join."""
    x = np.array([0.0, 1.0, 2.0, 3.0])
    cells = np.array([[0.1, 0.2, 0.7], [0.3, 0.0, 0.0], [0.3, 0.0, 0.0]])
    _, (joined,) = _cells.merged(x, [cells])
    assert joined.tolist() == [[0.1, 0.2, 0.7], [0.3, 0.0, 0.0]]


def test_a_few_equal_cells_are_left_alone():
    """Joining must pay: two cells of twelve save less than it takes to find and copy them."""
    x, V = np.arange(13.0), np.random.default_rng(11).random((12, 1))
    V[5] = V[4]
    fields = [V]
    assert _cells.merged(x, fields) == (x, fields)
    V[6:8] = V[4]
    assert _cells.merged(x, fields)[0].size == 10


@pytest.mark.parametrize("block", [1, 2, 7, 100])
def test_blocks_do_not_show(monkeypatch, block):
    """Long tables are worked through in blocks; runs that reach across them are still one cell.

    Steps, ramps, jumps and bends, the mass constant, straight or stepped, each in runs.
    """
    random = np.random.default_rng(12)
    run = np.repeat(np.arange(12), random.integers(1, 15, 12))
    x = np.append(0.0, np.cumsum(random.uniform(0.5, 1.5, run.size)))
    slope = random.normal(size=12) * (np.arange(12) % 3 > 0)
    start = random.normal(size=12)[run] + slope[run] * x[:-1]
    V = np.column_stack([start, slope[run] * np.diff(x)])
    mass = 1.0 + (run[:, None] > 5)
    ends, (V_whole, mass_whole) = _cells.merged(x, [V, mass])
    assert ends.tolist() == x[np.flatnonzero(np.diff(run, prepend=-1, append=99))].tolist()
    monkeypatch.setattr(_cells, "_BLOCK", block)
    for found, whole in zip(_cells.merged(x, [V, mass])[1], (V_whole, mass_whole), strict=True):
        np.testing.assert_array_equal(found, whole)


def test_a_long_table_that_keeps_most_cells_is_left_alone(monkeypatch):
    """A second copy of it would take memory: from half of the cells on, joining pays."""
    x, V = np.arange(41.0), np.random.default_rng(13).random((40, 1))
    V[20:38] = V[19]
    assert _cells.merged(x, [V])[0].size == 23
    monkeypatch.setattr(_cells, "_BLOCK", 10)
    assert _cells.merged(x, [V])[0] is x
    V[20:] = V[19]
    assert _cells.merged(x, [V])[0].size == 21


# --- small tools ---------------------------------------------------------------------------------


def test_one_number_for_all_cells_is_stored_once():
    cells = _cells.repeated(0.067, (10**7, 1))
    assert cells.strides == (0, 0) and cells[-1, 0] == 0.067
    assert _cells.distinct(cells).tolist() == [[0.067]]
    with pytest.raises(ValueError, match="read-only"):
        cells[0] = 1.0
    varied = np.array([[1.0], [1.0]])
    assert _cells.distinct(varied) is varied


def test_trimmed_drops_powers_that_none_has():
    """A column of zeros costs every sweep a multiplication a cell."""
    assert _cells.trimmed(np.array([[1.0, 0, 2, 0], [1, 0, 0, 0]])).tolist() == [
        [1, 0, 2],
        [1, 0, 0],
    ]
    assert _cells.trimmed(np.zeros((2, 3))).tolist() == [[0.0], [0.0]]
    full = np.ones((2, 2))
    assert _cells.trimmed(full) is full


def test_padded_adds_zero_columns_only():
    a, b = _cells.padded([np.ones((2, 1)), np.ones((2, 3))])
    assert a.tolist() == [[1, 0, 0]] * 2
    assert b.tolist() == [[1, 1, 1]] * 2


def test_scaled_keeps_one_number_one_number():
    """A mass that is the same everywhere must not take the memory of ten million rows."""
    one = np.broadcast_to([[0.067]], (10**7, 1))
    scaled = _cells.scaled(one, 2.0)
    assert scaled.strides[0] == 0 and scaled[-1, 0] == 0.134
    assert _cells.scaled(np.array([[1.0, 2.0]]), 3.0).tolist() == [[3.0, 6.0]]


def test_product_is_the_product():
    """The nonparabolic mass m (1 + alpha (E - V)) is made of products; numpy's polymul judges."""
    a, b = random_cells(6, degree=3), random_cells(7, degree=2)
    expected = [polynomial.polymul(p, q) for p, q in zip(a, b, strict=True)]
    np.testing.assert_allclose(_cells.product(a, b), expected, atol=1e-14)
    assert _cells.product(a, np.full((7, 1), 2.0)).tolist() == (2 * a).tolist()


def test_graded_is_straight_between_both_ends():
    start, end = np.array([1.0, 2.0]), np.array([3.0, 2.0])
    assert _cells.graded(start, end).tolist() == [[1.0, 2.0], [2.0, 0.0]]
    assert _cells.graded(start, start).tolist() == [[1.0], [2.0]]  # constant cells stay cheap


def test_from_ppoly_on_its_own_cells_and_on_finer_ones():
    """The mass may have breakpoints of its own: V is then seen from cells that it does not know."""
    own = np.array([-1.0, 0.5, 2.0, 2.5])
    V = PPoly(np.random.default_rng(9).normal(size=(4, 3)), own)
    for x in (own, np.union1d(own, [-0.3, 0.7, 0.71, 2.4])):
        cells = _cells.from_ppoly(V, x)
        assert cells.shape == (x.size - 1, 4)
        inside = T[1:-1]  # at its breakpoints a PPoly takes the value on the right
        at = x[:-1, None] + inside * np.diff(x)[:, None]
        np.testing.assert_allclose(table(cells, inside), V(at), atol=1e-13)
