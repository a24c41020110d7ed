"""One finite-difference matrix at a time: orders of convergence, identities, refusals."""

import itertools
import re

import numpy as np
import pytest
from numpy.polynomial import Polynomial
from problems import ATOMIC
from scipy.interpolate import PPoly
from scipy.special import mathieu_b

from eigen1d import InputError, Profile, solve
from eigen1d._difference_forms import FluxForm
from eigen1d.finite_difference import on_grid
from eigen1d.square_well import SquareWell

WALLS = {"left": "wall", "right": "wall", "units": ATOMIC}
BOX = Profile.from_layers([2.5], [0.0], 0.7, **WALLS)


def halvings(x, times):
    """A grid, and the grids with every interval halved up to `times` times."""
    grids = [np.asarray(x, float)]
    for _ in range(times):
        middle = 0.5 * (grids[-1][:-1] + grids[-1][1:])
        grids.append(np.sort(np.concatenate([grids[-1], middle])))
    return grids


def errors_on(profile, grids, exact, form="flux"):
    """Errors of the levels 0 <= n < len(exact) on each grid, shape (grids, count)."""
    return np.array([np.abs(on_grid(profile, x, 0, len(exact), form) - exact) for x in grids])


def slopes(errors):
    """Order of convergence of each column: log-log slope over grids of half the step each."""
    return np.polyfit(-np.log(2.0) * np.arange(len(errors)), np.log(errors), 1)[0]


# --- orders of convergence ------------------------------------------------------------------------
# Each starts where the highest level has about 20 nodes to a half wave: with fewer the next order
# still shows. Each ends where errors are 100 times what rounding does to the matrix, eps / h^2.


def on_jumps():
    """Two jumps of V on nodes; the tails are cut at exp(-2 kappa 6) < 1e-16."""
    well = SquareWell(2.0, 12.5)
    profile = Profile.from_layers([1, 2, 1], [12.5, 0, 12.5], start=-2, units=ATOMIC)
    return profile, np.linspace(-7, 7, 14 * 12 + 1), well.energies[:3]


def mass_step():
    """A mass that is 100 times larger outside, the interface condition of BenDaniel and Duke."""
    well = SquareWell(2.0, 60.0, mass=0.1, mass_left=10.0)
    mass = [10.0, 0.1, 10.0]
    profile = Profile.from_layers([1, 2, 1], [60, 0, 60], mass, start=-2, units=ATOMIC)
    return profile, np.linspace(-3, 3, 6 * 48 + 1), well.energies[:2]


def graded_mass():
    """m from 0.2 to 3 over the box, V graded too; the reference is shooting, right to 1e-14."""
    profile = Profile.from_layers([3], [1], [0.2], V_end=[4], mass_end=[3], **WALLS)
    return profile, np.linspace(0, 3, 121), solve(profile, count=4).energy


def random_grid():
    """Steps that differ by factors of up to 20, in no order, over jumps of V and m on nodes."""
    profile = Profile.from_layers([1, 1.3, 0.7], [5, 0, 2], [1, 0.5, 2], **WALLS)
    steps = np.random.default_rng(7).uniform(0.005, 0.1, 60)
    nodes = np.concatenate([np.cumsum(steps) / steps.sum() * 3, profile.x])
    return profile, np.unique(nodes.round(9)), solve(profile, count=3).energy


def nonparabolic():
    """A mass that grows with E - V: every level is an eigenvalue of a matrix of its own."""
    profile = Profile.from_layers(
        [1, 2, 1], [6, 0, 4], [0.5, 0.3, 0.6], alpha=[0.1, 0.15, 0.1], **WALLS
    )
    return profile, np.linspace(0, 4, 97), solve(profile, count=4).energy


@pytest.mark.parametrize("problem", [on_jumps, mass_step, graded_mass, random_grid, nonparabolic])
def test_flux_form_is_of_order_two(problem):
    """Slope 2.00 +- 0.05 over five grids for every level: the extrapolation builds on it."""
    profile, x, exact = problem()
    errors = errors_on(profile, halvings(x, 4), exact)
    assert errors[-1].min() > 1e-9  # rounding stays out of it
    np.testing.assert_allclose(slopes(errors), 2.0, rtol=0, atol=0.05)


