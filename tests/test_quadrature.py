"""Integrals of wave functions: exact on cells and tails, with pieces short where they must be."""

import math

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import airy

from eigen1d import Profile, Units, _quadrature
from eigen1d._quadrature import Tail, pieces
from eigen1d.profile import Edge

ATOMIC = Units("bohr", "hartree")


def box(V=(0.0,), thickness=(1.0,), **keywords):
    return Profile.from_layers(thickness, V, left="wall", right="wall", units=ATOMIC, **keywords)


def gathered(*arguments, **keywords):
    """All points and weights of `pieces`, one array each."""
    parts = list(pieces(*arguments, **keywords))
    return np.concatenate([p[0] for p in parts]), np.concatenate([p[1] for p in parts])


# --- pieces --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("points", "phase"), [_quadrature._FINE, _quadrature._COARSE])
def test_the_rules_own_error_term_is_below_rounding(points, phase):
    """The two pairs of points and phase stand on the error term of Gauss's rule.

    (b - a)^(2q+1) (q!)^4 f^(2q) / ((2q + 1) (2q)!^3), P. J. Davis, P. Rabinowitz, Methods of
    Numerical Integration (1984), sec. 2.7; f = exp(2 i phase t) on [0, 1]. Three points
    less, or four times the phase, would be too many digits short.
    """

    def bound(q, phase):
        factorials = math.factorial(q) ** 4 / math.factorial(2 * q) ** 3
        return (2 * phase) ** (2 * q) * factorials / (2 * q + 1)

    assert bound(points, phase) < 2e-15
    assert bound(points - 3, phase) > 2e-15 and bound(points, 4 * phase) > 2e-15


@pytest.mark.parametrize("energy", [0.004, 5.0, 5e3, 5e5])
def test_waves_of_any_energy_are_integrated(energy):
    """Over one wide cell sin^2 oscillates up to 640 times; the exact integral is elementary.

    The energies take both rules and from one piece to hundreds.
    """
    k = math.sqrt(2 * energy)
    x, weight = gathered(box(), np.array([energy]))
    exact = 0.5 - math.sin(2 * k) / (4 * k)
    assert weight @ np.sin(k * x) ** 2 == pytest.approx(exact, abs=1e-14)


def test_decay_inside_a_barrier_is_integrated():
    """Below the top psi decays: pieces must be short against that length as well."""
    profile = box(V=(0.0, 5000.0, 0.0), thickness=(1.0, 1.0, 1.0))
    x, weight = gathered(profile, np.array([0.5]))
    kappa = math.sqrt(2 * 4999.5)
    inside = (x > 1) & (x < 2)
    found = weight[inside] @ np.exp(-2 * kappa * (x[inside] - 1))
    assert found == pytest.approx(-math.expm1(-2 * kappa) / (2 * kappa), rel=1e-13)


def test_a_ramp_is_integrated_to_its_far_end():
    """Within a cell V may run far from its left value: psi = Ai(c x) on V = E + F x.

    V equals E at the end where a bound that looked at the wrong end would see nothing to resolve.
    The integral of Ai^2 is z Ai^2 - Ai'^2: NIST Digital Library of Mathematical Functions, 9.11.
    """
    F = 1e5
    c = (2 * F) ** (1 / 3)
    for V, end in (([F], [2 * F]), ([2 * F], [F])):
        ramp = box(V=V, V_end=end)
        x, weight = gathered(ramp, np.array([F]))
        z = (lambda x: c * x) if V < end else (lambda x: c * (1 - x))
        slope = airy(0.0)[1]
        far, far_slope = airy(c)[:2]
        exact = ((c * far**2 - far_slope**2) + slope**2) / c
        assert weight @ airy(z(x))[0] ** 2 == pytest.approx(exact, rel=1e-13)


def test_one_break_is_enough():
    x, weight = gathered(box(), np.array([0.5]), breaks=[0.3])
    assert weight @ np.abs(x - 0.3) == pytest.approx((0.3**2 + 0.7**2) / 2, rel=1e-14)


