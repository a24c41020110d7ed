"""The closed forms against the reference levels, high-precision arithmetic and known limits."""

import doctest
import json
import math
from pathlib import Path

import mpmath
import numpy as np
import pytest
from scipy.integrate import quad

from eigen1d import closed_forms
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
from eigen1d.errors import InputError

CASES = {
    case["id"]: case
    for case in json.loads((Path(__file__).parent / "reference" / "levels.json").read_text())[
        "cases"
    ]
}
mpf = mpmath.mpf

# Reference case -> the closed form with that case's parameters, as its description states them.
CLOSED_FORM = {
    "P08": lambda: harmonic(1.0, 101),
    "P09": lambda: morse(0.1744, 1.02764, mass=918.076),
    "P10": lambda: morse(50.0, 1.0),
    "P11": lambda: sech_squared(1),
    "P12": lambda: sech_squared(4),
    "P13": lambda: sech_squared(2.5),
    "P14": lambda: triangular_wall(1.0, 101),
    "P16": lambda: double_square_well(2.0, 2.0, 10.0).energies,
}
POTENTIAL = {
    "P08": lambda x: harmonic_potential(x, 1.0),
    "P09": lambda x: morse_potential(x, 0.1744, 1.02764, center=1.40201),
    "P10": lambda x: morse_potential(x, 50.0, 1.0),
    "P11": lambda x: sech_squared_potential(x, 1),
    "P12": lambda x: sech_squared_potential(x, 4),
    "P13": lambda x: sech_squared_potential(x, 2.5),
}


def test_docstring_examples_run():
    """An example in the documentation that no longer holds is a wrong promise."""
    outcome = doctest.testmod(closed_forms)
    assert outcome.attempted > 8
    assert outcome.failed == 0


@pytest.mark.parametrize("name", CLOSED_FORM)
def test_reference_levels(name):
    """The recorded levels of reference/README.md, every one, and their number where it is known.

    P09 is recorded to at least 27 digits, but its parameters as doubles differ from the decimals
    by up to 1e-16; near dissociation that is 1e-16 lambda / (lambda - n - 1/2) of the level.
    """
    case, energies = CASES[name], CLOSED_FORM[name]()
    n = [level["n"] for level in case["levels"]]
    exact = np.array([float(level["energy"]) for level in case["levels"]])
    if "n_bound" in case:
        assert energies.size == case["n_bound"]
    tolerance = 2e-16 * 17.4 / (17.4 - np.array(n) - 0.5) if name == "P09" else 0.0
    assert np.all(np.abs(energies[n] / exact - 1) < 1e-15 + tolerance)


@pytest.mark.parametrize("name", POTENTIAL)
def test_potentials_are_those_of_the_reference(name):
    """A solver fed with V(x) must be solving the same problem as the closed form."""
    case = CASES[name]
    x = np.linspace(-1.5, 6.0, 83)
    recorded = eval(case["potential"]["expression"], {"np": np, "x": x})
    assert POTENTIAL[name](x) == pytest.approx(recorded, rel=1e-13, abs=1e-15)


def test_potential_far_out_is_zero_without_overflow():
    assert sech_squared_potential(np.array([-1e4, 1e4]), 3.0) == pytest.approx([0, 0], abs=0)
    assert morse_potential(1e4, 1.0, 1.0) == 0


# --- parameters off unity: scaling laws and what the potentials themselves say ---------------


def rayleigh(V, psi, slope, mass, low, high):
    """Energy of a known state from its potential: <psi'^2>/(2 m) + <V psi^2>, over <psi^2>."""
    parts = [
        quad(f, low, high, epsabs=1e-13, epsrel=1e-12, limit=300)[0]
        for f in (
            lambda x: slope(x) ** 2 / (2 * mass),
            lambda x: V(x) * psi(x) ** 2,
            lambda x: psi(x) ** 2,
        )
    ]
    return (parts[0] + parts[1]) / parts[2]


def test_ground_states_belong_to_the_potentials_beside_them():
    """Ground states: exp(-m w x^2/2); Morse 1929; sech^lambda, Poeschl and Teller 1933."""
    omega, mass = 1.7, 0.6
    found = rayleigh(
        lambda x: harmonic_potential(x, omega, mass),
        lambda x: math.exp(-mass * omega * x * x / 2),
        lambda x: -mass * omega * x * math.exp(-mass * omega * x * x / 2),
        mass,
        -12,
        12,
    )
    assert found == pytest.approx(harmonic(omega, 1)[0], rel=1e-11)

    lambda_, alpha = 2.3, 1.4
    found = rayleigh(
        lambda x: sech_squared_potential(x, lambda_, alpha, mass),
        lambda x: math.cosh(alpha * x) ** -lambda_,
        lambda x: -lambda_ * alpha * math.tanh(alpha * x) * math.cosh(alpha * x) ** -lambda_,
        mass,
        -15,
        15,
    )
    assert found == pytest.approx(sech_squared(lambda_, alpha, mass)[0], rel=1e-11)

    depth, a = 9.0, 0.8
    strength = math.sqrt(2 * mass * depth) / a

    def psi(x):
        return math.exp(-strength * math.exp(-a * x) - (strength - 0.5) * a * x)

    found = rayleigh(
        lambda x: morse_potential(x, depth, a),
        psi,
        lambda x: a * (strength * math.exp(-a * x) - strength + 0.5) * psi(x),
        mass,
        -4,
        25,
    )
    assert found == pytest.approx(morse(depth, a, mass)[0], rel=1e-11)