def harmonic_trap():
    """V = x^2 / 2 in one cell; the walls at 9 raise n = 5 by some exp(-81) 9^11 = 1e-25."""
    V = PPoly(np.array([[0.5], [-9.0], [40.5]]), [-9.0, 9.0])
    return Profile.from_ppoly(V, **WALLS), np.linspace(-9, 9, 101), np.arange(6) + 0.5


def mathieu():
    """V = 2 q cos 2x, m = 1/2, walls at 0 and pi: scipy's characteristic values b_1, b_2, ..."""
    profile = Profile.from_function(lambda x: 10 * np.cos(2 * x), (0, np.pi), 0.5, **WALLS)
    return profile, np.linspace(0, np.pi, 33), np.array([mathieu_b(n, 5.0) for n in range(1, 6)])


@pytest.mark.parametrize("problem", [harmonic_trap, mathieu])
def test_numerov_form_is_of_order_four(problem):
    """Slope 4.00 +- 0.1 over four grids, where V is smooth: what a user asks for it for."""
    profile, x, exact = problem()
    errors = errors_on(profile, halvings(x, 3), exact, "numerov")
    assert errors[-1].min() > 1e-10
    np.testing.assert_allclose(slopes(errors), 4.0, rtol=0, atol=0.1)


def test_numerov_form_is_of_order_two_at_a_kink():
    """V = 3 |x| has a kink on a node: the form loses its order there, as its docstring says.

    For even levels, that is; odd ones vanish where the kink is. If this showed 4, the test of order
    four could not tell one order from another.
    """
    profile = Profile.from_rows([-6, 0, 6], [18, 0, 18], **WALLS)
    exact = solve(profile, count=4).energy
    found = slopes(errors_on(profile, halvings(np.linspace(-6, 6, 121), 3), exact, "numerov"))
    np.testing.assert_allclose(found[::2], 2.0, rtol=0, atol=0.05)


def test_flux_form_has_no_clean_slope_with_a_jump_between_nodes():
    """Errors at a jump off the nodes depend on where between two nodes it falls.

    No finer than order 2, and not in even powers: from one grid to the next the order jumps about,
    so no extrapolation is possible. This is why breakpoints must be nodes.
    """
    profile = Profile.from_layers([1, np.sqrt(2), 1], [9, 0, 4], **WALLS)
    exact = solve(profile, count=1).energy
    span = profile.x[-1]
    grids = [np.linspace(0, span, 40 * 2**k + 1) for k in range(6)]
    errors = errors_on(profile, grids, exact)[:, 0]
    local = np.log2(errors[:-1] / errors[1:])
    assert np.ptp(local) > 0.5
    # Integrals are exact, so that the error is never worse than of order 2.
    scaled = errors * 4.0 ** np.arange(6)
    assert scaled.max() < 4 * errors[0]
    # The same profile with nodes on the jumps does have the slope.
    nodes = np.concatenate([np.linspace(a, b, 21) for a, b in itertools.pairwise(profile.x)])
    clean = errors_on(profile, halvings(np.unique(nodes), 4), exact)
    np.testing.assert_allclose(slopes(clean), 2.0, rtol=0, atol=0.05)


