"""Cells made ready for sweeps: cut short enough, exactly, with terms that suffice, and no more."""

import mpmath
import numpy as np
import pytest
from interpreted import interpreted
from kernel_cells import EPS, OPEN, WALL, ready, rough_cells, sweep, table

from eigen1d import _angles, _plan, _propagators
from eigen1d._compiled import FLAT, LARGEST, SERIES_TERMS, TOO_LONG

# numba adds small integers as large ones, numpy does not.
PLAIN = interpreted(
    _plan,
    tabulate=lambda *given: interpreted(_propagators)["tabulate"](
        *given[:4], given[4].astype(int), *given[5:]
    ),
)
LOW, HIGH = 0.0, 9.0
HEAD = _plan._HEAD


def random_table(seed, degree, mass_degree, alpha=False, count=7, longest=8.0):
    """Random cells, some of them long."""
    random = np.random.default_rng(seed)
    V = random.uniform(-4, 4, (count, degree + 1)) + 5 * np.eye(1, degree + 1)
    mass = random.uniform(-0.2, 0.5, (count, mass_degree + 1))
    mass[:, 0] = random.uniform(1.0, 2.0, count)
    per_energy = random.uniform(0, 0.03, (count, 2)) if alpha else None
    return table(random.uniform(0.05, longest, count), V, mass, per_energy)


SHAPES = [(1, 0, False), (1, 1, False), (1, 1, True), (3, 0, False), (6, 2, True), (12, 0, False)]


def cut(given, low=LOW, high=HIGH):
    """The parts of cells: owner, offset, share, terms, and the cells of a sweep."""
    cells, parts, *_ = _plan.prepared(*given, WALL, WALL, low, high, True)
    return parts[:, 0].astype(int), parts[:, 1], parts[:, 2], parts[:, 3], cells


# --- parts ------------------------------------------------------------------------------------


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("longest", [0.05, 0.5])
def test_prepare_is_what_its_python_says(shape, longest):
    """Coverage cannot see compiled lines; interpreted they must decide and compute the same."""
    given = random_table(1, *shape, count=2, longest=longest)
    compiled = _plan.prepared(*given, WALL, OPEN, LOW, HIGH, False)
    python = PLAIN["prepare"](*given, WALL, OPEN, LOW, HIGH, False)
    assert compiled[4] == python[4]
    for a, b in zip(compiled[1:4], python[1:4], strict=True):
        np.testing.assert_array_equal(a, b)
    for i, (a, b) in enumerate(zip(compiled[0], python[0], strict=True)):
        if i == 6:  # tables: sums with fused roundings
            np.testing.assert_allclose(a, b, rtol=1e-13, atol=1e-18)
        else:
            np.testing.assert_array_equal(a, b)


@pytest.mark.parametrize("shape", SHAPES)
def test_parts_cover_each_cell_without_a_gap(shape):
    """Halves of halves: widths and places are exact in binary, and add up to the cell."""
    given = random_table(2, *shape)
    owner, offset, share, terms, cells = cut(given)
    np.testing.assert_array_equal(np.frexp(share)[0], 0.5)  # powers of two
    np.testing.assert_array_equal(cells[0], given[0][owner] * share)
    np.testing.assert_array_equal(cells[4], terms)
    assert (np.diff(owner) >= 0).all()
    for cell in range(7):
        mine = owner == cell
        np.testing.assert_array_equal(offset[mine], np.cumsum([0, *share[mine][:-1]]))
        assert share[mine].sum() == 1
    assert not (terms == TOO_LONG).any() and (owner.size > 7)


@pytest.mark.parametrize("shape", SHAPES)
def test_parts_are_short(shape):
    """2 m |V - E| h^2 <= LARGEST < pi^2: psi has at most one zero in a part, so none is missed."""
    width, V, mass, per_energy, terms, *_ = cut(random_table(3, *shape))[4]
    t = np.linspace(0, 1, 33)
    assert (terms != FLAT).all()
    for i in range(width.size):
        m = np.polyval(mass[i, ::-1], t) + HIGH * np.polyval(per_energy[i, ::-1], t)
        reach = np.abs(np.polyval(V[i, ::-1], t) - np.array([[LOW], [HIGH]]))
        assert (2 * m * reach * width[i] ** 2 <= LARGEST).all()


def test_a_cell_is_cut_once_it_may_hold_two_zeros():
    """The bound itself, from both sides: 2 m |V - E| h^2 of 0.98 and of 1.02 LARGEST."""
    for share, parts in ((0.98, 1), (1.02, 2)):
        width = np.sqrt(share * LARGEST / (2 * 0.7 * 5.0))
        for V in ([0.0, 1e-9], [5.0, -1e-9], [0.0, 1e-9, 1e-9]):
            cells = ready(table([width], [V], [[0.7]]), 0.0, 5.0)
            assert cells[0].size == parts


