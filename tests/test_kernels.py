"""Kernels: compiled against interpreted, the fast ways across a cell against the general one."""

import math
import pathlib

import numba
import numpy as np
import pytest
from interpreted import interpreted
from scipy.integrate import solve_ivp

from eigen1d import _compiled, _kernels, _plan

PLAIN = interpreted(_kernels)
OPEN, WALL = np.array([1.0, 9.0, 0.7, 0.0]), np.array([0.0, 0.0, 1.0, 0.0])
EPS = np.finfo(float).eps


def cells(width, V, mass, per_energy=None):
    """Arrays as the kernels want them, from lists of coefficients."""
    width = np.array(width, dtype=float)
    V, mass = (np.array(rows, dtype=float, ndmin=2) for rows in (V, mass))
    empty = np.empty((width.size, 0))
    per_energy = empty if per_energy is None else np.array(per_energy, dtype=float, ndmin=2)
    return width, V, mass, per_energy


def ready(given, energies):
    """The cells as a sweep wants them, cut where they are too long for its series."""
    terms = np.empty(given[0].size, np.uint8)
    if _plan.plan(*given, min(energies), max(energies), terms) and given[2].shape[1] <= 2:
        return (*given, *given[1:], terms)
    _, _, terms, tables = _plan.cut(*given, min(energies), max(energies))
    return (*tables, terms)


