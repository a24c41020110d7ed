"""The four ways to join the rows of a table, and how each answers to a change of one row.

Adding an interpolation means one entry in _CELLS or _CURVES and one in _GRADIENTS; nothing else
knows them. Curves and gradients work on a stretch of rows without jumps, at least two of them.
"""

from itertools import pairwise

import numpy as np

from ._cells import padded, repeated

INTERPOLATIONS = ("linear", "step", "smooth", "monotone")


def cells(name, x, values):
    """Return the cell polynomials that `name` draws through the rows.

    Parameters
    ----------
    name : {"linear", "step", "smooth", "monotone"}
    x, values : ndarray, shape (rows,)
        At two rows with the same x is a jump.

    Returns
    -------
    ndarray, shape (rows - 1 - jumps, degree + 1)
        Power coefficients in t, 0 to 1 across each cell.
    """
    if values.strides == (0,):  # one number for all rows stays one number
        return repeated(values[0], (np.count_nonzero(x[1:] > x[:-1]), 1))
    if name in _CELLS:
        found, real = _CELLS[name](values), x[1:] > x[:-1]
        return found if real.all() else found[real]
    curves = [_CURVES[name](x[part], values[part]) for part in stretches(x)]
    return np.concatenate(padded(curves)) if len(curves) > 1 else curves[0]


def stretches(x):
    """Slices of rows between jumps: x strictly ascends in each; lone rows are left out."""
    cuts = np.flatnonzero(x[1:] == x[:-1]) + 1
    bounds = [0, *cuts.tolist(), x.size]
    return [slice(a, b) for a, b in pairwise(bounds) if b - a > 1]


def rises(values):
    """Return each row's value beside its rise to the next row, none at the last: (rows, 2)."""
    both = np.empty((values.size, 2))
    both[:, 0] = values
    np.subtract(values[1:], values[:-1], out=both[:-1, 1])
    both[-1, 1] = 0.0
    return both


def gradient(name, x, values, moments):
    """Return d/d(values) of the integral of w(x) times the interpolant.

    Parameters
    ----------
    name, x, values
        As for `cells`.
    moments : ndarray, shape (rows - 1, 4)
        Integral of w t**k dx over each cell, k = 0 to 3.

    Returns
    -------
    ndarray, shape (rows,)
    """
    return _GRADIENTS[name](x, values, moments)


def _step_cells(values):
    return values[:-1, None]


def _linear_cells(values):
    return rises(values)[:-1]


def _smooth_cells(x, values):
    """Cubic spline, not-a-knot ends: the one choice that reproduces every cubic."""
    from scipy.interpolate import CubicSpline

    return _from_ppoly(CubicSpline(x, values).c, np.diff(x))


def _monotone_cells(x, values):
    """Shape-preserving: F. N. Fritsch, J. Butland, SIAM J. Sci. Stat. Comput. 5 (1984) 300."""
    from scipy.interpolate import PchipInterpolator

    if x.size == 2:
        return _linear_cells(values)
    return _from_ppoly(PchipInterpolator(x, values).c, np.diff(x))


def _from_ppoly(c, width):
    """Coefficients of powers of x - x_i, highest first, to powers of t, lowest first."""
    power = np.arange(c.shape[0])[:, None]
    return np.ascontiguousarray((c[::-1] * width**power).T)


def _step_gradient(x, values, moments):
    return np.append(moments[:, 0], 0.0)


def _linear_gradient(x, values, moments):
    out = np.zeros(x.size)
    out[:-1] += moments[:, 0] - moments[:, 1]
    out[1:] += moments[:, 1]
    return out


def _hermite_gradient(x, moments):
    """Gradient with respect to the values and to the slopes of a cubic Hermite interpolant."""
    m0, m1, m2, m3 = moments.T
    h = np.diff(x)
    by_value, by_slope = np.zeros(x.size), np.zeros(x.size)
    rise = 3 * m2 - 2 * m3
    by_value[:-1] += m0 - rise
    by_value[1:] += rise
    by_slope[:-1] += h * (m1 - 2 * m2 + m3)
    by_slope[1:] += h * (m3 - m2)
    return by_value, by_slope