def test_the_highest_level_sets_the_pieces():
    """A quadrature is shared by all levels; made for the lowest alone it fails the highest."""
    low, high = 0.5, 5e3
    k = math.sqrt(2 * high)
    exact = 0.5 - math.sin(2 * k) / (4 * k)
    for energies, good in (([low, high], True), ([low], False)):
        x, weight = gathered(box(), np.array(energies))
        assert (abs(weight @ np.sin(k * x) ** 2 - exact) < 1e-13) == good


def test_an_energy_dependent_mass_shortens_the_pieces():
    """With alpha the mass, and so the phase, grows with E - V; ignored, sin^2 is undersampled."""
    light, heavy = box(), box(alpha=[1.0])
    energies = np.array([1e3])
    assert gathered(heavy, energies)[0].size > 20 * gathered(light, energies)[0].size


def test_points_ascend_within_the_span_and_straddle_nothing():
    """Breaks are where f or psi is not smooth; a piece across one would lose the order."""
    profile = box(V=(0.0, 30.0), thickness=(1.0, 2.0))
    breaks = [0.5, 0.75, 2.5]
    x, weight = gathered(profile, np.array([20.0]), breaks=breaks, span=(0.25, 2.75))
    assert x.min() > 0.25 and x.max() < 2.75
    assert weight.sum() == pytest.approx(2.5, rel=1e-14) and (weight > 0).all()
    edges = [0.25, 0.5, 0.75, 1.0, 2.5, 2.75]
    for low, high in zip(edges[:-1], edges[1:], strict=True):
        part = (x > low) & (x < high)
        assert weight[part].sum() == pytest.approx(high - low, rel=1e-13)
        assert weight[part] @ np.abs(x[part] - low) == pytest.approx((high - low) ** 2 / 2)