def test_states_are_of_order_two():
    """psi and phi at the nodes, normalised, against the closed form across a mass step of 1:4.

    phi = psi'/m is what joins at an interface: differences across it must not see the step.
    """
    well = SquareWell(2.0, 20.0, mass=0.5, mass_left=2.0)
    profile = Profile.from_layers([2, 2, 2], [20, 0, 20], [2, 0.5, 2], start=-3, units=ATOMIC)
    n, errors = np.arange(3), []
    for x in halvings(np.linspace(-4, 4, 8 * 20 + 1), 3):
        psi, phi, _ = FluxForm.on(profile, x).states(n)
        h = 1e-6
        inside = np.abs(x) < 0.99
        slope = (well.psi(n, x[inside] + h) - well.psi(n, x[inside] - h)) / (2 * h) / 0.5
        errors.append(
            np.append(
                np.abs(psi - well.psi(n, x)).max(axis=1),
                np.abs(phi[:, inside] - slope).max(axis=1),
            )
        )
    np.testing.assert_allclose(slopes(np.array(errors)), 2.0, rtol=0, atol=0.05)
    assert np.array(errors)[-1].max() < 3e-3


# --- identities -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("free", "offset"),
    [((False, False), 1.0), ((True, True), 0.0), ((True, False), 0.5), ((False, True), 0.5)],
)
def test_energies_of_a_box_on_equal_intervals(free, offset):
    """(1 - cos k h) / (m h^2) with k L / pi = n + 1, or n + 1/2 and n with free ends: exactly.

    The second difference of sin k x and cos k x (common practice, no source). Ends, masses and the
    half cells of free ends would all show here, at once and to rounding.
    """
    for N in (2, 3, 10, 64):
        h = 2.5 / N
        form = FluxForm.on(BOX, np.linspace(0, 2.5, N + 1), free)
        n = np.arange(form.width.size)
        exact = 2 * np.sin((n + offset) * np.pi / 2.5 * h / 2) ** 2 / (0.7 * h**2)
        # Rounding is relative to the largest one.
        np.testing.assert_allclose(form.energies(0, n.size), exact, rtol=0, atol=2e-14 * exact[-1])


def test_numerov_energies_of_a_box():
    """Where V = 0 the form is a second difference with 2 m E / (1 + h^2 m E / 6) on its right."""
    N, h = 40, 2.5 / 40
    second = 4 * np.sin(np.arange(1, 7) * np.pi / N / 2) ** 2 / h**2
    exact = second / (2 * 0.7 * (1 - h**2 * second / 12))
    found = on_grid(BOX, np.linspace(0, 2.5, N + 1), 0, 6, "numerov")
    np.testing.assert_allclose(found, exact, rtol=1e-12)


def rough_profile(seed, alpha):
    random = np.random.default_rng(seed)
    V, mass = random.uniform(0, 9, 8), random.uniform(0.2, 2, 8)
    keywords = {"alpha": random.uniform(0.02, 0.1, 8)} if alpha else {}
    return Profile.from_layers(random.uniform(0.2, 1, 8), V, mass, **keywords, **WALLS)


@pytest.mark.parametrize("alpha", [False, True])
@pytest.mark.parametrize("seed", [1, 2])
def test_count_is_the_number_of_energies_below(seed, alpha):
    """Also where the mass depends on E and each level has a matrix of its own.

    `find` takes from the count which levels lie in a window; a wrong one would lose some.
    """
    profile = rough_profile(seed, alpha)
    for free in itertools.product((False, True), repeat=2):
        nodes = np.linspace(profile.x[0], profile.x[-1], 30)
        form = FluxForm.on(profile, np.union1d(nodes, profile.x), free)
        energies = form.energies(0, 12)
        assert (np.diff(energies) > 0).all()
        for n, E in enumerate(energies):
            assert form.count(E - 1e-9) == n
            assert form.count(E + 1e-9) == n + 1
        assert form.count(profile.V_min) == form.count(profile.V_min - 5) == 0


@pytest.mark.parametrize("alpha", [1.0, 30.0])
def test_energy_dependent_mass_in_closed_form(alpha):
    """Flat V = 0: m (1 + alpha E) E = e m for e of the constant mass; a root of a square equation.

    With alpha e = 10^4 the eigenvalue falls as steeply as it can, which a step of the plain secant
    rule overshoots.
    """
    profile = Profile.from_layers([2.5], [0.0], 0.7, alpha=[alpha], **WALLS)
    x = np.linspace(0, 2.5, 51)
    plain = on_grid(BOX, x, 0, 20)
    exact = 2 * plain / (1 + np.sqrt(1 + 4 * alpha * plain))
    np.testing.assert_allclose(on_grid(profile, x, 0, 20), exact, rtol=1e-12)