def test_polynomials_of_parts_are_exact():
    """Against 40-digit arithmetic, where power coefficients cancel to nothing.

    A sextic 0.023 (x - 7.77)^6 in one cell: plain doubles lose 7 digits of V at its bottom.
    """
    given = table([20.0], 0.023 * np.poly([7.77 / 20] * 6)[::-1] * 20.0**6, [[1.0]])
    _, offset, share, _, cells = cut(given, 0.0, 2.0)
    assert offset.size > 30
    with mpmath.workdps(40):
        exact = [mpmath.mpf(float(c)) for c in given[1][0]]
        for row, a, b in zip(
            cells[1], map(mpmath.mpf, offset), map(mpmath.mpf, share), strict=True
        ):
            size = sum(abs(c) for c in row)
            height = max(abs(row[0]), abs(row[0] - 2.0))
            for j in range(7):
                want = b**j * sum(
                    mpmath.binomial(k, j) * exact[k] * a ** (k - j) for k in range(j, 7)
                )
                # Pairs of doubles: some eps^2 of the largest coefficient, 1e7, at worst. What is
                # far below rounding of V - E at the end of a polynomial is left out.
                dropped = 2.0**-8 * EPS * height if row[j] == 0 else 0
                assert abs(row[j] - want) <= 2 * EPS * size + 1e-22 + dropped


def test_powers_that_vanish_are_not_paid_for():
    """Parts of a cell of degree 12 are so short that V in them is of a lower degree."""
    V = 4e4 * np.exp(-np.arange(13.0))
    *_, cells = cut(table([2.0], [V], [[0.9]]), 4e4, 4.1e4)
    degree = np.array([np.flatnonzero(row).max(initial=0) for row in cells[1]])
    assert np.median(degree) <= 6


# --- terms ------------------------------------------------------------------------------------


@pytest.mark.parametrize("columns", [1, 2])
def test_short_cells_take_few_terms(columns):
    """Fine tables must be cheap, coarse ones possible: from 1 term to nearly the most there are."""
    terms = []
    for width in np.geomspace(1e-9, 0.5, 60):
        given = table([width], [[1.0, 0.5]], [[1.0, 0.0][:columns]])
        cells, parts, *_ = _plan.prepared(*given, WALL, WALL, 0.0, 3.0, True)
        assert parts.size == 0
        terms.append(int(cells[4][0]))
    assert terms == sorted(terms) and terms[0] <= 3 and 12 < terms[-1] <= SERIES_TERMS


def test_neighbours_share_terms_but_never_take_fewer():
    """A run of rows is planned by its largest coefficients, for there may be millions of them."""
    width, V, mass, per_energy = rough_cells(4, "straight", count=150)
    given = width * 0.02, V, mass, per_energy
    together = ready(given, LOW, HIGH)[4]
    alone = [ready([a[i : i + 1] for a in given], LOW, HIGH)[4][0] for i in range(150)]
    assert (together >= alone).all()
    assert (together <= max(alone) + 2).all()


def test_only_flat_cells_are_left_long():
    """A flat layer of any width is one step in closed form; the least slope makes it many."""
    for alpha in (None, [[0.1]]):
        cells = ready(table([500.0], [[4.0]], [[1.0]], alpha), LOW, HIGH)
        assert cells[0].size == 1 and cells[4] == FLAT
    for V, mass, alpha in (
        ([4.0, 1e-9], [1.0], None),
        ([4.0], [1.0, 1e-9], None),
        ([4.0], [1.0], [0.1, 1e-9]),
    ):
        cells = ready(table([500.0], [V], [mass], None if alpha is None else [alpha]), LOW, HIGH)
        assert cells[0].size > 500 and (cells[4] != FLAT).all()


def test_the_span_of_energies_is_a_power_of_two():
    """u = (E - floor) / scale is then exact, and stays in [0, 1]."""
    for low, high in ((0.0, 9.0), (-3.3, -3.2), (1e5, 1e5 + 1e-9), (2.0, 2.0)):
        floor, scale = ready(rough_cells(1, "straight"), low, high)[7]
        assert floor == low and np.frexp(scale)[0] == 0.5
        assert high - low <= scale <= max(2 * (high - low), 1.0)


# --- what is handed over ----------------------------------------------------------------------


def test_views_and_read_only_arrays_are_taken():
    """A profile hands over read-only arrays, and one mass as a view: no version of each is made."""
    width, V, mass, per_energy = rough_cells(9, "straight")
    energies = np.linspace(0.3, 9.0, 16)
    mass = np.full(mass.shape, 0.8)
    expected = sweep(ready((width, V, mass, per_energy), LOW, HIGH), energies)
    strided = np.asfortranarray(V)
    one = np.broadcast_to(np.array([0.8]), mass.shape)
    strided.flags.writeable = False
    found = sweep(ready((width, strided, one, per_energy), LOW, HIGH), energies)
    assert len(_plan.prepared.signatures) == 1
    for a, b in zip(expected, found, strict=True):
        np.testing.assert_array_equal(a, b)


