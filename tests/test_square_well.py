"""The square-well oracle against 40-digit arithmetic, the reference levels and the known limits."""

import doctest
import json
from pathlib import Path

import mpmath
import numpy as np
import pytest
from scipy.integrate import quad

from eigen1d import square_well
from eigen1d.errors import InputError
from eigen1d.square_well import (
    SquareWell,
    binding_fraction,
    bound_count,
    height_fraction,
    infinite_well_energies,
    roots,
)

CASES = {
    case["id"]: case
    for case in json.loads((Path(__file__).parent / "reference" / "levels.json").read_text())[
        "cases"
    ]
}
mpf = mpmath.mpf

# Rims, masses and width that share no ratio, so that no symmetry can hide an error.
LOPSIDED = SquareWell(3.1, 7.3, 4.7, mass=0.8, mass_left=1.9, mass_right=0.35)


@pytest.fixture(autouse=True)
def digits():
    """60 digits; the smallest distance to a threshold here costs about 20 of them."""
    with mpmath.workdps(60):
        yield


def exact_count(z0):
    """ceil(2 z0 / pi): common practice (every textbook on the finite well), no source."""
    return int(mpmath.ceil(2 * mpf(float(z0)) / mpmath.pi))


def exact_root(z0, n):
    """Root n in 60 digits, from a bisected pole-free phase and checked in the textbook equation."""
    z0 = mpf(float(z0))
    low, high = n * mpmath.pi / 2, min((n + 1) * mpmath.pi / 2, z0)
    for _ in range(40):  # eta + arcsin(eta / z0) = (n + 1) pi/2
        middle = (low + high) / 2
        below = middle + mpmath.asin(middle / z0) < (n + 1) * mpmath.pi / 2
        low, high = (middle, high) if below else (low, middle)
    phi = mpmath.acos(low / z0)
    for _ in range(12):
        phi -= (n * mpmath.pi / 2 + phi - z0 * mpmath.cos(phi)) / (1 + z0 * mpmath.sin(phi))
    eta, xi = z0 * mpmath.cos(phi), z0 * mpmath.sin(phi)
    textbook = eta * mpmath.tan(eta) if n % 2 == 0 else -eta * mpmath.cot(eta)
    assert n * mpmath.pi / 2 < eta < (n + 1) * mpmath.pi / 2
    assert abs(textbook / xi - 1) < mpf(10) ** -22
    return eta, xi


def units_off(found, exact):
    """Distance in units of the last place of a double."""
    return abs(float((mpf(float(found)) - exact) / mpf(float(np.spacing(abs(float(exact)))))))


def exact_phase(well, energy):
    """k L less both arctangents, in 60 digits: n pi at level n (BenDaniel and Duke 1966)."""
    k = mpmath.sqrt(2 * mpf(well.mass) * energy)
    total = k * mpf(well.width)
    for height, mass in ((well.left, well.mass_left), (well.right, well.mass_right)):
        kappa = mpmath.sqrt(2 * mpf(mass) * (mpf(height) - energy))
        total -= mpmath.atan2(kappa * mpf(well.mass), k * mpf(mass))
    return total


def exact_level(well, n):
    """Energy and binding of level n by bisection."""
    low, high = mpf(0), mpf(well.rim)
    for _ in range(160):
        middle = (low + high) / 2
        low, high = (middle, high) if exact_phase(well, middle) < n * mpmath.pi else (low, middle)
    return high, mpf(well.rim) - high


def reference_well(case):
    (_, left, m_left), (width, bottom, mass), (_, right, m_right) = case["potential"]["layers"]
    assert bottom == 0
    return SquareWell(width, left, right, mass=mass, mass_left=m_left, mass_right=m_right)


def test_docstring_examples_run():
    """An example in the documentation that no longer holds is a wrong promise."""
    outcome = doctest.testmod(square_well)
    assert outcome.attempted > 8
    assert outcome.failed == 0


# --- the symmetric well in unit-free form ---------------------------------------------------


def test_roots_are_double_precision_over_fourteen_decades():
    """First, last, second last and a random level for 300 strengths from 1e-8 to 1e6."""
    random = np.random.default_rng(20)
    for z0 in 10 ** random.uniform(-8, 6, 300):
        count = bound_count(z0)
        assert count == exact_count(z0)
        for n in {0, count - 1, max(count - 2, 0), int(random.integers(count))}:
            for found, exact in zip(roots(z0, n), exact_root(z0, n), strict=True):
                assert units_off(found, exact) <= 3, (z0, n)