def test_morse_counts_exactly_and_keeps_tiny_bindings():
    """lambda = 3.5 leaves three levels: the fourth has zero energy. Just above, it is bound."""
    at_rim, above = 3.5**2 / 2, np.nextafter(3.5**2 / 2, 7)
    assert morse(at_rim, 1.0).size == 3
    assert morse(above, 1.0).size == 4
    with mpmath.workdps(50):
        exact = -((mpmath.sqrt(2 * mpf(float(above))) - mpf(3.5)) ** 2) / 2
        assert float(abs(morse(above, 1.0)[3] / exact - 1)) < 1e-15
    assert morse(0.1, 1.0).size == 0  # lambda = 0.447 < 1/2: too narrow to bind
    assert morse(0.126, 1.0).size == 1


def test_sech_squared_leaves_out_the_half_bound_state():
    """A whole lambda has a zero-energy state; the next double above binds it."""
    for whole in (1, 2, 7):
        assert sech_squared(whole).size == whole
        assert sech_squared(np.nextafter(whole, 99)).size == whole + 1
    assert sech_squared(0.01).size == 1


def test_mass_and_width_scale_as_they_must():
    """Lengths by s and masses by 1/s^2 leave the levels alone."""
    s = 1.3
    assert morse(7.0, 0.9, 2.0) == pytest.approx(morse(7.0, 0.9 / s, 2.0 / s**2), rel=1e-13)
    assert sech_squared(3.3, 0.9, 2.0) == pytest.approx(
        sech_squared(3.3, 0.9 / s, 2.0 / s**2), rel=1e-15
    )
    assert triangular_wall(0.7, 9, 2.0) == pytest.approx(
        triangular_wall(0.7 / s, 9, 2.0 / s**2), rel=1e-15
    )
    plain, stretched = (
        double_square_well(2.0, 1.0, 6.0, 2.0),
        double_square_well(2.0 * s, 1.0 * s, 6.0, 2.0 / s**2),
    )
    assert plain.energies == pytest.approx(stretched.energies, rel=1e-14)
    assert plain.splittings == pytest.approx(stretched.splittings, rel=1e-13)


# --- triangular wall --------------------------------------------------------------------------


def test_triangular_wall_uses_zeros_right_to_the_last_digits():
    """200 zeros of Ai in 30 digits; with mass 1/2 and slope 1 the energies are the zeros."""
    energies = triangular_wall(1.0, 200, mass=0.5)
    with mpmath.workdps(30):
        for k in (*range(1, 21), 50, 101, 150, 199, 200):
            assert float(abs(energies[k - 1] / -mpmath.airyaizero(k) - 1)) < 5e-16
    assert triangular_wall(1.0, 0).shape == (0,)


# --- double well ------------------------------------------------------------------------------


def exact_double_well(well_width, barrier_width, height, mass, digits):
    """All levels by bisection of the determinant-free parity conditions in many digits."""
    with mpmath.workdps(digits):
        w, b, V, m = (mpf(float(v)) for v in (well_width, barrier_width, height, mass))
        K = mpmath.sqrt(2 * m * V)

        def mismatch(energy, odd):
            """k w - n pi at a level n: psi'/psi = -kappa outside, kappa tanh or coth in between."""
            k, kappa = mpmath.sqrt(2 * m * energy), mpmath.sqrt(2 * m * (V - energy))
            inner = kappa * mpmath.tanh(kappa * b / 2)
            if odd:
                inner = kappa / mpmath.tanh(kappa * b / 2)
            return k * w - mpmath.atan(kappa / k) - mpmath.atan(inner / k)

        levels = []
        n = 0
        while K * w > n * mpmath.pi:
            for odd in (False, True):
                if K * w - (mpmath.atan(2 / (K * b)) if odd else 0) > n * mpmath.pi:
                    low, high = mpf(0), V
                    for _ in range(int(3.33 * digits) - 20):
                        middle = (low + high) / 2
                        above = mismatch(middle, odd) > n * mpmath.pi
                        low, high = (low, middle) if above else (middle, high)
                    levels.append(low)
            n += 1
        return levels


def random_double_wells():
    random = np.random.default_rng(11)
    return [tuple(10 ** random.uniform([-1, -1.5, -1, -1], [1, 1, 1.5, 0.5])) for _ in range(10)]


