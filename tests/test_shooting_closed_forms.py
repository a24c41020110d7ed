"""The shooting solver against what is known in closed form: wells, special functions, limits."""

import math

import numpy as np
import pytest
from problems import ATOMIC
from scipy import special

from eigen1d import Profile, solve
from eigen1d.closed_forms import (
    double_square_well,
    harmonic,
    harmonic_potential,
    morse,
    morse_potential,
    sech_squared,
    sech_squared_potential,
    triangular_wall,
)
from eigen1d.square_well import SquareWell, bound_count, infinite_well_energies, roots


def profile_of(well):
    """The profile of a SquareWell, with flanks of uneven thickness: open edges carry them on."""
    flank = np.array([well.width / 3, well.width / 5])
    return Profile.from_layers(
        [flank[0], well.width, flank[1]],
        [well.left, 0.0, well.right],
        [well.mass_left, well.mass, well.mass_right],
        start=-well.width / 2 - flank[0],
        units=ATOMIC,
    )


def symmetric(z0):
    """Half width 1, mass 1 and strength z0, hence depth z0^2 / 2."""
    return Profile.from_layers([1, 2, 1], [z0**2 / 2, 0, z0**2 / 2], start=-2, units=ATOMIC)


def assert_energies(levels, exact, tolerance):
    """Energies to `tolerance` of the height above the least V, each inside its bracket."""
    assert len(levels) == len(exact)
    height = exact - levels.profile.V_min
    np.testing.assert_array_less(np.abs(levels.energy - exact), tolerance * height)
    # The closed forms themselves are right to a few units in the last place of E.
    slack = 4 * np.spacing(np.abs(exact))
    assert (levels.bracket[:, 0] <= exact + slack).all()
    assert (exact - slack <= levels.bracket[:, 1]).all()


# --- square wells -----------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["symmetric", "lopsided", "three masses"])
def test_random_square_wells(kind):
    """A thousand wells of each kind, 0 to 21 levels: count exact, energies to 1e-14 of the height.

    The oracle solves one equation for an angle and shares nothing with shooting; its energies are
    right to a few units in the last place. The worst of these is 2e-15.
    """
    random = np.random.default_rng(["symmetric", "lopsided", "three masses"].index(kind))
    found = 0
    for _ in range(1000):
        z0, (mass, width) = 10 ** random.uniform(-1.5, 1.5), 10 ** random.uniform(-1, 1, 2)
        rim = (2 * z0 / width) ** 2 / (2 * mass)
        other = rim if kind == "symmetric" else rim * 10 ** random.uniform(0, 2)
        rims = (rim, other) if random.random() < 0.5 else (other, rim)
        outside = mass * 10 ** random.uniform(-1, 1, 2) if kind == "three masses" else (mass, mass)
        well = SquareWell(width, *rims, mass=mass, mass_left=outside[0], mass_right=outside[1])
        levels = solve(profile_of(well))
        assert_energies(levels, well.energies, 1e-14)
        found += len(levels)
    assert found > 2500  # the wells were not all empty


@pytest.mark.parametrize("z0", [10.0**-k for k in (1, 2, 4, 6, 8, 10, 20, 100)])
def test_a_symmetric_well_always_binds(z0):
    """At least one level however shallow (common practice, no source), and the search ends.

    Its binding is z0^2 of the depth, below the spacing of doubles at the rim from z0 = 1e-8 on;
    the level is still counted, and listed at the nearest double.
    """
    depth = z0**2 / 2
    levels = solve(symmetric(z0))
    assert len(levels) == 1
    exact = SquareWell(2.0, depth).energies[0]
    assert abs(levels.energy[0] - exact) <= 4e-15 * depth
    assert levels.bracket[0, 0] <= exact <= levels.bracket[0, 1]


@pytest.mark.parametrize("k", [1, 2, 3, 4, 10, 100])
@pytest.mark.parametrize("distance", [1e-3, 1e-6, 1e-9, 1e-12, 1e-14])
def test_levels_appear_at_multiples_of_half_pi(k, distance):
    """Level k is bound exactly from z0 = k pi/2: the first odd one from pi/2, the second even one
    from pi, so two even ones at 3 pi/2 (common practice, no source).
    """
    for z0, count in ((k * np.pi / 2 * (1 - distance), k), (k * np.pi / 2 * (1 + distance), k + 1)):
        assert bound_count(z0) == count
        assert len(solve(symmetric(z0))) == count