def test_levels_of_different_numbers_are_the_same_ones():
    """energies(first, last) is a part of energies(0, last), also when first > 0."""
    for alpha in (False, True):
        form = FluxForm.on(rough_profile(3, alpha), np.linspace(0, 3, 200))
        whole = form.energies(0, 9)
        np.testing.assert_allclose(form.energies(4, 9), whole[4:], rtol=1e-13)


@pytest.mark.parametrize("per_interval", [0.3, 1, 7, 40])
def test_integrals_are_exact(per_interval):
    """V (quartic) and m (cubic) over half intervals equal differences of their antiderivatives.

    With down to a third of a row in an interval, and up to 40: what lies between nodes must not be
    sampled but integrated, or noise in a long table would be aliased.
    """
    random = np.random.default_rng(5)
    breaks = np.cumsum(np.append(-2.0, random.uniform(0.01, 0.2, 80)))
    V = PPoly(random.uniform(-3, 3, (5, 80)), breaks)
    mass = PPoly(np.vstack([random.uniform(0, 1, (3, 80)), random.uniform(1, 2, 80)]), breaks)
    profile = Profile.from_ppoly(V, mass, left="wall", right="open", units=ATOMIC)
    x = np.linspace(breaks[0], breaks[-1], int(80 / per_interval) + 1)
    form = FluxForm.on(profile, x)
    middle = 0.5 * (x[:-1] + x[1:])

    def integral(pieces, a, b):
        total = 0.0
        for left, right, c in zip(breaks[:-1], breaks[1:], pieces.c.T, strict=True):
            low, high = max(a, left), min(b, right)
            if low < high:
                whole = Polynomial(c[::-1]).integ()
                total += whole(high - left) - whole(low - left)
        return total

    for i in range(x.size - 1):
        halves = (x[i], middle[i]), (middle[i], x[i + 1])
        exact = [integral(V, a, b) - profile.V_min * (b - a) for a, b in halves]
        np.testing.assert_allclose(form.V[:, i], exact, rtol=0, atol=1e-13)
        assert form.mass[i] == pytest.approx(integral(mass, x[i], x[i + 1]), rel=1e-13)


def test_integrals_of_an_energy_dependent_mass():
    """m (1 + alpha (E - V)) over an interval, all linear: a cubic, by its antiderivative.

    alpha (E - V) is also what makes the open tails: beyond an open edge it is a constant.
    """
    rows = {"x": [0, 1.5], "V": [2.0, 5.0], "mass": [0.3, 0.9], "alpha": [0.02, 0.05]}
    profile = Profile.from_rows(**rows, units=ATOMIC)
    x = np.array([-1.0, 0.0, 0.4, 1.5, 2.25])
    form = FluxForm.on(profile, x)
    V, m, a = (Polynomial([y[0], (y[1] - y[0]) / 1.5]) for y in list(rows.values())[1:])
    for E in (2.0, 3.7):
        whole = (m * (1 + a * (E - V))).integ()
        inside = np.diff(whole(x[1:4]))
        left = 0.3 * (1 + 0.02 * (E - 2.0)) * 1.0
        right = 0.9 * (1 + 0.05 * (E - 5.0)) * 0.75
        found = form.mass + E * form.mass_per_energy
        np.testing.assert_allclose(found, [left, *inside, right], rtol=1e-14)


