"""How rows are joined, and how each way answers to a change of one row."""

import numpy as np
import pytest
from numpy.polynomial import polynomial
from scipy.interpolate import PchipInterpolator, make_interp_spline

from eigen1d._interpolation import INTERPOLATIONS, cells, gradient

T = np.linspace(0.0, 1.0, 17)
# Rows of every kind: rises, falls, level stretches, extrema, uneven steps.
X = np.array([0.0, 0.4, 1.0, 1.1, 2.5, 3.0, 4.7, 5.0])
V = np.array([1.0, 1.3, 0.2, 0.2, -0.7, 2.0, 2.1, 1.0])


def drawn(name, x, values):
    """Positions and values of the interpolant on all cells, shape (rows - 1, T.size) each."""
    found = polynomial.polyval(T, cells(name, x, values).T)
    return x[:-1, None] + T * np.diff(x)[:, None], found


# --- the curves ----------------------------------------------------------------------------------


def test_linear_is_the_broken_line():
    at, found = drawn("linear", X, V)
    assert found == pytest.approx(np.interp(at, X, V), abs=1e-14)


def test_step_holds_until_the_next_row():
    """The last row's value begins where the cells end: it only sets the edge."""
    assert cells("step", X, V).tolist() == [[v] for v in V[:-1]]


def test_smooth_is_the_not_a_knot_spline():
    """Made by another routine of scipy (a sum of B-splines, not CubicSpline).

    C. de Boor, A Practical Guide to Splines (1978), ch. IV and XIII: with knots left out at the
    second and last but one row both are the same spline.
    """
    at, found = drawn("smooth", X, V)
    assert found == pytest.approx(make_interp_spline(X, V, k=3)(at), abs=1e-13)
    natural = make_interp_spline(X, V, k=3, bc_type="natural")(at)
    assert not np.allclose(found, natural, atol=1e-3)  # another boundary would be seen


@pytest.mark.parametrize("rows", [4, 5, 8])
def test_smooth_reproduces_every_cubic(rows):
    """Why not-a-knot was chosen: a sampled harmonic or cubic well is met exactly."""
    x, cubic = X[:rows], [0.3, -1.0, 0.7, 0.2]
    at, found = drawn("smooth", x, polynomial.polyval(x, cubic))
    assert found == pytest.approx(polynomial.polyval(at, cubic), abs=1e-13)
    at, found = drawn("monotone", x, polynomial.polyval(x, cubic))
    assert not np.allclose(found, polynomial.polyval(at, cubic), atol=1e-3)


def test_smooth_through_three_rows_is_their_parabola():
    at, found = drawn("smooth", X[:3], X[:3] ** 2)
    assert found == pytest.approx(at**2, abs=1e-15)


@pytest.mark.parametrize("name", ["smooth", "monotone"])
def test_two_rows_are_joined_straight(name):
    at, found = drawn(name, X[:2], V[:2])
    assert found == pytest.approx(np.interp(at, X[:2], V[:2]), abs=1e-15)


def test_monotone_is_the_published_curve():
    """Slopes by hand from Fritsch and Butland (1984), as Moler prints them.

    Rows at 0, 1, 2, 4 with secants 1, 2, 1. Inside, a harmonic mean weighted by the steps: with
    h = 1, 1 it is 2 / (1/1 + 1/2) = 4/3; with h = 1, 2 it is 9 / (5/2 + 4/1) = 18/13. At the ends
    the three-point formula: (3 * 1 - 2) / 2 = 1/2, and ((2 * 2 + 1) * 1 - 2 * 2) / 3 = 1/3.
    C. Moler, Numerical Computing with MATLAB (2004), sec. 3.4.
    """
    x, values = np.array([0.0, 1.0, 2.0, 4.0]), np.array([0.0, 1.0, 3.0, 5.0])
    c, h = cells("monotone", x, values), np.diff(x)
    slopes = np.append(c[:, 1] / h, (c[-1] @ np.arange(4)) / h[-1])
    assert slopes == pytest.approx([1 / 2, 4 / 3, 18 / 13, 1 / 3], rel=1e-14)


def test_monotone_equals_the_routine_of_scipy():
    """Level stretches, extrema and both ends, against the whole curve."""
    at, found = drawn("monotone", X, V)
    assert found == pytest.approx(PchipInterpolator(X, V)(at), abs=1e-14)


def test_monotone_keeps_between_its_rows_and_smooth_does_not():
    """A spline may dip below the lowest row, and so invent a well that was not in the table."""
    for name, keeps in (("monotone", True), ("linear", True), ("smooth", False)):
        _, found = drawn(name, X, V)
        low, high = np.minimum(V[:-1], V[1:])[:, None], np.maximum(V[:-1], V[1:])[:, None]
        assert ((found >= low - 1e-15) & (found <= high + 1e-15)).all() == keeps, name