@pytest.mark.parametrize("z0", [0.7, 2.0, 3 * np.pi / 2, 11.0, 40.0])
def test_symmetric_well_in_textbook_form(z0):
    """E / V0 = 1 - (xi/z0)^2, alternating parity, levels interleaved with those of the box.

    Common practice, no source. eta_n = k L/2 lies between n pi/2 and (n + 1) pi/2.
    """
    levels = solve(symmetric(z0))
    eta, xi = roots(z0)
    depth = z0**2 / 2
    np.testing.assert_allclose(levels.energy / depth, (eta / z0) ** 2, rtol=1e-14)
    np.testing.assert_allclose(1 - levels.energy / depth, (xi / z0) ** 2, rtol=0, atol=1e-14)
    box = infinite_well_energies(2.0, len(levels))
    assert (levels.energy < box).all()
    assert (levels.energy[1:] > box[:-1]).all()
    x = np.linspace(0.01, 2.5, 40)
    parity = (-1.0) ** levels.n[:, None]
    # Rounding of psi, largest for the states near the rim.
    np.testing.assert_allclose(levels.psi(-x), parity * levels.psi(x), rtol=0, atol=1e-13)


@pytest.mark.parametrize(
    "well",
    [
        SquareWell(2.0, 12.5),
        SquareWell(3.1, 7.3, 4.7, mass=0.8, mass_left=1.9, mass_right=0.35),
        SquareWell(5.0, 9.0, 40.0, mass=0.3),
    ],
    ids=["symmetric", "three masses", "lopsided"],
)
def test_square_well_states(well):
    """Wave functions, tails included, and the share inside the well, against the closed form."""
    levels = solve(profile_of(well))
    x = np.linspace(-2.5 * well.width, 2.5 * well.width, 301)
    np.testing.assert_allclose(levels.psi(x), well.psi(levels.n, x), rtol=0, atol=2e-14)
    np.testing.assert_allclose(
        levels.probability(-well.width / 2, well.width / 2),
        well.probability_inside(levels.n),
        rtol=1e-13,
    )


def test_two_hundred_levels_of_a_well():
    """z0 = 320 binds 204 levels, all found; n = 200 as precise as n = 0."""
    well = SquareWell(2.0, 320.0**2 / 2)
    assert well.count == 204
    assert_energies(solve(profile_of(well)), well.energies, 1e-14)


def test_two_hundred_levels_of_a_box():
    """E_n = ((n + 1) pi / L)^2 / (2 m), n = 0 to 249 (common practice, no source)."""
    box = Profile.from_layers([3.7], [0.0], 0.2, left="wall", right="wall", units=ATOMIC)
    assert_energies(solve(box, count=250), infinite_well_energies(3.7, 250, 0.2), 1e-14)


@pytest.mark.parametrize("barrier", [0.1, 1.0, 2.0, 5.0])
def test_double_well_splittings(barrier):
    """Splittings from 1 to 1e-9 agree with the closed form to what two energies can tell."""
    exact = double_square_well(2.0, barrier, 10.0)
    levels = solve(Profile.from_layers([1, 2, barrier, 2, 1], [10, 0, 10, 0, 10], units=ATOMIC))
    assert_energies(levels, exact.energies, 1e-14)
    pairs = 2 * exact.splittings.size
    found = levels.energy[1:pairs:2] - levels.energy[0:pairs:2]
    np.testing.assert_allclose(found, exact.splittings, rtol=0, atol=1e-14 * 10)


# --- functions with a closed form -------------------------------------------------------------
# A profile made from a function follows it to 1e-13 of its height in each cell, and so do the
# energies: 1e-13 of their height is the promise (`from_function`), and what is asked here. psi is
# off by the same in units of the spacing of levels, hence 1e-11 at n = 30.


def test_harmonic_oscillator():
    """omega (n + 1/2) for n = 0 to 30, and Hermite functions point by point."""
    omega, mass, count = 1.7, 0.6, 31
    trap = Profile.from_function(
        lambda x: harmonic_potential(x - 0.3, omega, mass), (-14, 13), mass, units=ATOMIC
    )
    levels = solve(trap, count=count)
    assert_energies(levels, harmonic(omega, count), 1e-13)
    x = np.linspace(-9, 9, 121)
    xi = math.sqrt(mass * omega) * (x - 0.3)
    for n, psi in zip(levels.n, levels.psi(x), strict=True):
        norm = (mass * omega / np.pi) ** 0.25 / math.sqrt(2.0**n * math.factorial(n))
        exact = norm * special.eval_hermite(n, xi) * np.exp(-(xi**2) / 2)
        # The leftmost lobe is positive here; Hermite polynomials are positive on the right.
        np.testing.assert_allclose(psi, (-1.0) ** n * exact, rtol=0, atol=1e-11)