@pytest.mark.parametrize("alpha", [False, True])
def test_states_solve_the_equations(alpha):
    """Each psi is an eigenvector of its own matrix, of unit norm, with n changes of sign.

    Positive in the leftmost lobe: LAPACK leaves the sign open, and pictures of two methods would
    differ by it.
    """
    profile = rough_profile(4, alpha)
    x = np.union1d(np.linspace(profile.x[0], profile.x[-1], 150), profile.x)
    form = FluxForm.on(profile, x)
    n = np.arange(2, 8)
    energy = form.energies(0, 8)[n]
    psi, phi, mass = form.states(n)
    assert psi.shape == phi.shape == (6, x.size)
    for i, E in enumerate(energy):
        diagonal, off = form.matrix(E)
        vector = psi[i, 1:-1] * np.sqrt(form.width)
        product = diagonal * vector
        product[1:] += off * vector[:-1]
        product[:-1] += off * vector[1:]
        height = E - profile.V_min
        assert np.abs(product - height * vector).max() < 1e-13 * diagonal.max()
        assert vector @ vector == pytest.approx(1, rel=1e-13)
        assert psi[i, 1] > 0 and psi[i, 0] == psi[i, -1] == 0
        assert np.count_nonzero(np.diff(np.sign(psi[i, 1:-1]))) == n[i]
        # phi: the same from both sides of a node, as half cells left and right of it say.
        flux = np.diff(psi[i]) / mass[i]
        back = 2 * (form.V[0] - 0.5 * height * np.diff(x)) * psi[i, :-1]
        np.testing.assert_allclose(phi[i, :-1], flux - back, rtol=0, atol=1e-9)
    if not alpha:
        overlap = (psi[:, 1:-1] * form.width) @ psi[:, 1:-1].T
        np.testing.assert_allclose(overlap, np.eye(6), rtol=0, atol=1e-13)


def test_sign_of_a_state_whose_leftmost_lobe_cannot_be_seen():
    """A level of the right well, with 1e-60 of its psi in the left one, still has its sign.

    Its first lobe is rounding in LAPACK's vector; the sign must come from counting zeros.
    """
    layers = [1, 2, 31, 1.7, 1], [10, 0, 10, 0, 10]
    profile = Profile.from_layers(*layers, units=ATOMIC)
    form = FluxForm.on(profile, np.union1d(np.linspace(0, 36.7, 1500), profile.x))
    psi, _, _ = form.states(np.arange(6))
    largest = psi[np.arange(6), np.abs(psi).argmax(axis=1)]
    right = form.x[np.abs(psi).argmax(axis=1)] > 20
    np.testing.assert_array_equal(right, [False, True, False, True, False, True])
    # Shooting starts at the left with a positive psi and multiplies its way across the barrier.
    shooting = solve(profile)
    reference = shooting.psi(form.x)[np.arange(6), np.abs(psi).argmax(axis=1)]
    np.testing.assert_array_equal(np.sign(largest), np.sign(reference))


def test_curvature_is_what_rounding_multiplies():
    """Sum of stiffness psi^2 of a box: (1 + 1) / (2 m h^2) for each level, up to its ends."""
    x = np.linspace(0, 2.5, 501)
    found = FluxForm.on(BOX, x).curvature(0, 20)
    np.testing.assert_allclose(found, 1 / (0.7 * (2.5 / 500) ** 2), rtol=1e-12)


def test_halved_grid():
    """Every old node stays, one comes in the middle of each interval, free ends stay free."""
    form = FluxForm.on(BOX, np.array([0, 0.5, 2.5]), (True, False))
    half = form.halved()
    np.testing.assert_array_equal(half.x, [0, 0.25, 0.5, 1.5, 2.5])
    assert half.free == (True, False)


# --- refusals -------------------------------------------------------------------------------------

