"""Sweeps: compiled against interpreted, one way across a cell against another, counts, range."""

import math
import pathlib

import mpmath
import numba
import numpy as np
import pytest
from interpreted import interpreted
from kernel_cells import (
    ENERGIES,
    EPS,
    KINDS,
    OPEN,
    WAYS,
    crossed,
    direction,
    exact_matrix,
    padded,
    ready,
    rough_cells,
    sweep,
    table,
)
from scipy.integrate import solve_ivp

from eigen1d import _compiled, _kernels
from eigen1d._compiled import FLAT

PLAIN = interpreted(_kernels)
BOTH = pytest.mark.parametrize("backward", [False, True], ids=["forward", "backward"])


# --- compiled and interpreted -----------------------------------------------------------------


@pytest.mark.parametrize("kind", KINDS)
@BOTH
@pytest.mark.parametrize("lanes", [1, 5, 16])
def test_sweep_is_what_its_python_says(kind, backward, lanes):
    """The compiler changes nothing but the last digits of sin, cos and exp, and fused roundings.

    Coverage cannot see compiled lines, so this is also what runs each of them under it.
    """
    cells = ready(rough_cells(7, kind, longest=0.5), ENERGIES[0], ENERGIES[-1])
    cells = tuple(a[:12] for a in cells[:4]) + (cells[4][:12], cells[5][:12], *cells[6:])
    edge = np.array([1.0, 9.5, 0.7, 0.01])
    compiled = sweep(cells, ENERGIES[:lanes], edge=edge, backward=backward)
    python = sweep(cells, ENERGIES[:lanes], edge=edge, backward=backward, run=PLAIN["sweep"])
    np.testing.assert_array_equal(compiled[2], python[2])
    for a, b in zip(compiled[:2], python[:2], strict=True):
        np.testing.assert_allclose(a, b, rtol=1e-12)
    np.testing.assert_allclose(compiled[3], python[3], rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("scale", [1e-9, 1e-4, 1e-3, 5e-3, 0.02, 0.2])
@pytest.mark.parametrize("kind", ["straight", "graded"])
def test_short_steps_are_what_their_python_says(kind, scale):
    """The same for each unrolled number of terms."""
    width, V, mass, per_energy = rough_cells(7, kind)
    cells = ready((width * scale, V, mass, per_energy), ENERGIES[0], ENERGIES[-1])
    compiled, python = sweep(cells, ENERGIES), sweep(cells, ENERGIES, run=PLAIN["sweep"])
    for a, b in zip(compiled, python, strict=True):
        np.testing.assert_allclose(a, b, rtol=1e-13)


@pytest.mark.parametrize("kind", KINDS)
def test_along_is_what_its_python_says(kind):
    """The same for wave functions between the nodes, evaluated from both sides."""
    cells = ready(rough_cells(8, kind, count=5), ENERGIES[0], ENERGIES[-1])
    random = np.random.default_rng(8)
    levels, points, count = 3, 9, cells[0].size
    start = random.uniform(-1, 1, (3, levels, count + 1))
    cell, fraction = random.integers(count, size=points), random.uniform(0, 1, points)
    stop = np.array([1, 3, 5])
    results = []
    for run in (_kernels.along, PLAIN["along"]):
        psi, phi = np.empty((levels, points)), np.empty((levels, points))
        run(cells, ENERGIES[:levels].copy(), *start.copy(), cell, fraction, stop, psi, phi)
        results.append((psi, phi))
    np.testing.assert_allclose(results[0], results[1], rtol=1e-12, atol=1e-13)


def test_every_kernel_file_is_a_source_of_the_cache():
    """A kernel file left out could change and leave those that call it running old code."""
    folder = pathlib.Path(_compiled.__file__).parent
    texts = {path.name: path.read_text() for path in folder.glob("*.py")}
    kernels = {name for name, text in texts.items() if "@kernel" in text or "@apart" in text}
    assert kernels | {"_compiled.py"} == set(_compiled.SOURCES)
    assert numba.config.CACHE_DIR != _compiled._FOLDER  # other packages keep their own place


# --- one way across a cell against another ----------------------------------------------------


@pytest.mark.parametrize("V, mass", [(0.0, 1.3), (7.9, 0.4), (20.0, 0.7), (300.0, 2.0)])
@pytest.mark.parametrize("width", [0.9, 5.0, 31.0])
@pytest.mark.parametrize("way", WAYS)
def test_flat_cells_in_closed_form_agree_with_short_ones(V, mass, width, way):
    """One step by cos or by exponentials, for any width, gives what hundreds of short ones give."""
    given = table([width], [[V]], [[mass]])
    assert ready(given, ENERGIES[0], ENERGIES[-1])[4] == FLAT
    once = crossed(given, ENERGIES, edge=OPEN)
    parts = 2048
    short = padded(table([width / parts] * parts, [[V]] * parts, [[mass]] * parts), way)
    assert (ready(short, ENERGIES[0], ENERGIES[-1])[4] != FLAT).all()
    pieces = crossed(short, ENERGIES, edge=OPEN)
    np.testing.assert_array_equal(once[2], pieces[2])
    scale = max(1.0, width * math.sqrt(2 * mass * abs(V - 0.3)))  # the phase is rounded too
    for a, b in zip(direction(*once[:2]), direction(*pieces[:2]), strict=True):
        np.testing.assert_allclose(a, b, rtol=0, atol=16 * EPS * scale)


@pytest.mark.parametrize("kind", KINDS)
@BOTH
def test_sweep_solves_the_equation(kind, backward):
    """psi' = m phi, phi' = 2 (V - E) psi, integrated by scipy instead, which knows no series.

    DOP853 at 1e-12 a step is good to 1e-10 over these cells.
    """
    width, V, mass, per_energy = given = rough_cells(5, kind, count=6)
    energy = 6.2
    state = np.array([1.0, math.sqrt(2 * (9.0 - energy) / 0.7)])
    order = range(5, -1, -1) if backward else range(6)

    def slope(t, y, c, h, flip):
        t = 1 - t if flip else t
        m = np.polyval(mass[c, ::-1], t) + energy * np.polyval(per_energy[c, ::-1], t)
        return h * np.array([m * y[1], 2 * (np.polyval(V[c, ::-1], t) - energy) * y[0]])

    for c in order:
        args = (c, width[c], backward)
        state = solve_ivp(slope, (0, 1), state, "DOP853", rtol=1e-12, atol=1e-14, args=args).y[
            :, -1
        ]
        state /= np.hypot(*state)
    cells = ready(given, 0.0, 9.0)
    psi, phi, *_ = sweep(cells, energy, edge=OPEN, backward=backward)
    np.testing.assert_allclose([a[0] for a in direction(psi, phi)], state, rtol=0, atol=1e-10)


def test_a_polynomial_of_high_degree_in_one_cell():
    """Degree 12 with coefficients that cancel: cells are cut until the series has enough terms."""
    roots = np.linspace(0.1, 0.9, 12)
    V = np.poly(roots)[::-1] * 1e8
    given = table([2.0], [V], [[0.9]])
    psi, phi, zeros, _ = crossed(given, [1.0, 40.0], edge=OPEN)

    def slope(t, y, energy):
        V = 1e8 * np.prod(t - roots)
        return 2.0 * np.array([0.9 * y[1], 2 * (V - energy) * y[0]])

    for lane, energy in enumerate((1.0, 40.0)):
        start = [1.0, math.sqrt(2 * max(9.0 - energy, 0.0) / 0.7)]
        other = solve_ivp(slope, (0, 1), start, "DOP853", rtol=1e-12, atol=1e-12, args=(energy,))
        found = direction(psi[lane], phi[lane])
        np.testing.assert_allclose(found, direction(*other.y[:, -1]), rtol=0, atol=1e-7)


# --- between the nodes ------------------------------------------------------------------------


def along(cells, energy, start, fraction, backward=1):
    """psi and phi of one level inside the first cell; start: psi, phi, log at both its ends."""
    fraction = np.array(fraction)
    psi, phi = np.empty((1, fraction.size)), np.empty((1, fraction.size))
    first = np.zeros(fraction.size, np.int64)
    cells = tuple(a[:1] for a in cells[:5]) + cells[5:]
    rows = [np.array([row], dtype=float) for row in np.transpose(start)]
    _kernels.along(
        cells, np.array([energy]), *rows, first, fraction, np.array([backward]), psi, phi
    )
    return psi[0], phi[0]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("log", [0.0, -40.0])
def test_along_follows_the_series_through_a_short_cell(kind, log):
    """At both ends of a cell and inside, to rounding of what it changes, against 50 digits."""
    given = rough_cells(8, kind, count=1, longest=0.06)
    cells = ready(given, 0.0, 9.0)
    assert cells[4][0] != FLAT
    places, start = [0.0, 1e-3, 0.3, 0.77, 1.0], np.array([0.7, -0.9])
    for energy in (0.0, 3.3, 9.0):
        found = along(cells, energy, [[*start, log], [np.nan] * 3], places)
        with mpmath.workdps(50):
            for i, t in enumerate(places):
                change, bound = exact_matrix(cells, 0, energy, t)
                exact = (np.eye(2) + change) @ start * mpmath.exp(log)
                room = 8 * EPS * (np.eye(2) + bound) @ np.abs(start) * math.exp(log)
                for row in range(2):
                    assert abs(found[row][i] - exact[row]) <= room[row]


@pytest.mark.parametrize("side", ["left", "right"])
@pytest.mark.parametrize("v", [-3.0, -0.2, 0.0])
def test_along_goes_through_flat_layers_from_the_side_that_grows(side, v):
    """Where V = E + v is not above E, cos and sin from one end, whichever the state grows from."""
    cells = ready(table([31.0], [[4.0]], [[0.7]]), 0.0, 9.0)
    assert cells[4][0] == FLAT
    places, k = np.array([0.0, 0.1, 0.5, 0.93, 1.0]), math.sqrt(-2 * 0.7 * v)
    x = 31.0 * places
    sine = np.sin(k * x) / k if k else x
    psi, phi = np.cos(k * x) + 0.3 * 0.7 * sine, 0.3 * np.cos(k * x) + 2 * v * sine
    ends = [[psi[0], phi[0], 0.0], [psi[-1], phi[-1], 0.0]]
    ends[0 if side == "right" else 1] = [np.nan] * 3
    found = along(cells, 4.0 - v, ends, places, backward=1 if side == "left" else 0)
    room = 64 * EPS * (1 + 31 * k) * np.max(np.abs([psi, phi]))
    np.testing.assert_allclose(found, (psi, phi), rtol=0, atol=room)


@pytest.mark.parametrize("k", [2.0, 40.0, 2000.0])
def test_inside_a_barrier_both_ends_count(k):
    """psi = exp(-u) + c exp(u - k) inside k decay lengths, from its values at both ends.

    From one end alone, a state that decays towards the other loses all digits on the way.
    """
    c, mass, v, energy = 0.3, 0.5, 2.0, 1.0
    slope = math.sqrt(2 * v / mass)
    width = k / math.sqrt(2 * mass * v)
    cells = ready(table([width], [[energy + v]], [[mass]]), 0.0, energy)
    start, end = 1 + c * math.exp(-k), math.exp(-k) + c
    u = k * np.array([0.0, 0.2, 0.5, 0.9, 1.0])
    ends = [[start * math.exp(3.0), np.nan, -3.0], [end * math.exp(-5.0), np.nan, 5.0]]
    found = along(cells, energy, ends, u / k)
    expected = np.exp(-u) + c * np.exp(u - k), slope * (c * np.exp(u - k) - np.exp(-u))
    np.testing.assert_allclose(found, expected, rtol=1e-12)


# --- counting ---------------------------------------------------------------------------------


@pytest.mark.parametrize("parts", [1, 2, 3, 7, 8, 256, 264])
@pytest.mark.parametrize("way", WAYS)
def test_a_zero_on_a_joint_is_counted_once(parts, way):
    """sin(k x) in a box has floor(k L / pi) zeros wherever the cells are cut, zeros included.

    For k L = j pi and cuts at L/8, 2L/8 ... rounding puts zeros on either side of a joint; one
    counted twice or never would make a level appear twice or vanish.
    """
    k = np.arange(1, 65) / 8 * np.pi  # L = 8; j = k L / pi whole
    given = table([8.0 / parts] * parts, [[0.0]] * parts, [[1.0]] * parts)
    cells = ready(padded(given, way), 0.0, 0.5 * k[-1] ** 2 + 1)
    assert (cells[4] == FLAT).all() == (parts < 256)
    for low in range(0, 64, 16):
        part = slice(low, low + 16)
        for shift in (-1e-9, 1e-9):
            zeros = sweep(cells, 0.5 * (k[part] + shift) ** 2)[2]
            np.testing.assert_array_equal(zeros, np.arange(low, low + 16) + (shift > 0))
    # At the levels themselves, the last zero falls on the wall: on either side by rounding.
    zeros = np.concatenate([sweep(cells, 0.5 * k[i : i + 16] ** 2)[2] for i in range(0, 64, 16)])
    assert set(zeros - np.arange(64)) <= {0, 1}


@pytest.mark.parametrize("kind", KINDS)
def test_zeros_grow_with_energy(kind):
    """Zeros of the left solution never decrease with E (Sturm): what counting rests on."""
    energies = np.linspace(0.5, 9.0, 160)
    cells = ready(rough_cells(11, kind, count=30), 0.0, 9.0)
    zeros = np.concatenate([sweep(cells, energies[i : i + 16])[2] for i in range(0, 160, 16)])
    assert (np.diff(zeros) >= 0).all()
    assert zeros[-1] > zeros[0] + 5


@pytest.mark.parametrize("kind", KINDS)
def test_a_lane_does_not_depend_on_the_others(kind):
    """16 energies at once are 16 energies one by one, also if cells are made ready for one only."""
    given = rough_cells(12, kind)
    cells = ready(given, ENERGIES[0], ENERGIES[-1])
    together = sweep(cells, ENERGIES)
    for lane, energy in enumerate(ENERGIES):
        alone = sweep(cells, energy)
        for a, b in zip(alone[:3], together[:3], strict=True):
            assert a[0] == b[lane]
        # Other tables, other numbers of terms and other parts change only rounding.
        other = crossed(given, energy)
        assert other[2][0] == together[2][lane]
        a = direction(together[0][lane], together[1][lane])
        b = direction(other[0][0], other[1][0])
        np.testing.assert_allclose(a, b, rtol=0, atol=1e-12)


# --- range and rounding -----------------------------------------------------------------------


@pytest.mark.parametrize("parts", [1, 6000])
@pytest.mark.parametrize("way", WAYS)
@BOTH
def test_amplitudes_stay_in_range(parts, way, backward):
    """exp(6000) is far outside the range of doubles: the logarithm of the factor carries it."""
    kappa = math.sqrt(2 * 50.0)  # V - E = 50, mass 1
    given = table([600.0 / parts] * parts, [[51.0]] * parts, [[1.0]] * parts)
    psi, phi, zeros, trail = crossed(padded(given, way), 1.0, backward=backward)
    assert np.isfinite([psi, phi]).all()
    assert zeros[0] == 0
    # psi = sinh(kappa x) / kappa, whose logarithm at the end is kappa x - log(2 kappa).
    total = math.log(psi[0]) + trail[0 if backward else -1, 2, 0]
    assert abs(total - (600 * kappa - math.log(2 * kappa))) < 1e-9
    np.testing.assert_allclose(phi, kappa * psi, rtol=1e-12)


def phase_error(parts, width, k, way):
    """How far psi = sin(k x) / k is off in phase at the end of many flat cells, one by one."""
    cells = ready(
        padded(table(np.full(parts, width), np.zeros((parts, 1)), np.ones((parts, 1))), way),
        0.0, 0.5 * k**2,
    )  # fmt: skip
    assert (cells[4] != FLAT).all()
    psi, phi, zeros, _ = sweep(cells, 0.5 * k**2, stride=parts)
    phase = parts * width * k
    assert zeros[0] == int(phase / math.pi)
    sine, cosine = direction(k * psi[0], phi[0])
    return abs(sine * math.cos(phase) - cosine * math.sin(phase))


@pytest.mark.parametrize("way", ["straight", "graded"])
def test_a_million_small_cells_lose_no_digits(way):
    """Sums are compensated: plain ones are off by 1e-15 here, these by less than one rounding.

    Widths and k are such that the phase, 44, is exact.
    """
    assert phase_error(2**20, 2.0**-18, 11.0, way) <= EPS


def test_a_million_steps_by_one_table_lose_no_digits():
    """The same for propagators: T of the table, as it stands, to the power of a million.

    What the table's own rounding adds up to is no matter of sums, see the next test. At the lowest
    energy T is its first row.
    """
    parts, width, k = 2**20, 2.0**-18, 11.0
    given = table(np.full(parts, width), np.zeros((parts, 1)), np.ones((parts, 1)))
    cells = ready(padded(given, "propagated"), 0.5 * k**2, 0.5 * k**2)
    psi, phi, *_ = sweep(cells, 0.5 * k**2, stride=parts)
    with mpmath.workdps(50):
        rows = cells[6][:4].reshape(2, 2)
        T = mpmath.eye(2) + mpmath.matrix([[float(x) for x in row] for row in rows])
        T = T**parts
        exact = direction(float(T[0, 1]) * k, float(T[1, 1]))
    found = direction(k * psi[0], phi[0])
    assert abs(found[0] * exact[1] - found[1] * exact[0]) <= 2 * EPS


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("width", [2.0**-k for k in (3, 4, 5, 6, 8)])
@pytest.mark.parametrize("k", [1.0, 3.0, 5.0, 8.0, 10.0, 11.5])
def test_dropped_terms_do_not_add_up(width, k, way):
    """16384 cells: what is left out of each series is below rounding even when all of it adds up.

    Rounding itself stays below an eighth of EPS times the phase; a target for the dropped terms
    100 times as large makes it several times EPS. The entries of one table are rounded once for
    all of these equal cells, by up to half of EPS each.
    """
    room = 0.5 if way == "propagated" else 0.25
    assert phase_error(2**14, width, k, way) <= room * EPS * 2**14 * width * k


def test_a_trail_holds_every_node_and_a_stride_some():
    """The record of a sweep: node by node, or every third, the same numbers."""
    cells = ready(rough_cells(13, "graded", count=10), ENERGIES[0], ENERGIES[3])
    for backward in (False, True):
        full = sweep(cells, ENERGIES[:4], backward=backward)[3]
        third = sweep(cells, ENERGIES[:4], backward=backward, stride=3)[3]
        np.testing.assert_array_equal(third, full[::3])
        for node in (0, 4, full.shape[0] - 1):
            psi, phi, _, _ = sweep(cells, ENERGIES[:4], backward=backward, stop=node)
            np.testing.assert_array_equal([psi, phi], full[node, :2])


@pytest.mark.parametrize("kind", KINDS)
@BOTH
def test_each_lane_ends_at_its_own_node(kind, backward):
    """States that live in different wells are met each in its own, in one sweep for all of them."""
    cells = ready(rough_cells(14, kind, count=10), ENERGIES[0], ENERGIES[-1])
    count = cells[0].size
    stop = np.random.default_rng(1).integers(0, count + 1, ENERGIES.size)
    stop[3:6], stop[6], stop[7] = count // 2, 0, count
    psi, phi, zeros, trail = sweep(cells, ENERGIES, backward=backward, stop=stop)
    farthest = range(stop.min(), count + 1) if backward else range(stop.max() + 1)
    assert np.isfinite(trail[farthest]).all()
    for lane, node in enumerate(stop):
        alone = sweep(cells, ENERGIES[lane], backward=backward, stop=node)
        assert (psi[lane], phi[lane], zeros[lane]) == (alone[0][0], alone[1][0], alone[2][0])


def test_a_state_at_its_level_survives_a_barrier():
    """psi that only decays, to the last digit, must not round to nothing behind a barrier."""
    k = math.sqrt(2 * 50.0) * 60.0  # 600 decay lengths of V - E = 50, mass 1
    psi, phi, zeros, log = PLAIN["_constant"](50.0, 1.0, 60.0, 1.0, -k / 60.0)
    assert (zeros, log) == (0, -k) and psi == 1.0 and phi == -k / 60.0