def test_triangular_well():
    """Zeros of Ai for the energies, Ai itself for psi; a straight line is an exact profile."""
    slope, mass, count = 1.3, 0.8, 40
    ramp = Profile.from_rows([0, 60], [0, 60 * slope], mass, left="wall", units=ATOMIC)
    levels = solve(ramp, count=count)
    exact = triangular_wall(slope, count, mass)
    assert_energies(levels, exact, 1e-14)
    stretch = np.cbrt(2 * mass * slope)
    x = np.linspace(0, 40, 161)
    for energy, psi in zip(exact, levels.psi(x), strict=True):
        # The integral of Ai^2 from a zero a upwards is Ai'(a)^2 (Abramowitz, Stegun 1964, 10.4).
        zero = -energy * stretch / slope
        norm = math.sqrt(stretch) / special.airy(zero)[1]
        wave = norm * special.airy(stretch * x + zero)[0]
        np.testing.assert_allclose(psi, wave, rtol=0, atol=1e-12)


@pytest.mark.parametrize("q", [0.5, 5.0, 25.0, 100.0])
def test_mathieu(q):
    """2 q cos(2 x) between walls at 0 and pi: the characteristic values b_1, b_2, ... of scipy.

    Mathieu's equation is y'' + (a - 2 q cos 2x) y = 0 (Abramowitz, Stegun 1964, ch. 20): mass 1/2.
    """
    lattice = Profile.from_function(
        lambda x: 2 * q * np.cos(2 * x), (0, np.pi), 0.5, left="wall", right="wall", units=ATOMIC
    )
    levels = solve(lattice, count=20)
    exact = np.array([special.mathieu_b(n, q) for n in range(1, 21)])
    assert_energies(levels, exact, 1e-13)


def test_morse_states():
    """Energies and Laguerre functions of a well with 10 levels (Morse 1929)."""
    depth, a, mass, center = 20.0, 0.8, 1.7, 1.1
    curve = Profile.from_function(
        lambda x: morse_potential(x, depth, a, center), (-1.5, 60), mass, units=ATOMIC
    )
    levels = solve(curve)
    assert_energies(levels, morse(depth, a, mass), 1e-13)
    strength = math.sqrt(2 * mass * depth) / a
    x = np.linspace(-1, 14, 151)
    z = 2 * strength * np.exp(-a * (x - center))
    for n, psi in zip(levels.n, levels.psi(x), strict=True):
        power = strength - n - 0.5
        log_norm = math.lgamma(n + 1) + math.log(2 * power * a) - math.lgamma(2 * strength - n)
        wave = np.exp(0.5 * log_norm + power * np.log(z) - z / 2)
        wave *= special.eval_genlaguerre(n, 2 * power, z)
        np.testing.assert_allclose(psi, (-1.0) ** n * wave, rtol=0, atol=1e-11)


def test_morse_with_two_hundred_levels():
    """lambda = 210.51: 211 levels, the last bound by 2e-9 of the depth."""
    a, mass = 1.0, 1.0
    depth = (210.51 * a) ** 2 / (2 * mass)
    curve = Profile.from_function(
        lambda x: morse_potential(x, depth, a), (-1.0, 45.0), mass, units=ATOMIC
    )
    exact = morse(depth, a, mass)
    assert len(exact) == 211
    assert -exact[-1] < 3e-9 * depth
    assert_energies(solve(curve), exact, 1e-13)


@pytest.mark.parametrize("strength", [0.3, 1.5, 4.7, 12.2])
def test_sech_squared(strength):
    """-(lambda - n)^2 alpha^2 / 2m for every n < lambda (Poeschl, Teller 1933)."""
    profile = Profile.from_function(
        lambda x: sech_squared_potential(x, strength, 1.3, 0.7),
        (-90, 90),
        0.7,
        units=ATOMIC,
    )
    assert_energies(solve(profile), sech_squared(strength, 1.3, 0.7), 1e-13)