def test_a_fine_table_keeps_its_own_arrays():
    """Ten million rows are not copied: memory is for the user's own."""
    given = table(np.full(50, 1e-3), np.full((50, 2), 3.0), np.ones((50, 1)))
    cells, parts, *_ = _plan.prepared(*given, WALL, WALL, LOW, HIGH, True)
    assert parts.size == 0 and cells[6].size == 0
    for own, kept in zip(given[:3], cells[:3], strict=True):
        assert np.shares_memory(own, kept)


@pytest.mark.parametrize("kind", ["straight", "cubic"])
def test_home_is_the_deepest_cell(kind):
    """Where solutions meet first: there most low states are large."""
    given = rough_cells(6, kind, count=40)
    cells, _, _, _, home = _plan.prepared(*given, WALL, WALL, LOW, HIGH, True)
    assert home == np.argmin(cells[1][:, 0] + cells[1].sum(axis=1))


# --- what lies deep in barriers ---------------------------------------------------------------


def deep(seed, kind):
    """Random wells between barriers of hundreds of decay lengths, and an energy below these."""
    random = np.random.default_rng(seed)
    core = rough_cells(seed, "flat" if kind == "layers" else kind, count=9, longest=1.0)
    core[1][:] *= 0.6
    top = random.uniform(6.0, 8.0)
    # Barriers from barely above the top, rising or falling outwards, with walls or open edges.
    outside = 60
    V = np.zeros((2 * outside, core[1].shape[1]))
    V[:, 0] = top + 10.0 ** random.uniform(-2, 1.5, 2 * outside)
    if kind != "layers":
        V[:, 1] = random.uniform(-0.5, 0.5, V.shape[0]) * (V[:, 0] - top)
    mass = np.full((2 * outside, core[2].shape[1]), 0.0)
    mass[:, 0] = random.uniform(0.3, 1.0, mass.shape[0])
    width = random.uniform(0.3, 2.0, V.shape[0])
    parts = [
        np.concatenate([a[:outside], b, a[outside:]])
        for a, b in zip((width, V, mass), core, strict=False)
    ]
    edges = (WALL, np.array([1.0, 12.0, 0.7, 0.0]))
    return (*parts, np.empty((width.size + 9, 0))), *random.permutation(edges), top


def both(given, left, right, top, floor=0.0):
    """The angle of all energies with all cells and with those kept, at the same place."""
    energies = np.append(np.linspace(floor, top, 200)[1:], top)
    found = []
    for whole in (True, False):
        cells, _, one, other, home = _plan.prepared(*given, left, right, floor, top, whole)
        turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
        stop = np.full(energies.size, home)
        _angles.angles(cells, one, other, stop, energies, turn, angle)
        found.append((cells[0].size, turn, angle, cells[1][home]))
    np.testing.assert_array_equal(found[0][3], found[1][3])
    return found


@pytest.mark.parametrize("kind", ["layers", "straight", "graded", "cubic"])
@pytest.mark.parametrize("seed", range(6))
def test_what_lies_deep_in_a_barrier_changes_no_digit(kind, seed):
    """Cells 20 decay lengths behind the last place that an energy reaches are left out.

    They change the angle by exp(-40) = 4e-18: by rounding, at every energy up to the top, and no
    count; whatever lies beyond, walls included. With 12 lengths it is 4e-11.
    """
    (all_, turn, angle, _), (kept, kept_turn, kept_angle, _) = both(*deep(seed, kind))
    assert kept < all_ - 20
    assert turn[-1] >= 3
    difference = (turn - kept_turn) * np.pi + (angle - kept_angle)
    np.testing.assert_allclose(difference, 0, atol=1e-13)


def test_what_is_near_or_depends_on_energy_is_kept():
    """A barrier of 10 decay lengths matters to 2e-9, and with alpha no bound on V tells enough."""
    layers = table([1.0, 1.0, 1.0], [[52.0], [0.0], [52.0]], [[1.0]] * 3)  # 10 lengths at E = 2
    assert both(layers, WALL, WALL, 2.0)[1][0] == 3
    thick = table([1.0] * 9, [[52.0]] * 4 + [[0.0]] + [[52.0]] * 4, [[1.0]] * 9)
    # Two cells on each side would do for 20 lengths; like the edge beside them, they say nothing.
    assert both(thick, WALL, WALL, 2.0)[1][0] == 1
    alpha = *thick[:3], np.full((9, 1), 0.1)
    assert both(alpha, WALL, WALL, 2.0)[1][0] == 9
    # An energy that reaches no cell leaves all of them.
    assert both(table([9.0] * 3, [[50.0]] * 3, [[1.0]] * 3), WALL, WALL, 2.0)[1][0] == 3