@pytest.mark.parametrize("k", [1, 2, 3, 10, 355, 4097, 636_619])
def test_count_is_exact_beside_every_threshold(k):
    """The neighbours of k pi/2 decide the count, and the new level has a binding near 1e-32."""
    threshold = float(k * mpmath.pi / 2)
    nearby = [threshold, *(threshold * (1 + s * e) for s in (-1, 1) for e in (1e-6, 1e-12))]
    nearby += [np.nextafter(threshold, 0), np.nextafter(threshold, np.inf)]
    counts = {bound_count(z0) for z0 in nearby}
    assert counts == {k, k + 1}
    for z0 in nearby:
        count = bound_count(z0)
        assert count == exact_count(z0)
        for found, exact in zip(roots(z0, count - 1), exact_root(z0, count - 1), strict=True):
            assert units_off(found, exact) <= 3, z0


def test_first_odd_level_appears_at_half_pi():
    """Common practice, no source. The double nearest to pi/2 is 6.1e-17 short of it."""
    assert mpf(np.pi / 2) < mpmath.pi / 2
    assert bound_count(np.pi / 2) == 1
    assert bound_count(np.nextafter(np.pi / 2, 2)) == 2
    xi = roots(np.nextafter(np.pi / 2, 2))[1]
    assert xi[1] > 0


def test_two_even_levels_and_one_odd_at_three_half_pi():
    """Common practice, no source; a third odd or even one only binds above the threshold."""
    below = float(np.nextafter(float(3 * mpmath.pi / 2), 0))
    assert mpf(below) < 3 * mpmath.pi / 2
    assert bound_count(below) == 3
    even, odd = roots(below)[0][::2], roots(below)[0][1::2]
    assert (even.size, odd.size) == (2, 1)
    assert bound_count(np.nextafter(below, np.inf) + 1e-15) == 4


def test_at_least_one_level_however_shallow():
    """And it is bound by (z0)^2 of the depth: xi = z0^2 for a shallow well; common practice."""
    for z0 in (1e-150, 1e-100, 1e-8, 1e-4):
        assert bound_count(z0) == 1
        assert binding_fraction(z0) == pytest.approx([z0**2], rel=2 * z0**2 + 1e-15)
    assert bound_count(0.0) == 0
    assert roots(0.0)[0].size == 0


@pytest.mark.parametrize("z0", [0.3, 1.5, 1.6, 5.0, 77.7, 1e4])
def test_even_and_odd_levels_interleave(z0):
    """Level n lies between n pi/2 and (n+1) pi/2: even, odd, even, ... with none left out."""
    eta, xi = roots(z0)
    n = np.arange(bound_count(z0))
    assert eta.size == n.size
    assert np.all((n * np.pi / 2 < eta) & (eta < (n + 1) * np.pi / 2))
    assert np.all(np.diff(xi) < 0)
    even, odd = slice(0, None, 2), slice(1, None, 2)
    assert xi[even] * np.cos(eta[even]) == pytest.approx(
        eta[even] * np.sin(eta[even]), abs=1e-14 * z0**2 + 1e-15
    )
    assert xi[odd] * np.sin(eta[odd]) == pytest.approx(
        -eta[odd] * np.cos(eta[odd]), abs=1e-14 * z0**2 + 1e-15
    )


def test_fractions_are_those_of_the_circle():
    """binding = (xi/z0)^2, height = (eta/z0)^2, and together they are the depth."""
    for z0 in (1e-3, 0.7, 5.0, 123.4):
        eta, xi = roots(z0)
        assert np.array_equal(binding_fraction(z0), (xi / z0) ** 2)
        assert np.array_equal(height_fraction(z0), (eta / z0) ** 2)
        assert binding_fraction(z0) + height_fraction(z0) == pytest.approx(1, rel=1e-15)


def test_every_root_of_the_strongest_well_is_found_at_once():
    """636 620 levels, each on its own branch and on the circle."""
    eta, xi = roots(1e6)
    n = np.arange(636_620)
    assert eta.size == n.size == exact_count(1e6)
    # Near eta = n pi/2 only xi resolves the distance, so the circle is checked instead.
    assert np.all((eta >= n * np.pi / 2) & (eta < (n + 1) * np.pi / 2))
    assert np.hypot(eta, xi) == pytest.approx(1e6, rel=5e-16)


