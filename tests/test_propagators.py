"""Propagators: tables of polynomials of the energy, against the solution in 50 digits."""

import mpmath
import numpy as np
import pytest
from interpreted import interpreted
from kernel_cells import (
    ENERGIES,
    EPS,
    KINDS,
    OPEN,
    WALL,
    direction,
    exact_matrix,
    padded,
    propagator,
    ready,
    rough_cells,
    sweep,
    table,
)

from eigen1d import _plan, _propagators
from eigen1d._compiled import FLAT, SERIES_TERMS

# numba adds small integers as large ones, numpy does not.
PLAIN = interpreted(
    _plan,
    tabulate=lambda *given: interpreted(_propagators)["tabulate"](
        *given[:4], given[4].astype(int), *given[5:]
    ),
)
LOW, HIGH = 0.0, 9.0
# Rounding of 40 cells, magnified where a barrier lets a growing part through, in EPS.
ROOM = 40 * 8


def tabulated(seed, kind, count=6):
    """Random cells cut short, and the places of those with a table: all that are not flat."""
    cells = ready(padded(rough_cells(seed, kind, count), "propagated"), LOW, HIGH)
    assert ((cells[5] >= 0) == (cells[4] != FLAT)).all()
    return cells, np.flatnonzero(cells[5] >= 0)


def worst_error(cells, places, energies):
    """Of all entries of T - 1, in EPS of what the sizes of all coefficients add up to."""
    worst = 0.0
    with mpmath.workdps(50):
        for cell in places:
            bounds = [exact_matrix(cells, cell, energy)[1] for energy in (LOW, HIGH)]
            bound = np.maximum(*bounds).astype(float)
            for energy in energies:
                exact = exact_matrix(cells, cell, energy)[0]
                error = (propagator(cells, cell, energy) - exact).astype(float)
                worst = max(worst, np.max(np.abs(error) / bound) / EPS)
    return worst


# --- against 50 digits ------------------------------------------------------------------------


@pytest.mark.parametrize("kind", KINDS)
def test_a_table_is_the_solution_at_every_energy(kind):
    """From the lowest energy to the highest, no entry is off by more than the rounding of what
    the cell changes. The worst seen is 4 EPS; a power of u too few is off by 1e-9 and more.
    """
    cells, places = tabulated(3, kind)
    assert worst_error(cells, places[:16], np.linspace(LOW, HIGH, 5)) <= 8


@pytest.mark.parametrize("alpha", [0.1, 1.0, 10.0])
@pytest.mark.parametrize("width", [0.02, 0.1, 0.3, 0.5, 0.9])
@pytest.mark.parametrize("way", ["graded", "propagated"])
def test_a_mass_that_depends_on_energy_gets_all_its_powers(alpha, width, way):
    """m = 0.5 (1 + alpha E) brings one power of u a term: a table that ends early is off by 1e-6.

    Against cos and sin, for one flat cell, whichever kernel its number of columns sends it to.
    """
    given = padded(table([width], [[1.0]], [[0.5]], [[0.5 * alpha]]), way)
    cells = ready(given, 0, 2)
    energies = np.linspace(0, 2, 16)
    psi, phi, *_ = sweep(cells, energies)
    for lane, energy in enumerate(energies):
        m = 0.5 * (1 + alpha * energy)
        k = np.sqrt(2 * m * (energy - 1) + 0j)
        exact = width * m * np.sinc(k * width / np.pi), np.cos(k * width)
        found = direction(psi[lane], phi[lane])
        np.testing.assert_allclose(found, direction(*np.real(exact)), rtol=0, atol=8 * EPS)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("backward", [False, True], ids=["forward", "backward"])
def test_a_cell_is_crossed_from_both_ends_by_one_table(kind, backward):
    """Seen from the right, T_11 and T_22 change places, for no table is made twice.

    The exact T^-1 is used as it stands; that det T = 1 is no assumption of this test.
    """
    cells, places = tabulated(4, kind)
    energies = np.linspace(LOW, HIGH, 4)
    with mpmath.workdps(50):
        for cell in places[:8]:
            alone = tuple(a[cell : cell + 1] for a in cells[:6]) + cells[6:]
            psi, phi, *_ = sweep(alone, energies, edge=OPEN, backward=backward)
            for lane, energy in enumerate(energies):
                exact, bound = exact_matrix(cells, cell, energy)
                T = mpmath.matrix((exact + np.eye(2)).tolist())
                start = mpmath.matrix([1, mpmath.sqrt(2 * (9 - mpmath.mpf(energy)) / OPEN[2])])
                if backward:
                    start[1] *= -1
                    end = T**-1 * start
                    end[1] *= -1
                else:
                    end = T * start
                sizes = np.eye(2) + bound
                room = sizes @ np.array([1, abs(start[1])])
                assert abs(psi[lane] - end[0]) <= 16 * EPS * room[0]
                assert abs(phi[lane] - end[1]) <= 16 * EPS * room[1]