@pytest.mark.parametrize(
    "well",
    [
        (2.0, 2.0, 10.0, 1.0),
        (2.0, 30.0, 10.0, 1.0),
        (2.0, 1e-17, 10.0, 1.0),
        *random_double_wells(),
    ],
)
def test_double_well_energies_and_splittings_in_many_digits(well):
    """Splittings are right relative to themselves, down to 1e-57 of the height.

    exp(-kappa b) turns a rounding of kappa b into a relative error of that size.
    """
    found = double_square_well(*well)
    kappa_b = well[1] * math.sqrt(2 * well[3] * well[2])
    digits = 45 + int(kappa_b / 2.3)
    exact = exact_double_well(*well, digits)
    assert found.energies.size == len(exact)
    with mpmath.workdps(digits):
        for energy, level in zip(found.energies, exact, strict=True):
            assert float(abs(energy / level - 1)) < 2e-15
        assert found.splittings.size == len(exact) // 2
        for j, splitting in enumerate(found.splittings):
            true = exact[2 * j + 1] - exact[2 * j]
            assert float(abs(splitting / true - 1)) < 4e-15 + 4e-16 * kappa_b


def test_reference_splittings():
    """Case P16: three doublets, recorded to 43 digits or more."""
    found = double_square_well(2.0, 2.0, 10.0).splittings
    exact = [float(pair["splitting"]) for pair in CASES["P16"]["splittings"]]
    assert found == pytest.approx(exact, rel=4e-15, abs=0)


def test_splitting_below_the_spacing_of_doubles_is_not_zero():
    """Where both energies are one double, their difference still falls as exp(-kappa b)."""
    near, far = double_square_well(2.0, 30.0, 10.0), double_square_well(2.0, 31.0, 10.0)
    assert far.energies[0] == far.energies[1]
    kappa = math.sqrt(2 * (10.0 - far.energies[0]))
    assert far.splittings[0] > 0
    assert far.splittings[0] / near.splittings[0] == pytest.approx(math.exp(-kappa), rel=1e-12)


def test_thin_barrier_gives_one_well_of_twice_the_width():
    """And a thick one two single wells; both from the single-well phase, common practice."""

    def single_well(width, height):
        K = math.sqrt(2 * height)
        levels = []
        while len(levels) * math.pi < K * width:
            n = len(levels)
            theta = mpmath.findroot(
                lambda t, n=n: K * width * mpmath.sin(t) + 2 * t - (n + 1) * mpmath.pi,
                (0, math.pi / 2),
                solver="anderson",
            )
            levels.append(height * math.sin(theta) ** 2)
        return np.array(levels)

    thin = double_square_well(1.0, 1e-7, 10.0).energies
    assert thin == pytest.approx(single_well(2.0, 10.0), rel=1e-5)
    assert not np.allclose(thin, single_well(2.0, 10.0), rtol=1e-9, atol=0)
    thick = double_square_well(1.0, 40.0, 10.0).energies
    assert thick == pytest.approx(np.repeat(single_well(1.0, 10.0), 2), rel=1e-14)


def test_odd_partner_may_be_missing():
    """Between K w = n pi and n pi + arctan(2/(K b)) only the even state is bound."""
    lone = double_square_well(0.3, 0.2, 1.0)
    assert math.sqrt(2) * 0.3 < math.atan(2 / (math.sqrt(2) * 0.2))
    assert (lone.energies.size, lone.splittings.size) == (1, 0)


def test_coth_excess_is_smooth_and_accurate():
    """Both forms, around their seam at 3 and down to 1e-8."""
    random = np.random.default_rng(5)
    with mpmath.workdps(50):
        for y in (2.9999, 3.0, 3.0001, *map(float, 10 ** random.uniform(-8, 2, 200))):
            exact = mpf(y) * mpmath.coth(mpf(y)) - 1
            assert float(abs(closed_forms._coth_excess(y) / exact - 1)) < 6e-16


# --- bad input --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "call, message",
    [
        (lambda: harmonic(-1.0, 3), "omega must be a positive number; found -1.0"),
        (lambda: harmonic(1.0, 2.5), "count must be a whole number of levels, 0 or more; found"),
        (lambda: harmonic(1.0, -1), "count must be a whole number of levels, 0 or more; found -1"),
        (lambda: morse("deep", 1.0), "depth must be a positive number; found 'deep'"),
        (lambda: morse(1.0, 0.0), "a must be a positive number; found 0.0"),
        (lambda: sech_squared(math.inf), "lambda_ must be a positive number; found inf"),
        (lambda: sech_squared(1, mass=-1), "mass must be a positive number; found -1"),
        (lambda: triangular_wall(math.nan, 3), "slope must be a positive number; found nan"),
        (lambda: double_square_well(1, 0, 1), "barrier_width must be a positive number; found 0"),
        (lambda: double_square_well(1, 1, None), "height must be a positive number; found None"),
    ],
)
def test_impossible_input_is_refused(call, message):
    with pytest.raises(InputError, match=message):
        call()