@pytest.mark.parametrize("name", INTERPOLATIONS)
def test_every_curve_passes_through_its_rows(name):
    """Only a step's right end is not on its row."""
    _, found = drawn(name, X, V)
    assert found[:, 0] == pytest.approx(V[:-1], abs=1e-15)
    assert (name == "step") != np.allclose(found[:, -1], V[1:], atol=1e-13)


# --- gradients -----------------------------------------------------------------------------------

WEIGHT = [1.0, -0.4, 0.11, 0.03]  # of x: any smooth weight that tells left from right


def moments_of(x):
    """Integrals of w(x) t^k over each cell, by a Gauss rule exact for their degree."""
    node, weight = np.polynomial.legendre.leggauss(6)
    node, weight = 0.5 * (node + 1), 0.5 * weight
    at = x[:-1, None] + node * np.diff(x)[:, None]
    scaled = polynomial.polyval(at, WEIGHT) * weight * np.diff(x)[:, None]
    return np.stack([scaled @ node**k for k in range(4)], axis=1)


def weighted(name, x, values):
    """Integral of w(x) times the interpolant: what `gradient` differentiates."""
    c = cells(name, x, values)
    return float((moments_of(x)[:, : c.shape[1]] * c).sum())


def differences(name, x, values, step):
    """Central differences with respect to every row, extrapolated once (error of order step^4)."""
    out = []
    for row in np.eye(x.size):
        one, two = (
            (weighted(name, x, values + h * row) - weighted(name, x, values - h * row)) / (2 * h)
            for h in (step, 2 * step)
        )
        out.append((4 * one - two) / 3)
    return np.array(out)


@pytest.mark.parametrize("rows", [2, 3, 4, 5, 8])
@pytest.mark.parametrize("name", ["linear", "step", "smooth"])
def test_gradients_of_linear_ways_are_exact(name, rows):
    """Where the curve is linear in its rows, unit steps give the derivative without any error."""
    x, values = X[:rows], V[:rows]
    expected = [weighted(name, x, row) for row in np.eye(rows)]
    found = gradient(name, x, values, moments_of(x))
    assert found == pytest.approx(expected, abs=1e-13)


# Each row of values takes other branches of the monotone slopes; none lies on a border of two.
BRANCHES = {
    "rising": [0.0, 0.3, 1.5, 1.8, 2.5, 3.3, 3.9, 5.0],
    "extrema": [1.0, 1.3, 0.2, 0.6, -0.7, 2.0, 2.1, 1.0],
    "ends held level": [0.0, 0.05, 2.0, 2.1, 2.2, 2.3, 4.0, 4.01],
    "ends cut to three secants": [0.0, 0.1, -3.0, 0.0, 0.1, 0.5, -9.0, -8.9],
}


@pytest.mark.parametrize("branch", BRANCHES)
def test_gradient_of_the_monotone_way(branch):
    """Not linear in its rows, so small steps; the branches of its slopes are all taken."""
    values = np.array(BRANCHES[branch])
    found = gradient("monotone", X, values, moments_of(X))
    assert found == pytest.approx(differences("monotone", X, values, 1e-3), abs=1e-8)


def test_the_branches_are_those_named():
    """A case that takes no other branch than the rest would test nothing new."""
    slope = {}
    for name, values in BRANCHES.items():
        curve = PchipInterpolator(X, values)
        secant = np.diff(values) / np.diff(X)
        slope[name] = curve(X[[0, -1]], 1) / secant[[0, -1]]
    assert np.abs(slope["ends held level"]).max() < 1e-14
    assert slope["ends cut to three secants"] == pytest.approx([3, 3])
    for free in ("rising", "extrema"):
        assert ((slope[free] > 0.1) & (slope[free] < 2.9)).all(), slope[free]
    turns = np.diff(np.sign(np.diff(BRANCHES["extrema"]))) != 0
    assert turns.any() and (np.diff(BRANCHES["rising"]) > 0).all()


@pytest.mark.parametrize("rows", [2, 3, 4, 8])
@pytest.mark.parametrize("name", INTERPOLATIONS)
def test_gradient_sums_to_the_weight(name, rows):
    """Raising all rows raises the whole curve: why slope_V sums to 1 over the rows."""
    x, values = X[:rows], V[:rows]
    total = moments_of(x)[:, 0].sum()
    assert gradient(name, x, values, moments_of(x)).sum() == pytest.approx(total, rel=1e-12)


def test_gradients_of_different_ways_differ():
    """The checks above would not see a gradient of the wrong curve if all curves agreed."""
    found = [gradient(name, X, V, moments_of(X)) for name in INTERPOLATIONS]
    for i in range(4):
        for j in range(i):
            assert not np.allclose(found[i], found[j], atol=1e-3)