@pytest.mark.parametrize("bad", [-1.0, np.nan, np.inf, 1.1e8, "wide", None])
def test_impossible_strength_is_refused(bad):
    with pytest.raises(InputError, match="z0 must be a strength between 0 and 1e8; found"):
        bound_count(bad)


@pytest.mark.parametrize("n", [4, -1, 0.5, [0, 9]])
def test_unbound_level_is_refused(n):
    """A negative index would otherwise quietly count from the end."""
    with pytest.raises(InputError, match="n must be whole numbers from 0 to 3; found"):
        roots(5.0, n)
    with pytest.raises(InputError, match="n must be whole numbers from 0 to 3; found"):
        SquareWell(2.0, 12.5).psi(n, 0.0)


# --- the general well -----------------------------------------------------------------------


@pytest.mark.parametrize("name", ["P01", "P02", "P03", "P04", "P05", "P06", "P26", "P27"])
def test_reference_levels(name):
    """The recorded 45-digit levels (reference/README.md): energy and count."""
    case = CASES[name]
    well = reference_well(case)
    exact = [float(level["energy"]) for level in case["levels"]]
    assert well.count == case["n_bound"]
    assert well.energies == pytest.approx(exact, rel=1e-15)


def test_infinite_well_reference_levels():
    """Case P07, n up to 100."""
    levels = CASES["P07"]["levels"]
    energies = infinite_well_energies(1.0, 101)
    exact = [float(level["energy"]) for level in levels]
    assert energies[[level["n"] for level in levels]] == pytest.approx(exact, rel=1e-15)
    assert infinite_well_energies(2.0, 3, mass=3.0) == pytest.approx(energies[:3] / 12, rel=1e-15)


def random_wells(count=25):
    random = np.random.default_rng(7)
    for _ in range(count):
        width, left, right = 10 ** random.uniform(-1, 1, 3)
        masses = 10 ** random.uniform(-1, 1, 3)
        yield SquareWell(
            width, left, right, mass=masses[0], mass_left=masses[1], mass_right=masses[2]
        )


EXTREME = [
    SquareWell(1.0, 1e8, mass_left=1e6),  # deep, barriers far too heavy to be material
    SquareWell(1.0, 50.0, 50.0 * (1 + 1e-9), mass_left=0.1),  # almost equal rims
    SquareWell((np.pi + 1.1e-4) / 2, 2.0, 2.0 * (1 + 1e-8)),  # and the last level at the rim
    SquareWell(1e-3, 1.0, mass_right=5.0),  # shallow
    SquareWell(2.0, 3.0, 1e12),  # almost a wall
]