def test_wells_behind_a_barrier_are_kept():
    """Only what lies outside of every well is cut off, however deep it is between them."""
    V = [[52.0]] * 4 + [[0.0]] + [[52.0]] * 20 + [[1.0]] + [[52.0]] * 4
    given = table([1.0] * 30, V, [[1.0]] * 30)
    whole, kept = both(given, WALL, WALL, 2.0)
    assert kept[0] == 22
    np.testing.assert_array_equal(whole[1], kept[1])


@pytest.mark.parametrize("alpha", [0.0, 0.02])
def test_cells_that_go_on_like_the_open_edge_say_nothing(alpha):
    """However near they are to a well, and with any mass: psi decays in them as it does outside."""
    V = np.array([[9.0]] * 3 + [[0.0], [3.0], [0.5]] + [[8.0]] * 3)
    mass = np.array([[0.7]] * 3 + [[0.5]] * 3 + [[0.4]] * 3)
    left, right = (np.array([1.0, v, m, m * alpha]) for v, m in ((9.0, 0.7), (8.0, 0.4)))
    given = np.full(9, 0.3), V, mass, mass * alpha if alpha else np.empty((9, 0))
    whole, kept = both(given, left, right, 7.9)
    assert (whole[0], kept[0]) == (9, 3)
    difference = (whole[1] - kept[1]) * np.pi + (whole[2] - kept[2])
    np.testing.assert_allclose(difference, 0, atol=1e-14)
    # Another V, mass or alpha, in the second cell from the edge, is not like it.
    for field in (1, 2, 3)[: 3 if alpha else 2]:
        other = [a.copy() for a in given]
        other[field][1, 0] *= 1.001
        assert both(other, left, right, 7.9)[1][0] == 5


# --- long tails -------------------------------------------------------------------------------


def tail(name, pieces):
    """Polynomial cells of a well whose sides rise slowly, and the energy of many levels in it."""
    V, span, top = {
        "quartic": (lambda x: x**4, (-7.0, 6.0), 300.0),
        "coulomb": (lambda x: 60 - 300 / (x + 5), (-0.2, 60.0), 50.0),
        "morse": (lambda x: 50 * (1 - np.exp(-x)) ** 2, (-1.2, 25.0), 49.0),
    }[name]
    edges = np.linspace(*span, pieces + 1)
    t = 0.5 - 0.5 * np.cos(np.pi * (np.arange(9) + 0.5) / 9)
    rows = [
        np.linalg.solve(np.vander(t, increasing=True), V(a + (b - a) * t))
        for a, b in zip(edges[:-1], edges[1:], strict=True)
    ]
    return table(np.diff(edges), np.array(rows) - V(0.0), np.ones((pieces, 1))), top - V(0.0)


@pytest.mark.parametrize("pieces", [7, 40, 160])
@pytest.mark.parametrize("name", ["quartic", "coulomb", "morse"])
def test_cells_of_a_tail_serve_only_energies_that_reach_them(name, pieces):
    """Lower ones begin further in, 20 decay lengths behind the last place that they reach.

    At no energy does the angle change by more than rounding, though the cells are fewer.
    """
    given, top = tail(name, pieces)
    floor = np.polynomial.polynomial.polyval(np.linspace(0, 1, 101), given[1].T).min() - 1e-9
    whole, kept = (_plan.prepared(*given, WALL, WALL, floor, top, all_) for all_ in (True, False))
    assert kept[0][0].size < whole[0][0].size
    least = kept[0][8]
    assert (whole[0][8] == floor).all()
    if pieces > 7:
        assert least.max() > floor + 0.4 * (top - floor) and (least == floor).any()
    (_, turn, angle, _), (_, kept_turn, kept_angle, _) = both(given, WALL, WALL, top, floor)
    assert turn[-1] > 8
    difference = (turn - kept_turn) * np.pi + (angle - kept_angle)
    np.testing.assert_allclose(difference, 0, atol=1e-12)


def test_low_and_high_energies_share_a_sweep_through_a_tail():
    """Lanes that begin further in do not disturb those that come from the edge."""
    given, top = tail("coulomb", 40)
    cells, *_ = _plan.prepared(*given, WALL, WALL, -0.01, top, False)
    energies = np.linspace(0.0, top, 16)
    for backward in (False, True):
        together = sweep(cells, energies, backward=backward, stop=cells[0].size // 3)
        for lane, energy in enumerate(energies):
            alone = sweep(cells, energy, backward=backward, stop=cells[0].size // 3)
            for a, b in zip(alone[:3], together[:3], strict=True):
                assert a[0] == b[lane]
