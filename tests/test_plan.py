"""Cells made ready for sweeps: cut short enough, exactly, with terms that suffice."""

import mpmath
import numpy as np
import pytest
from interpreted import interpreted

from eigen1d import _plan
from eigen1d._compiled import EPS, FLAT, GRADED_TERMS, LARGEST, STRAIGHT_TERMS, TOO_LONG

PLAIN = interpreted(_plan)


def table(width, V, mass, per_energy=None):
    """Arrays of cells from lists of coefficients."""
    V, mass = (np.array(rows, dtype=float, ndmin=2) for rows in (V, mass))
    empty = np.empty((len(width), 0))
    per_energy = empty if per_energy is None else np.array(per_energy, dtype=float, ndmin=2)
    return np.array(width, dtype=float), V, mass, per_energy


def random_table(seed, degree, mass_degree, alpha=False, count=7):
    """Random cells, some of them long."""
    random = np.random.default_rng(seed)
    V = random.uniform(-4, 4, (count, degree + 1)) + 5 * np.eye(1, degree + 1)
    mass = random.uniform(-0.2, 0.5, (count, mass_degree + 1))
    mass[:, 0] = random.uniform(1.0, 2.0, count)
    per_energy = random.uniform(0, 0.03, (count, 2)) if alpha else None
    return table(random.uniform(0.05, 8.0, count), V, mass, per_energy)


SHAPES = [(1, 0, False), (1, 1, False), (1, 1, True), (3, 0, False), (6, 2, True), (12, 0, False)]


@pytest.mark.parametrize("shape", SHAPES)
def test_plan_and_cut_are_what_their_python_says(shape):
    """Coverage cannot see compiled lines; interpreted they must decide and compute the same."""
    given = random_table(1, *shape)
    terms, again = np.empty(7, np.uint8), np.empty(7, np.uint8)
    assert _plan.plan(*given, 0.0, 9.0, terms) == PLAIN["plan"](*given, 0.0, 9.0, again)
    np.testing.assert_array_equal(terms, again)
    *compiled, tables = _plan.cut(*given, 0.0, 9.0)
    *python, others = PLAIN["cut"](*given, 0.0, 9.0)
    for a, b in zip((*compiled, *tables), (*python, *others), strict=True):
        np.testing.assert_array_equal(a, b)


@pytest.mark.parametrize("shape", SHAPES)
def test_parts_cover_each_cell_without_a_gap(shape):
    """Halves of halves: widths and places are exact in binary, and add up to the cell."""
    given = random_table(2, *shape)
    owner, offset, terms, tables = _plan.cut(*given, 0.0, 9.0)
    share = tables[0] / given[0][owner]
    np.testing.assert_array_equal(np.frexp(share)[0], 0.5)  # powers of two
    for cell in range(7):
        mine = owner == cell
        np.testing.assert_array_equal(offset[mine], np.cumsum([0, *share[mine][:-1]]))
        assert share[mine].sum() == 1
    assert not (terms == TOO_LONG).any() and (owner.size > 7)


@pytest.mark.parametrize("shape", SHAPES)
def test_parts_are_short(shape):
    """2 m |V - E| h^2 <= LARGEST < pi^2: psi has at most one zero in a part, so none is missed."""
    low, high = 0.0, 9.0
    _, _, terms, (width, V, mass, per_energy, *_) = _plan.cut(*random_table(3, *shape), low, high)
    t = np.linspace(0, 1, 33)
    for i in range(width.size):
        m = np.polyval(mass[i, ::-1], t) + high * np.polyval(per_energy[i, ::-1], t)
        reach = np.abs(np.polyval(V[i, ::-1], t) - np.array([[low], [high]]))
        assert terms[i] == FLAT or (2 * m * reach * width[i] ** 2 <= LARGEST).all()


def test_polynomials_of_parts_are_exact():
    """Against 40-digit arithmetic, from both ends, where power coefficients cancel to nothing.

    A sextic 0.023 (x - 7.77)^6 in one cell: plain doubles lose 7 digits of V at its bottom.
    """
    given = table([20.0], 0.023 * np.poly([7.77 / 20] * 6)[::-1] * 20.0**6, [[1.0]])
    _, offset, _, (width, V_left, _, _, V_right, _, _) = _plan.cut(*given, 0.0, 2.0)
    with mpmath.workdps(40):
        exact = [mpmath.mpf(float(c)) for c in given[1][0]]
        for i in range(width.size):
            start, share = mpmath.mpf(offset[i]), mpmath.mpf(width[i]) / 20
            for row, a, b in ((V_left[i], start, share), (V_right[i], start + share, -share)):
                size = sum(abs(c) for c in row)
                for j in range(7):
                    want = b**j * sum(
                        mpmath.binomial(k, j) * exact[k] * a ** (k - j) for k in range(j, 7)
                    )
                    # Pairs of doubles: some eps^2 of the largest coefficient, 1e7, at worst.
                    assert abs(row[j] - want) <= 2 * EPS * size + 1e-22


@pytest.mark.parametrize(("mass_degree", "most"), [(0, STRAIGHT_TERMS), (1, GRADED_TERMS)])
def test_short_cells_take_few_terms(mass_degree, most):
    """Fine tables must be cheap, coarse ones possible: from 1 term to nearly the most there are."""
    terms = []
    for width in np.geomspace(1e-9, 0.5, 60):
        needed = np.empty(1, np.uint8)
        row = [[1.0, 0.0][: mass_degree + 1]]
        assert _plan.plan(*table([width], [[1.0, 0.5]], row), 0.0, 3.0, needed)
        terms.append(int(needed[0]))
    assert terms == sorted(terms) and terms[0] <= 3 and 12 < terms[-1] <= most


def test_only_flat_cells_are_left_long():
    """A flat layer of any width is one step in closed form; the least slope makes it many."""
    needed = np.empty(1, np.uint8)
    assert _plan.plan(*table([500.0], [[4.0]], [[1.0]]), 0.0, 9.0, needed)
    assert needed[0] == FLAT
    assert not _plan.plan(*table([500.0], [[4.0, 1e-9]], [[1.0]]), 0.0, 9.0, needed)
    assert not _plan.plan(*table([500.0], [[4.0]], [[1.0, 1e-9]]), 0.0, 9.0, needed)