EQUAL = np.linspace(0, 4, 41)
STEP_ROWS = {"x": [0, 1, 2, 3], "V": [0, 0, 0, 5], "interpolation": "step", "units": ATOMIC}
REFUSED = {
    "beyond a wall": (
        Profile.from_rows([0, 4], [0, 1], **WALLS),
        np.append(EQUAL[:-1], 4.0001),
        "the grid, 0 to 4.0001, reaches beyond the wall at x = 4",
    ),
    "unequal": (
        Profile.from_rows([0, 4], [0, 1], **WALLS),
        np.delete(EQUAL, 7),
        "the Numerov form needs equal steps; use the flux form",
    ),
    "mass step": (
        Profile.from_layers([2, 2], [0, 0], [1, 2], **WALLS),
        EQUAL,
        "the Numerov form needs one constant mass; use the flux form",
    ),
    "graded mass": (
        Profile.from_layers([4], [0], [1], mass_end=[2], **WALLS),
        EQUAL,
        "the Numerov form needs one constant mass; use the flux form",
    ),
    "alpha": (
        Profile.from_layers([4], [0], alpha=[0.1], **WALLS),
        EQUAL,
        "the Numerov form needs one constant mass; use the flux form",
    ),
    "mass of an open edge": (
        Profile.from_rows(**STEP_ROWS | {"V": [0, 0, 0, 0]}, mass=[1, 1, 1, 2]),
        EQUAL,
        "the Numerov form needs one constant mass; use the flux form",
    ),
    "jump": (
        Profile.from_layers([1.25, 2.75], [0, 3], **WALLS),
        EQUAL,
        "the Numerov form needs a V without jumps; it jumps at x = 1.25; use the flux form",
    ),
    "jump to an open edge": (
        Profile.from_rows(**STEP_ROWS),
        EQUAL,
        "the Numerov form needs a V without jumps; it jumps at x = 3; use the flux form",
    ),
    "too coarse": (
        Profile.from_rows([0, 4], [0, 6000], **WALLS),
        EQUAL,
        "the Numerov form turns negative where V is high; use steps below 0.0316, found 0.1",
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_numerov_form_refuses(name):
    """What it cannot do to order 4 it says, and what to use instead: the text, whole."""
    profile, x, message = REFUSED[name]
    with pytest.raises(InputError, match=f"^{re.escape(message)}$"):
        on_grid(profile, x, 0, 2, "numerov")


def test_numerov_form_minds_only_what_is_on_the_grid():
    """A jump beyond the grid, or where the grid ends, costs nothing; nor does alpha = 0."""
    profile = Profile.from_rows(**STEP_ROWS)
    exact = (np.pi / 3 * np.arange(1, 3)) ** 2 / 2
    found = on_grid(profile, np.linspace(0, 3, 301), 0, 2, "numerov")
    np.testing.assert_allclose(found, exact, rtol=1e-8)
    zero = Profile.from_layers([3], [0], alpha=[0.0], **WALLS)
    found = on_grid(zero, np.linspace(0, 3, 301), 0, 2, "numerov")
    np.testing.assert_allclose(found, exact, rtol=1e-8)


@pytest.mark.parametrize(
    ("x", "first", "last", "form", "message"),
    [
        ([0, 1, 0.5, 2.5], 0, 1, "flux", "a grid needs ascending nodes, two more than the levels "
         "wanted (1); found 4"),
        ([0, 1, 2.5], 0, 2, "flux", "a grid needs ascending nodes, two more than the levels "
         "wanted (2); found 3"),
        ([0, 1, np.nan], 0, 1, "flux", "x must be finite; row 2 has nan"),
        ([0, 1, np.inf], 0, 1, "flux", "x must be finite; row 2 has inf"),
        ([[0, 1, 2]], 0, 1, "flux", "x must be one row of numbers; found shape (1, 3)"),
        ([-1, 1, 2], 0, 1, "flux", "the grid, -1 to 2, reaches beyond the wall at x = 0"),
        ([0, 1, 2], 1, 1, "flux", "first and last must be 0 <= first < last; found 1, 1"),
        ([0, 1, 2], -1, 1, "flux", "first and last must be 0 <= first < last; found -1, 1"),
        ([0, 1, 2], 0, 1, "Numerov", "unknown form 'Numerov'; write one of: flux, numerov"),
    ],
)  # fmt: skip
def test_on_grid_refuses(x, first, last, form, message):
    """A grid that cannot be used is a sentence, not a fault inside LAPACK."""
    with pytest.raises(InputError, match=f"^{re.escape(message)}$"):
        on_grid(BOX, x, first, last, form)