def sweep(given, energies, *, edge=WALL, backward=False, stop=None, run=None, stride=1):
    """Results of the kernel: psi, phi, zeros, trail."""
    energies = np.array(energies, dtype=float, ndmin=1)
    cells = ready(given, energies)
    count = cells[0].size
    end = 0 if backward else count
    stop = np.full(energies.size, end if stop is None else stop, dtype=np.int64)
    psi, phi = np.empty(energies.size), np.empty(energies.size)
    zeros = np.empty(energies.size, np.int64)
    trail = np.full((count // stride + 1, 3, energies.size), np.nan)
    run = run or _kernels.sweep
    run(cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride)
    return psi, phi, zeros, trail


def rough_cells(seed, kind, count=12):
    """Random cells: straight (the plain case), flat, graded mass, energy (alpha), cubic."""
    random = np.random.default_rng(seed)
    width = random.uniform(0.05, 1.5, count)
    degree = {"straight": 1, "flat": 0, "graded": 1, "energy": 1, "cubic": 3}[kind]
    V = random.uniform(-4, 4, (count, degree + 1))
    V[:, 0] += 5
    mass = random.uniform(0.3, 2.0, (count, 1))
    per_energy = None
    if kind in ("graded", "energy", "cubic"):
        mass = np.column_stack([mass, random.uniform(-0.2, 0.5, count)])
    if kind == "energy":
        per_energy = random.uniform(0.0, 0.03, (count, 2))
    return cells(width, V, mass, per_energy)


KINDS = ["straight", "flat", "graded", "energy", "cubic"]
ENERGIES = np.linspace(0.3, 9.0, 16)


def direction(psi, phi):
    """psi and phi without their common factor, which no kernel promises."""
    size = np.hypot(psi, phi)
    return psi / size, phi / size


# --- compiled and interpreted -----------------------------------------------------------------


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("backward", [False, True], ids=["forward", "backward"])
@pytest.mark.parametrize("lanes", [1, 5, 16])
def test_sweep_is_what_its_python_says(kind, backward, lanes):
    """The compiler changes nothing but the last digits of sin, cos and exp.

    Coverage cannot see compiled lines, so this is also what runs each of them under it.
    """
    given = rough_cells(7, kind)
    edge = np.array([1.0, 9.5, 0.7, 0.01])
    compiled = sweep(given, ENERGIES[:lanes], edge=edge, backward=backward)
    python = sweep(given, ENERGIES[:lanes], edge=edge, backward=backward, run=PLAIN["sweep"])
    np.testing.assert_array_equal(compiled[2], python[2])
    for a, b in zip(compiled[:2], python[:2], strict=True):
        np.testing.assert_allclose(a, b, rtol=1e-12)
    np.testing.assert_allclose(compiled[3], python[3], rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("kind", KINDS)
def test_along_is_what_its_python_says(kind):
    """The same for wave functions between the nodes, evaluated from both sides."""
    given = ready(rough_cells(8, kind, count=5), ENERGIES)
    random = np.random.default_rng(8)
    levels, points, count = 3, 9, given[0].size
    start = random.uniform(-1, 1, (3, levels, count + 1))
    cell, fraction = random.integers(count, size=points), random.uniform(0, 1, points)
    stop = np.array([1, 3, 5])
    results = []
    for run in (_kernels.along, PLAIN["along"]):
        psi, phi = np.empty((levels, points)), np.empty((levels, points))
        run(given, ENERGIES[:levels].copy(), *start.copy(), cell, fraction, stop, psi, phi)
        results.append((psi, phi))
    np.testing.assert_allclose(results[0], results[1], rtol=1e-12, atol=1e-13)


def test_sweep_takes_views_and_read_only_arrays():
    """A profile hands over read-only arrays, and one mass as a view: no version of each is made."""
    width, V, mass, per_energy = rough_cells(9, "straight")
    mass = np.full(mass.shape, 0.8)
    expected = sweep((width, V, mass, per_energy), ENERGIES)
    strided = np.asfortranarray(V)
    one = np.broadcast_to(np.array([0.8]), mass.shape)
    strided.flags.writeable = False
    before = len(_kernels.sweep.signatures)
    found = sweep((width, strided, one, per_energy), ENERGIES)
    assert len(_kernels.sweep.signatures) == before == 1
    for a, b in zip(expected, found, strict=True):
        np.testing.assert_array_equal(a, b)


# --- one way across a cell against another ----------------------------------------------------


WAYS = {"straight": 0, "graded": 1, "series": 2}


def padded(given, way):
    """The same cells with columns of zeros: a wider mass is crossed by a more general kernel."""
    width, V, mass, per_energy = given
    columns = max(WAYS[way] + 1 - mass.shape[1], 0)
    return width, V, np.column_stack([mass, np.zeros((width.size, columns))]), per_energy


@pytest.mark.parametrize("scale", [1e-4, 1e-2, 0.1, 0.3, 1.0, 3.0])
@pytest.mark.parametrize(
    ("kind", "way"),
    [("straight", "straight"), ("straight", "graded"), ("graded", "graded"), ("energy", "graded")],
)
def test_straight_cells_by_lanes_agree_with_the_general_series(kind, way, scale):
    """Unrolled numbers of terms, chosen by a majorant, give what the general series gives.

    Cells from 1e-4 to 3 long ask for every one of those lengths; a term too few would show.
    """
    width, V, mass, per_energy = rough_cells(3, kind, count=40)
    given = width * scale, V, mass, per_energy
    fast = sweep(padded(given, way), ENERGIES)
    slow = sweep(padded(given, "series"), ENERGIES)
    np.testing.assert_array_equal(fast[2], slow[2])
    for a, b in zip(direction(*fast[:2]), direction(*slow[:2]), strict=True):
        # Rounding of 40 cells, magnified where a barrier lets a growing part through.
        np.testing.assert_allclose(a, b, rtol=0, atol=40 * 16 * EPS)


@pytest.mark.parametrize("V, mass", [(0.0, 1.3), (7.9, 0.4), (20.0, 0.7), (300.0, 2.0)])
@pytest.mark.parametrize("width", [0.9, 5.0, 31.0])
def test_flat_cells_in_closed_form_agree_with_the_series(V, mass, width):
    """One step by cos or by exponentials, for any width, gives what hundreds of short ones give.

    The mass written as a straight line with slope zero, and V as a cubic, sends a cell through the
    series.
    """
    once = sweep(cells([width], [[V]], [[mass]]), ENERGIES, edge=OPEN)
    parts = 400
    short = cells([width / parts] * parts, [[V]] * parts, [[mass]] * parts)
    pieces = sweep(padded(short, "series"), ENERGIES, edge=OPEN)
    np.testing.assert_array_equal(once[2], pieces[2])
    scale = max(1.0, width * math.sqrt(2 * mass * abs(V - 0.3)))  # the phase is rounded too
    for a, b in zip(direction(*once[:2]), direction(*pieces[:2]), strict=True):
        np.testing.assert_allclose(a, b, rtol=0, atol=16 * EPS * scale)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("backward", [False, True], ids=["forward", "backward"])
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
    psi, phi, *_ = sweep(given, energy, edge=OPEN, backward=backward)
    np.testing.assert_allclose([a[0] for a in direction(psi, phi)], state, rtol=0, atol=1e-10)


def test_a_polynomial_of_high_degree_in_one_cell():
    """Degree 12 with coefficients that cancel: cells are cut until the series has enough terms."""
    roots = np.linspace(0.1, 0.9, 12)
    V = np.poly(roots)[::-1] * 1e8
    given = cells([2.0], [V], [[0.9]])
    psi, phi, zeros, _ = sweep(given, [1.0, 40.0], edge=OPEN)

    def slope(t, y, energy):
        V = 1e8 * np.prod(t - roots)
        return 2.0 * np.array([0.9 * y[1], 2 * (V - energy) * y[0]])

    for lane, energy in enumerate((1.0, 40.0)):
        start = [1.0, math.sqrt(2 * max(9.0 - energy, 0.0) / 0.7)]
        other = solve_ivp(slope, (0, 1), start, "DOP853", rtol=1e-12, atol=1e-12, args=(energy,))
        found = direction(psi[lane], phi[lane])
        np.testing.assert_allclose(found, direction(*other.y[:, -1]), rtol=0, atol=1e-7)


# --- counting ---------------------------------------------------------------------------------


@pytest.mark.parametrize("parts", [1, 2, 3, 7, 8, 64])
@pytest.mark.parametrize("way", WAYS)
def test_a_zero_on_a_joint_is_counted_once(parts, way):
    """sin(k x) in a box has floor(k L / pi) zeros wherever the cells are cut, zeros included.

    For k L = j pi and cuts at L/8, 2L/8 ... rounding puts zeros on either side of a joint; one
    counted twice or never would make a level appear twice or vanish.
    """
    k = np.arange(1, 65) / 8 * np.pi  # L = 8; j = k L / pi whole
    given = cells([8.0 / parts] * parts, [[0.0]] * parts, [[1.0]] * parts)
    given = padded(given, way)
    for low in range(0, 64, 16):
        part = slice(low, low + 16)
        for shift in (-1e-9, 1e-9):
            zeros = sweep(given, 0.5 * (k[part] + shift) ** 2)[2]
            np.testing.assert_array_equal(zeros, np.arange(low, low + 16) + (shift > 0))
    # At the levels themselves, the last zero falls on the wall: on either side by rounding.
    zeros = np.concatenate([sweep(given, 0.5 * k[i : i + 16] ** 2)[2] for i in range(0, 64, 16)])
    assert set(zeros - np.arange(64)) <= {0, 1}


@pytest.mark.parametrize("kind", KINDS)
def test_zeros_grow_with_energy(kind):
    """Zeros of the left solution never decrease with E (Sturm): what counting rests on."""
    given = rough_cells(11, kind, count=30)
    energies = np.linspace(0.5, 9.0, 160)
    zeros = np.concatenate([sweep(given, energies[i : i + 16])[2] for i in range(0, 160, 16)])
    assert (np.diff(zeros) >= 0).all()
    assert zeros[-1] > zeros[0] + 5


def test_zeros_do_not_depend_on_the_lanes():
    """A lane's result is its own: 16 energies at once are 16 energies one by one."""
    given = rough_cells(12, "cubic")
    together = sweep(given, ENERGIES)
    for lane, energy in enumerate(ENERGIES):
        alone = sweep(given, energy)
        assert alone[2][0] == together[2][lane]
        # The number of terms is chosen for all lanes together; more of them change only rounding.
        for a, b in zip(
            direction(together[0][lane], together[1][lane]),
            direction(alone[0][0], alone[1][0]),
            strict=True,
        ):
            assert abs(a - b) < 1e-12


# --- range and rounding -----------------------------------------------------------------------


@pytest.mark.parametrize("parts", [1, 3000])
def test_amplitudes_stay_in_range(parts):
    """exp(6000) is far outside the range of doubles: the logarithm of the factor carries it."""
    kappa = math.sqrt(2 * 50.0)  # V - E = 50, mass 1
    given = cells([600.0 / parts] * parts, [[51.0]] * parts, [[1.0]] * parts)
    psi, phi, zeros, trail = sweep(given, 1.0)
    assert np.isfinite([psi, phi]).all()
    assert zeros[0] == 0
    # psi = sinh(kappa x) / kappa, whose logarithm at the end is kappa x - log(2 kappa).
    total = math.log(psi[0]) + trail[-1, 2, 0]
    assert abs(total - (600 * kappa - math.log(2 * kappa))) < 1e-9
    np.testing.assert_allclose(phi, kappa * psi, rtol=1e-12)


def phase_error(parts, width, k, way):
    """How far psi = sin(k x) / k is off in phase at the end of many flat cells, one by one."""
    given = cells(np.full(parts, width), np.zeros((parts, 2)), np.ones((parts, 1)))
    psi, phi, zeros, _ = sweep(padded(given, way), 0.5 * k**2, stride=parts)
    phase = parts * width * k
    assert zeros[0] == int(phase / math.pi)
    sine, cosine = direction(k * psi[0], phi[0])
    return abs(sine * math.cos(phase) - cosine * math.sin(phase))


@pytest.mark.parametrize("way", WAYS)
def test_a_million_small_cells_lose_no_digits(way):
    """Sums are compensated: plain ones are off by 1e-15 here, these by less than one rounding.

    Widths and k are such that the phase, 44, is exact.
    """
    assert phase_error(2**20, 2.0**-18, 11.0, way) <= EPS


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("width", [2.0**-k for k in (3, 4, 5, 6, 8)])
@pytest.mark.parametrize("k", [1.0, 3.0, 5.0, 8.0, 10.0, 11.5])
def test_dropped_terms_do_not_add_up(width, k, way):
    """16384 cells: what is left out of each series is below rounding even when all of it adds up.

    Rounding itself stays below an eighth of EPS times the phase; a target for the dropped terms
    100 times as large makes it several times EPS.
    """
    assert phase_error(2**14, width, k, way) <= 0.25 * EPS * 2**14 * width * k


def test_a_trail_holds_every_node_and_a_stride_some():
    """The record of a sweep: node by node, or every third, the same numbers."""
    given = rough_cells(13, "graded", count=10)
    full = sweep(given, ENERGIES[:4])[3]
    third = sweep(given, ENERGIES[:4], stride=3)[3]
    np.testing.assert_array_equal(third, full[::3])
    for node in (0, 4, full.shape[0] - 1):
        psi, phi, _, _ = sweep(given, ENERGIES[:4], stop=node)
        np.testing.assert_array_equal([psi, phi], full[node, :2])


def test_a_state_at_its_level_survives_a_barrier():
    """psi that only decays, to the last digit, must not round to nothing behind a barrier."""
    k = math.sqrt(2 * 50.0) * 60.0  # 600 decay lengths of V - E = 50, mass 1
    psi, phi, zeros, log = _kernels._constant(50.0, 1.0, 60.0, 1.0, -k / 60.0)
    assert (zeros, log) == (0, -k) and psi == 1.0 and phi == -k / 60.0


@pytest.mark.parametrize("k", [2.0, 40.0, 2000.0])
def test_inside_a_barrier_both_ends_count(k):
    """psi = exp(-u) + c exp(u - k) inside k decay lengths, from its values at both ends."""
    c, slope = 0.3, 1.7
    start, end = 1 + c * math.exp(-k), math.exp(-k) + c
    for share in (0.0, 0.2, 0.5, 0.9, 1.0):
        u = k * share
        psi, phi = _kernels._inside_barrier(k, share, start, 0.0, end, 0.0, slope)
        assert psi == pytest.approx(math.exp(-u) + c * math.exp(u - k), rel=1e-12)
        assert phi == pytest.approx(slope * (c * math.exp(u - k) - math.exp(-u)), rel=1e-12)


def test_every_kernel_file_is_a_source_of_the_cache():
    """A kernel file left out could change and leave those that call it running old code."""
    folder = pathlib.Path(_compiled.__file__).parent
    kernels = {path.name for path in folder.glob("*.py") if "@kernel" in path.read_text()}
    assert kernels | {"_compiled.py"} == set(_compiled.SOURCES)
    assert numba.config.CACHE_DIR != _compiled._FOLDER  # other packages keep their own place