def _by_secants(x, by_secant):
    """Chain from the secants delta_i = (values[i+1] - values[i]) / h_i to the values."""
    scaled = by_secant / np.diff(x)
    out = np.zeros(x.size)
    out[:-1] -= scaled
    out[1:] += scaled
    return out


def _smooth_gradient(x, values, moments):
    """The spline's slopes solve T d = R delta; their share is R^T T^-T (gradient by slope).

    C. de Boor, A Practical Guide to Splines (1978), ch. IV, gives T and R.
    """
    from scipy.linalg import solve_banded

    by_value, by_slope = _hermite_gradient(x, moments)
    h = np.diff(x)
    n = x.size
    if n == 2:
        return _linear_gradient(x, values, moments)
    if n == 3:  # not-a-knot through three rows is their parabola
        h0, h1 = h
        mean = np.array([h1, h0]) / (h0 + h1)  # slope at the middle row, by secant
        rows = np.array([[2.0, 0.0] - mean, mean, [0.0, 2.0] - mean])
        return by_value + _by_secants(x, by_slope @ rows)
    banded = np.zeros((3, n))  # T as solve_banded wants it: above, on, below the diagonal
    banded[1, 1:-1] = 2 * (h[:-1] + h[1:])
    banded[0, 2:] = h[:-1]
    banded[2, :-2] = h[1:]
    banded[1, 0], banded[0, 1] = h[1], h[0] + h[1]
    banded[1, -1], banded[2, -2] = h[-2], h[-1] + h[-2]
    transposed = np.zeros_like(banded)
    transposed[1] = banded[1]
    transposed[0, 1:], transposed[2, :-1] = banded[2, :-1], banded[0, 1:]
    weight = solve_banded((1, 1), transposed, by_slope)
    by_secant = np.zeros(n - 1)
    by_secant[:-1] += 3 * h[1:] * weight[1:-1]
    by_secant[1:] += 3 * h[:-1] * weight[1:-1]
    for end, a, b in ((0, 0, 1), (-1, -1, -2)):
        both = h[a] + h[b]
        by_secant[a] += weight[end] * (h[a] + 2 * both) * h[b] / both
        by_secant[b] += weight[end] * h[a] ** 2 / both
    return by_value + _by_secants(x, by_secant)


def _monotone_gradient(x, values, moments):
    """Differentiates the slopes that PchipInterpolator uses; they depend on neighbours only."""
    if x.size == 2:
        return _linear_gradient(x, values, moments)
    by_value, by_slope = _hermite_gradient(x, moments)
    h = np.diff(x)
    delta = np.diff(values) / h
    by_secant = np.zeros(x.size - 1)
    # Inside: a weighted harmonic mean of the two secants, zero at an extremum.
    w1, w2 = 2 * h[1:] + h[:-1], h[1:] + 2 * h[:-1]
    inside = np.flatnonzero(delta[:-1] * delta[1:] > 0)
    left, right = delta[inside], delta[inside + 1]
    total = w1[inside] + w2[inside]
    slope = total / (w1[inside] / left + w2[inside] / right)
    weight = by_slope[1:-1][inside] * slope**2 / total
    by_secant[inside] += weight * w1[inside] / left**2
    by_secant[inside + 1] += weight * w2[inside] / right**2
    for end, a, b in ((0, 0, 1), (-1, -1, -2)):
        both = h[a] + h[b]
        slope = ((h[a] + both) * delta[a] - h[a] * delta[b]) / both
        if np.sign(slope) != np.sign(delta[a]):
            continue  # the slope is held at zero
        if np.sign(delta[a]) != np.sign(delta[b]) and abs(slope) > 3 * abs(delta[a]):
            by_secant[a] += 3 * by_slope[end]
        else:
            by_secant[a] += by_slope[end] * (h[a] + both) / both
            by_secant[b] -= by_slope[end] * h[a] / both
    return by_value + _by_secants(x, by_secant)


# Cells that depend on their two rows alone are drawn across jumps too, and left out there.
_CELLS = {"linear": _linear_cells, "step": _step_cells}
_CURVES = {"smooth": _smooth_cells, "monotone": _monotone_cells}
_GRADIENTS = {
    "linear": _linear_gradient,
    "step": _step_gradient,
    "smooth": _smooth_gradient,
    "monotone": _monotone_gradient,
}