@pytest.mark.parametrize("well", [LOPSIDED, *random_wells(), *EXTREME])
def test_energy_and_binding_are_accurate_relative_to_themselves(well):
    """Against 60 digits. With unequal rims the rounding of one arctangent is allowed for."""
    assert well.count == int(mpmath.ceil(exact_phase(well, mpf(well.rim)) / mpmath.pi))
    lower_mass = well.mass_left if well.left <= well.right else well.mass_right
    for n in sorted({0, 1, 2, well.count // 2, well.count - 2, well.count - 1}):
        if not 0 <= n < well.count:
            continue
        energy, binding = exact_level(well, n)
        assert float(abs(well.energies[n] / energy - 1)) < 2e-15
        # Near the rim sqrt(binding/rim) is the distance to the threshold over sqrt(m/m_outside);
        # that arctangent rounds the distance by up to 2.2e-16, unless it is 0.
        sensitivity = float(mpmath.sqrt(well.rim / binding)) * np.sqrt(lower_mass / well.mass)
        slack = 0 if well.left == well.right else 2 * 2.3e-16 * sensitivity
        assert float(abs(well.binding[n] / binding - 1)) < 3e-15 + slack


def test_general_well_keeps_the_precision_of_the_unit_free_one():
    """(width/2) sqrt(2 V) is no double, yet the level 1e-13 above its threshold is right."""
    for k in (1, 2, 5, 40):
        rim = float((k * mpmath.pi / 2) ** 2 / 2) * (1 + 1e-13)
        well = SquareWell(2.0, rim)
        above = mpmath.sqrt(2 * mpf(rim)) - k * mpmath.pi / 2
        assert well.count == k + 1
        # phi = above (1 - z0 above / 2 ...), from phi + 2 z0 sin^2(phi/2) = above.
        phi = above - mpmath.sqrt(2 * mpf(rim)) * above**2 / 2
        assert float(abs(well.binding[k] / (rim * mpmath.sin(phi) ** 2) - 1)) < 3e-15


def test_no_level_below_an_unequal_rim():
    """A step beside a shallow well binds nothing: K L < arctan(...) < pi/2; common practice."""
    well = SquareWell(0.5, 1.0, 20.0)
    assert well.count == 0
    assert well.energies.shape == (0,)
    assert well.kappa.shape == (2, 0)
    with pytest.raises(InputError, match="n must be left out: none bound; found 0"):
        well.psi(0, 0.0)


def test_mirrored_well_has_the_same_levels_and_mirrored_states():
    mirrored = SquareWell(3.1, 4.7, 7.3, mass=0.8, mass_left=0.35, mass_right=1.9)
    x = np.linspace(-4, 4, 41)
    n = np.arange(LOPSIDED.count)
    assert n.size >= 2
    assert mirrored.energies == pytest.approx(LOPSIDED.energies, rel=1e-15)
    sign = (-1.0) ** n[:, None]
    assert sign * mirrored.psi(n, -x) == pytest.approx(LOPSIDED.psi(n, x), abs=1e-14)
    assert not np.allclose(sign * LOPSIDED.psi(n, -x), LOPSIDED.psi(n, x), atol=1e-3)


def test_one_wall_gives_the_odd_levels_of_twice_the_width():
    """Common practice, no source: an odd state of the double-width well vanishes in its middle."""
    half, whole = SquareWell(2.0, np.inf, 30.0), SquareWell(4.0, 30.0)
    assert half.count == whole.count // 2
    assert half.energies == pytest.approx(whole.energies[1::2], rel=2e-15)
    assert half.energies == pytest.approx(SquareWell(2.0, 1e16, 30.0).energies, rel=1e-6)
    x = np.linspace(-1, 3, 30)
    odd = np.arange(whole.count)[1::2]
    assert half.psi(np.arange(half.count), x) == pytest.approx(
        (-1.0) ** np.arange(1, half.count + 1)[:, None] * np.sqrt(2) * whole.psi(odd, x + 1),
        abs=1e-13,
    )
    assert np.all(half.psi([0, 1], [-1.5, -1.0]) == 0)


def test_deep_well_approaches_the_infinite_one():
    """E = infinite (1 - 2/z0 + ...) as the phase runs out to pi/2 - eta/z0; common practice."""
    for rim in (1e6, 1e10):
        z0 = np.sqrt(rim / 2)  # width 1
        ratio = SquareWell(1.0, rim).energies[:5] / infinite_well_energies(1.0, 5)
        assert ratio == pytest.approx((1 + 1 / z0) ** -2.0, rel=30 / z0**3)


def test_shallow_well_binds_as_a_delta_well():
    """binding = m (V L)^2 / 2 to leading order (Landau, Lifshitz, Quantum Mechanics, sec. 45)."""
    for rim in (1e-3, 1e-5, 1e-7):
        well = SquareWell(1.7, rim, mass=0.6)
        strength = 0.6 * rim * 1.7**2
        assert well.binding == pytest.approx([0.6 * (rim * 1.7) ** 2 / 2], rel=2 * strength)


# --- wave functions -------------------------------------------------------------------------

WELLS = [LOPSIDED, SquareWell(190.0, 0.011, mass=0.067, mass_left=0.1), SquareWell(2.0, 50.0)]


@pytest.mark.parametrize("well", WELLS)
def test_states_are_orthonormal_by_quadrature(well):
    """Gauss quadrature inside, adaptive quadrature in the tails; the inside is the probability.

    Orthogonal holds for the plain integral even with different masses: the mass is in the kinetic
    term only.
    """
    nodes, weights = np.polynomial.legendre.leggauss(60)
    inside = well.psi(np.arange(well.count), nodes * well.width / 2)
    inner = (inside * weights * well.width / 2) @ inside.T
    assert np.diag(inner) == pytest.approx(
        well.probability_inside(np.arange(well.count)), rel=1e-13
    )
    overlap = inner.copy()
    for i in range(well.count):
        for j in range(i + 1):
            for sign in (-1, 1):
                tail = quad(
                    lambda d, i=i, j=j, sign=sign: np.prod(
                        well.psi([i, j], sign * (well.width / 2 + d))
                    ),
                    0,
                    60 / well.kappa[:, i].min(),
                    epsabs=1e-12,
                    epsrel=1e-12,
                    limit=200,
                )[0]
                overlap[i, j] += tail
                overlap[j, i] += tail * (i != j)
    assert overlap == pytest.approx(np.eye(well.count), abs=1e-10)


@pytest.mark.parametrize("well", WELLS)
def test_psi_and_flux_are_continuous_at_both_walls(well):
    """psi and psi'/m, the slopes taken from samples of psi on each side (BenDaniel and Duke 1966).

    psi' itself jumps where the mass does, so matching it would be wrong.
    """
    step = well.width / 1000
    for n in range(well.count):
        k = np.sqrt(2 * well.mass * well.energies[n])
        for side, (kappa, mass) in enumerate(
            zip(well.kappa[:, n], (well.mass_left, well.mass_right), strict=True)
        ):
            outward = -1 if side == 0 else 1
            wall = outward * well.width / 2
            at_wall = well.psi(n, wall)
            two_inside = well.psi(n, wall - outward * step * np.array([1, 2]))
            outside = well.psi(n, wall + outward * step)
            # a cos(k d) + b sin(k d) through two samples inside, d the distance from the wall.
            matrix = [[np.cos(k * d), np.sin(k * d)] for d in (step, 2 * step)]
            value, sine = np.linalg.solve(matrix, two_inside)
            assert value == pytest.approx(at_wall, rel=1e-10)
            assert outside * np.exp(kappa * step) == pytest.approx(at_wall, rel=1e-12)
            assert kappa == pytest.approx(
                np.sqrt(2 * mass * ((well.left, well.right)[side] - well.energies[n])), rel=1e-13
            )
            flux_inside, flux_outside = -sine * k / well.mass, -kappa * at_wall / mass
            assert flux_inside == pytest.approx(flux_outside, rel=1e-9)


@pytest.mark.parametrize("well", WELLS)
def test_state_n_has_n_nodes_and_a_positive_first_lobe(well):
    x = np.linspace(-0.9, 0.9, 4001) * well.width
    psi = well.psi(np.arange(well.count), x)
    assert np.array_equal((psi[:, 1:] * psi[:, :-1] < 0).sum(axis=1), np.arange(well.count))
    assert np.all(psi[:, 0] > 0)


def test_shapes_follow_n_and_x():
    well = SquareWell(2.0, 50.0)
    x = np.linspace(-2, 2, 12)
    assert well.psi(1, 0.3).shape == ()
    assert well.psi(1, x).shape == (12,)
    assert well.psi([0, 2], x.reshape(3, 4)).shape == (2, 3, 4)
    assert np.array_equal(well.psi([0, 2], x)[1], well.psi(2, x))
    assert well.kappa.shape == (2, well.count)


def test_probability_inside_of_a_barely_bound_state_is_small():
    """Near its threshold a state leaves the well: inside it is at most kappa L; common practice."""
    rim = (np.pi / 2) ** 2 / 2 * (1 + 1e-6)
    well = SquareWell(2.0, rim)
    assert well.count == 2
    assert 0 < well.probability_inside(1) < well.kappa[0, 1] * 2
    assert well.probability_inside(0) > 0.7


@pytest.mark.parametrize(
    "arguments, message",
    [
        ((-1.0, 3.0), "width must be a positive number; found -1.0"),
        ((np.inf, 3.0), "width must be a positive number; found inf"),
        ((1.0, 0.0), "left must be a positive number; found 0.0"),
        ((1.0, 3.0, np.nan), "right must be a positive number; found nan"),
        ((None, 3.0), "width must be a positive number; found None"),
        ((1.0, np.inf), "left and right are both inf; write infinite_well_energies"),
        ((1e9, 1.0), "strength .* of this well is above 1e8"),
    ],
)
def test_impossible_well_is_refused(arguments, message):
    with pytest.raises(InputError, match=message):
        SquareWell(*arguments)


def test_impossible_infinite_well_is_refused():
    with pytest.raises(InputError, match="count must be a whole number of levels"):
        infinite_well_energies(1.0, 2.5)
    with pytest.raises(InputError, match="mass must be a positive number; found 0"):
        infinite_well_energies(1.0, 2, mass=0)