def test_polynomials_are_exact_to_the_degree_of_the_rule_and_not_above():
    """4 points are exact to degree 7, 12 to degree 23; one degree more must show an error."""
    for energy, degree in ((0.004, 7), (4.0, 23)):
        x, weight = gathered(box(start=-0.5), np.array([energy]))
        legendre = np.polynomial.legendre.Legendre.basis
        for k, exact in ((degree // 2, True), (degree // 2 + 1, False)):
            # The square of a Legendre polynomial of degree k on [-1/2, 1/2]: 1 / (2 k + 1).
            miss = abs(weight @ legendre(k)(2 * x) ** 2 - 1 / (2 * k + 1))
            assert (miss < 1e-14) == exact, (degree, k)


def test_chunks_do_not_change_the_result(monkeypatch):
    """Long tables are taken piecemeal; a cell lost at a seam would be one part in a million."""
    profile = Profile.from_rows(
        np.linspace(0, 30, 101), np.random.default_rng(0).random(101), units=ATOMIC
    )
    energies = np.array([3.0, 0.01])
    whole = gathered(profile, energies)
    for chunk in (1, 7, 100):
        monkeypatch.setattr(_quadrature, "_CHUNK", chunk)
        found = gathered(profile, energies)
        order, by_x = np.argsort(found[0]), np.argsort(whole[0])
        np.testing.assert_allclose(found[0][order], whole[0][by_x], rtol=1e-15)
        np.testing.assert_allclose(found[1][order], whole[1][by_x], rtol=1e-15)


def test_no_level_needs_no_points():
    """A profile that binds nothing is an answer; its empty list must not fail in the quadrature."""
    assert list(pieces(box(), np.array([]))) == []


# --- tails ---------------------------------------------------------------------------------------


def tail(side=1, energies=(0.5, 1.9), amplitude=(0.7, -0.4), alpha=0.0):
    edge = Edge("open", 2.0, 0.8, alpha)
    return Tail.beyond(edge, 3.0, side, 1.0, np.array(energies), np.array(amplitude))


def numerically(f, low, high):
    return quad(f, low, high, epsabs=1e-13, epsrel=1e-12, limit=200)[0]


@pytest.mark.parametrize("side", [-1, 1])
def test_kappa_is_the_decay_of_the_equation(side):
    """-psi''/(2 m) + V psi = E psi beyond the edge: psi'' = kappa^2 psi, kappa^2 = 2 m (V - E)."""
    t = tail(side)
    assert t.kappa**2 == pytest.approx([2 * 0.8 * 1.5, 2 * 0.8 * 0.1], rel=1e-14)
    x = 3.0 + side * np.array([0.0, 0.5, 2.0])
    expected = np.outer([0.7, -0.4], np.ones(3)) * np.exp(-np.outer(t.kappa, [0.0, 0.5, 2.0]))
    assert t.psi(x) == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize("side", [-1, 1])
@pytest.mark.parametrize(
    "part", [(-np.inf, np.inf), (-9.0, 2.5), (2.0, 4.0), (3.5, 9.0), (1.0, 2.9), (3.0, 3.0 + 1e-9)]
)
def test_squares_over_a_part_of_the_tail(side, part):
    """Closed form against adaptive quadrature; a part inside the cells holds no tail."""
    t = tail(side)
    low, high = (max(part[0], 3.0), part[1]) if side > 0 else (part[0], min(part[1], 3.0))
    for i in range(2):
        if low < high:
            exact = numerically(lambda x, i=i: t.psi(np.array([x]))[i, 0] ** 2, low, high)
        else:
            exact = 0.0
        assert t.squares(*part)[i] == pytest.approx(exact, rel=1e-12, abs=1e-300)


@pytest.mark.parametrize("side", [-1, 1])
def test_matrix_elements_over_the_tail(side):
    """Polynomials times two exponentials are exact; the diagonal is `expect`."""
    t = tail(side)
    f = lambda x: 1 + x - 0.3 * x**3  # noqa: E731
    found = t.matrix(f)
    for i in range(2):
        assert found[i, i] == pytest.approx(t.expect(f)[i], rel=1e-14)
        for j in range(2):
            exact = numerically(
                lambda d, i=i, j=j: (
                    f(3.0 + side * d)
                    * t.amplitude[i]
                    * t.amplitude[j]
                    * math.exp(-(t.kappa[i] + t.kappa[j]) * d)
                ),
                0.0,
                np.inf,
            )
            assert found[i, j] == pytest.approx(exact, rel=1e-10)


def test_a_constant_may_be_a_number():
    """`expect(lambda x: 1.0)` is what users write to see the norm."""
    t = tail()
    assert t.expect(lambda x: 1.0) == pytest.approx(t.squares(), rel=1e-13)


def test_a_level_at_the_edge_has_a_long_but_finite_tail():
    """Within rounding of the edge kappa would be 0 and the norm infinite: nothing but nan.

    What the level is bound by is below the spacing of doubles at the edge; that stands for it.
    """
    t = tail(energies=(2.0, 2.0 + 1e-16))
    assert (t.kappa > 0).all() and np.isfinite(t.squares()).all()
    assert t.kappa.max() < 1e-7  # and still far longer than any well
    assert np.isfinite(t.expect(lambda x: x**2)).all()


@pytest.mark.parametrize("height", [1e2, 1e4, 1e9, 1e15])
def test_thick_barriers_take_few_pieces(height):
    """exp(-2 kappa d) from both ends of a barrier: exact, with some 40 pieces however thick it is.

    By hand: (1 - exp(-10 kappa)) / kappa for exp(-2 kappa d), d from the nearer end of 10.
    """
    barrier = Profile.from_layers([10.0], [height], left="wall", right="wall", units=ATOMIC)
    energy = np.array([0.0])
    kappa = math.sqrt(2 * height)
    total, points = 0.0, 0
    for x, weight in pieces(barrier, energy):
        total += weight @ np.exp(-2 * kappa * np.minimum(x, 10 - x))
        points += x.size
    assert total == pytest.approx((1 - math.exp(-10 * kappa)) / kappa, rel=1e-12)
    assert points < 1500


def test_alpha_in_the_tail():
    """m(E) = m (1 + alpha (E - V)): a lighter mass below the edge, and psi^2 gains m alpha phi^2/2.

    phi = psi'/m, so phi^2 = (kappa / m(E))^2 psi^2.
    """
    t = tail(alpha=0.4)
    light = 0.8 * (1 + 0.4 * (np.array([0.5, 1.9]) - 2.0))
    kappa = np.sqrt(2 * light * (2.0 - np.array([0.5, 1.9])))
    assert t.kappa == pytest.approx(kappa, rel=1e-14)
    extra = 0.5 * 0.8 * 0.4 * (kappa / light) ** 2
    assert t.weighted_squares() == pytest.approx(t.squares() * (1 + extra), rel=1e-14)
    assert (tail().weighted_squares() == tail().squares()).all()