# --- against other ways -----------------------------------------------------------------------


@pytest.mark.parametrize("backward", [False, True], ids=["forward", "backward"])
@pytest.mark.parametrize("scale", [1e-5, 1e-4, 1e-3, 5e-3, 0.02, 0.05, 0.2, 1.0])
@pytest.mark.parametrize(
    ("kind", "way"), [("straight", "straight"), ("graded", "graded"), ("alpha", "graded")]
)
def test_propagators_agree_with_straight_cells_by_lanes(kind, way, scale, backward):
    """Unrolled numbers of terms, chosen by a majorant, give what the tables give.

    Cells from 1e-5 to 1 long ask for every one of those lengths; a term too few would show.
    """
    width, V, mass, per_energy = rough_cells(3, kind, count=40)
    given = width * scale, V, mass, per_energy
    by_lanes = ready(padded(given, way), LOW, HIGH)
    by_table = ready(padded(given, "propagated"), LOW, HIGH)
    assert (by_table[5] >= 0).all() and by_lanes[5].size == 0
    fast = sweep(by_lanes, ENERGIES, backward=backward)
    slow = sweep(by_table, ENERGIES, backward=backward)
    np.testing.assert_array_equal(fast[2], slow[2])
    for a, b in zip(direction(*fast[:2]), direction(*slow[:2]), strict=True):
        np.testing.assert_allclose(a, b, rtol=0, atol=ROOM * EPS)


def test_every_number_of_powers_is_used():
    """Of three kinds of cells none is there for nothing, and none is missed by these tests."""
    powers = set()
    for kind, scale in (("cubic", 1e-4), ("cubic", 1e-2), ("cubic", 1.0)):
        width, *rest = rough_cells(3, kind)
        cells = ready((width * scale, *rest), LOW, HIGH)
        powers |= set(np.diff([*cells[5], cells[6].size]) // 4)
    assert powers == set(_propagators._ORDERS)


def test_powers_grow_with_terms_and_suffice():
    """One power of u for two terms, or for each if the mass depends on E: none is ever missing."""
    for with_alpha, most in ((False, SERIES_TERMS), (True, SERIES_TERMS // 2)):
        powers = [PLAIN["orders"](terms, with_alpha) for terms in range(1, most + 1)]
        assert powers == sorted(powers)
        for terms, found in enumerate(powers, start=1):
            # w and q are of degree 1 in u: a term of order k holds u^ceil(k/2), or u^k.
            assert found >= (terms if with_alpha else (terms + 1) // 2) + 1


# --- the making of tables ---------------------------------------------------------------------


@pytest.mark.parametrize("kind", KINDS)
def test_a_table_does_not_depend_on_its_neighbours(kind):
    """Cells are tabulated by lanes with the longest series among them; alone they are the same."""
    cells, places = tabulated(5, kind, count=24)
    assert places.size > 17 or kind == "flat"
    for cell in places[:: max(1, places.size // 5)]:
        one = [np.ascontiguousarray(a[cell : cell + 1]) for a in cells[:4]]
        again = ready(one, LOW, HIGH)
        assert again[0].size == 1
        for energy in (LOW, 4.0, HIGH):
            with mpmath.workdps(30):
                bound = exact_matrix(cells, cell, energy)[1].astype(float)
            difference = propagator(again, 0, energy) - propagator(cells, cell, energy)
            assert (np.abs(difference) <= 8 * EPS * bound).all()


@pytest.mark.parametrize("kind", KINDS)
def test_tables_are_what_their_python_says(kind):
    """Coverage cannot see compiled lines; interpreted they must come to the same numbers."""
    given = padded(rough_cells(6, kind, count=3, longest=0.5), "propagated")
    compiled = _plan.prepared(*given, WALL, WALL, LOW, HIGH, True)[0]
    python = PLAIN["prepare"](*given, WALL, WALL, LOW, HIGH, True)[0]
    np.testing.assert_array_equal(compiled[5], python[5])
    np.testing.assert_array_equal(compiled[7], python[7])
    np.testing.assert_allclose(compiled[6], python[6], rtol=1e-13, atol=1e-18)


def test_fine_tables_need_no_propagators():
    """Ten million rows must not fill memory with tables: short straight cells are summed anew."""
    for mass in ([[1.0]], [[1.0, 0.2]]):
        cells = ready(table([1e-3] * 50, [[3.0, 1.0]] * 50, mass * 50), LOW, HIGH)
        assert cells[5].size == 0 and cells[6].size == 0
    curved = ready(table([1e-3] * 50, [[3.0, 1.0, 0.1]] * 50, [[1.0]] * 50), LOW, HIGH)
    assert curved[5].size == 50
