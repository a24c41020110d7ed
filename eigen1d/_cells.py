"""Arithmetic of piecewise polynomials: plain arrays in, plain arrays out.

A cell polynomial is a row of power coefficients c[0], c[1], ... in t, where t runs from 0 at the
cell's left end to 1 at its right end. All functions work on many cells at once.
"""

import math

import numpy as np
from numpy.polynomial import chebyshev, polynomial

EPS = np.finfo(float).eps

# A function is cut into cells on which a polynomial of this degree meets the tolerance. 12 is where
# a cell's smallest interpolation error is still rounding, yet its power coefficients on [0, 1]
# (which grow as (6/rho)**j for a Bernstein ellipse rho) lose no digits: with rho > 15 or so, which
# 1e-13 at degree 12 requires, they decay.
DEGREE = 12
# Chebyshev points of degree 2 * DEGREE: every second one interpolates, the others judge.
_POINTS = 0.5 * (1.0 - np.cos(np.pi * np.arange(2 * DEGREE + 1) / (2 * DEGREE)))
_TO_CHEBYSHEV = np.linalg.inv(chebyshev.chebvander(2 * _POINTS[::2] - 1, DEGREE))
_JUDGE = chebyshev.chebvander(2 * _POINTS[1::2] - 1, DEGREE)
_PHASE, _SLOPE = 4.0, 16.0  # a cell longer than this, with a top this much above its bottom, is cut
# A function is too rough if a cell fails that is shorter than _SHORTEST times its x or the span: a
# kink or a jump is cut for ever. Below that its own rounding, of x alone, hides what it is.
_SHORTEST = 2.0**-40
_MOST_CELLS = 1 << 18  # open at once, 50 MB an array: a function with noise everywhere comes here


class TooRough(ValueError):
    """A function that no polynomial follows near a place, or that too many would have to follow."""


def evaluated(coefficients, t):
    """Return the value of each cell polynomial, shape (cells, degree + 1), at t, shape (cells,)."""
    value = coefficients[:, -1].copy()
    for j in range(coefficients.shape[1] - 2, -1, -1):
        value = value * t + coefficients[:, j]
    return value


def reexpanded(coefficients, offset, ratio):
    """Return the coefficients of p(offset + ratio t): the same polynomial seen from another cell.

    Shapes: coefficients (cells, degree + 1); offset and ratio (cells,) or scalars.
    Repeated synthetic division (Horner's scheme for a Taylor shift).
    """
    c = np.array(coefficients, dtype=float)
    degree = c.shape[1] - 1
    for k in range(degree):
        for j in range(degree - 1, k - 1, -1):
            c[:, j] += offset * c[:, j + 1]
    power = np.ones_like(c[:, 0])
    for k in range(1, degree + 1):
        power = power * ratio
        c[:, k] *= power
    return c


def mirrored(coefficients):
    """Return the cells of the mirror image: reversed order, each with t replaced by 1 - t."""
    return reexpanded(coefficients[::-1], 1.0, -1.0)


def minimum(coefficients):
    """Return the least value that any of the cell polynomials takes on its cell.

    Ends and zeros of the derivative; the zeros are sought only in cells whose lower bound
    c[0] - sum |c[j]| leaves room for a value below the least sample.
    """
    ends = np.minimum(coefficients[:, 0], coefficients.sum(axis=1))
    least = ends.min()
    if coefficients.shape[1] <= 2:
        return float(least)
    bound = coefficients[:, 0] - np.abs(coefficients[:, 1:]).sum(axis=1)
    for row in np.flatnonzero(bound < least):
        if bound[row] < least:
            t = _turning_points(coefficients[row])
            least = min(least, polynomial.polyval(t, coefficients[row]).min(initial=least))
    return float(least)


def _turning_points(c):
    """Where the derivative of one cell polynomial vanishes, cut to 0..1.

    A leading coefficient that is rounding of the others puts a root near infinity, whose size costs
    the roots on the cell their digits: such terms are left out while roots are sought, and Newton's
    method on the whole derivative makes up for it.
    """
    slope = polynomial.polyder(c)
    large = np.flatnonzero(np.abs(slope) > 1e-10 * np.abs(slope).max(initial=0.0))
    if not large.size:
        return np.zeros(1)
    # A double root may come out as a complex pair: its real part is as good a sample as any.
    t = np.clip(polynomial.polyroots(slope[: large[-1] + 1]).real, 0.0, 1.0)
    bend = polynomial.polyder(slope)
    for _ in range(2):
        change = polynomial.polyval(t, slope)
        rate = polynomial.polyval(t, bend)
        move = np.divide(change, rate, out=np.zeros_like(t), where=rate != 0)
        t = np.clip(t - np.clip(move, -0.1, 0.1), 0.0, 1.0)
    return t


def merged(x, fields):
    """Join neighbouring cells that carry the same polynomials.

    Parameters
    ----------
    x : ndarray, shape (cells + 1,)
        Breakpoints, ascending.
    fields : list of ndarray, shape (cells, degree + 1)
        V, mass, ...: cells join only where all of them agree to rounding.

    Returns
    -------
    x, fields
        The same function on as few cells.

    Notes
    -----
    A run of cells is joined only if the polynomial through points spread over the whole run (for
    straight lines: the chord) passes within rounding of every cell in it. Comparing neighbours
    alone would let many small bends add up: a finely sampled parabola looks straight from one row
    to the next. A run that fails is left as it was, which is always right.
    """
    same = np.ones(x.size - 2, dtype=bool)
    for field in fields:
        same &= _neighbours_agree(x, field, same)
    if not same.any():
        return x, fields
    run = np.concatenate([[0], np.cumsum(~same)])  # number of the run that each cell belongs to
    first = np.searchsorted(run, np.arange(run[-1] + 1))
    ends = np.append(x[first], x[-1])
    good = np.ones(first.size, dtype=bool)
    joined = []
    for field in fields:
        candidate = _through_run(x, field, ends)
        offset = (x[:-1] - ends[run]) / (ends[run + 1] - ends[run])
        ratio = np.diff(x) / (ends[run + 1] - ends[run])
        miss = np.abs(reexpanded(candidate[run], offset, ratio) - field).max(axis=1)
        good[run[miss > 8 * EPS * _size(ends, candidate)[run]]] = False
        joined.append(candidate)
    # Cells that stay: the first of every good run (with the joined polynomial), all of a bad one.
    is_first = np.zeros(run.size, dtype=bool)
    is_first[first] = True
    keep = is_first | ~good[run]
    single = np.bincount(run)[run] == 1  # alone in its run: keep its own digits
    use_joined = (good[run] & ~single)[keep]
    out = [
        np.where(use_joined[:, None], candidate[run[keep]], field[keep])
        for candidate, field in zip(joined, fields, strict=True)
    ]
    return np.append(x[:-1][keep], x[-1]), out


def _neighbours_agree(x, field, candidates):
    """Whether cell i + 1 continues the polynomial of cell i, for the candidate pairs."""
    agree = np.zeros(x.size - 2, dtype=bool)
    # A jump, or a different end value, decides most pairs at the cost of one comparison.
    scale = _size(x, field)
    close = np.abs(field.sum(axis=1)[:-1] - field[1:, 0]) <= 8 * EPS * np.maximum(
        scale[:-1], scale[1:]
    )
    i = np.flatnonzero(candidates & close)
    if i.size == 0:
        return agree
    if field.shape[1] == 1:
        agree[i] = True
        return agree
    left, right = x[i + 1] - x[i], x[i + 2] - x[i + 1]
    # The longer cell is carried on to the shorter one; the other way round would magnify rounding.
    forward = left >= right
    base = np.where(forward[:, None], field[i], field[i + 1])
    offset = np.where(forward, 1.0, -left / right)
    ratio = np.where(forward, right / left, left / right)
    target = np.where(forward[:, None], field[i + 1], field[i])
    miss = np.abs(reexpanded(base, offset, ratio) - target).max(axis=1)
    agree[i] = miss <= 16 * EPS * np.maximum(scale[i], scale[i + 1])
    return agree


def _size(x, field):
    """What rounding is relative to: the values of each cell, and those of its slope times x."""
    size = np.abs(field).sum(axis=1)
    if field.shape[1] > 1:
        size += np.abs(field[:, 1]) * np.maximum(np.abs(x[:-1]), np.abs(x[1:])) / np.diff(x)
    return size


def _through_run(x, field, ends):
    """The polynomial through degree + 1 equally spaced points of each run between `ends`."""
    degree = field.shape[1] - 1
    if degree == 0:
        return field[np.searchsorted(x, ends[:-1])]
    t = np.linspace(0.0, 1.0, degree + 1)
    at = ends[:-1, None] + t * np.diff(ends)[:, None]
    cell = np.clip(np.searchsorted(x, at, side="right") - 1, 0, x.size - 2)
    # The end of a run is the right end of its last cell, not the left end of the next.
    cell[:, -1] = np.searchsorted(x, ends[1:]) - 1
    local = (at - x[cell]) / (x[cell + 1] - x[cell])
    local[:, -1] = 1.0
    values = evaluated(field[cell.ravel()], local.ravel()).reshape(cell.shape)
    if degree == 1:
        return np.column_stack([values[:, 0], values[:, 1] - values[:, 0]])
    return np.linalg.solve(np.vander(t, increasing=True), values.T).T


def padded(fields):
    """Return the arrays with zero columns added, so that all have the highest degree."""
    width = max(f.shape[1] for f in fields)
    return [np.pad(f, ((0, 0), (0, width - f.shape[1]))) for f in fields]


def scaled(coefficients, factor):
    """Return the cells times a number; one number for all cells stays one number."""
    if coefficients.strides[0] == 0:
        return np.broadcast_to(coefficients[:1] * factor, coefficients.shape)
    return coefficients * factor


def product(a, b):
    """Return the coefficients of the product of two polynomials, cell by cell."""
    out = np.zeros((a.shape[0], a.shape[1] + b.shape[1] - 1))
    for j in range(b.shape[1]):
        out[:, j : j + a.shape[1]] += a * b[:, j : j + 1]
    return out


def graded(start, end):
    """Return cells that run straight from `start` to `end`, shape (cells,); constant if equal."""
    if np.array_equal(start, end):
        return np.array(start)[:, None]
    return np.column_stack([start, end - start])


def from_ppoly(function, x):
    """Return the coefficients of a PPoly on cells with ends `x`, which refine its own."""
    piece = np.clip(
        np.searchsorted(function.x, x[:-1], side="right") - 1, 0, function.c.shape[1] - 1
    )
    power = np.arange(function.c.shape[0])[:, None]
    width = np.diff(function.x)[piece]
    own = np.ascontiguousarray((function.c[::-1, piece] * width**power).T, dtype=float)
    offset = (x[:-1] - function.x[piece]) / width
    return reexpanded(own, offset, np.diff(x) / width)


def from_callable(V, mass, breaks, tolerance, unit=1.0):
    """Cut functions into common polynomial cells, by Chebyshev interpolation and halving.

    Parameters
    ----------
    V, mass : callable
        Each maps an array to an array of the same shape, or to one number. The tolerance of V is
        relative to the cell's own height above the least V sampled, that of the mass to its size.
    breaks : ndarray
        Ends of the span and points where a function is not smooth, ascending. Those inside are
        approached from both sides, and the functions never asked exactly there.
    tolerance : float
        Accepted interpolation error. Rounding of the functions themselves is allowed on top.
    unit : float, optional
        Factor that brings the mass to units with hbar = 1.

    Returns
    -------
    x, fields
        Breakpoints and, for V and mass, coefficients of shape (cells, degree + 1).

    Raises
    ------
    TooRough
        A function that no short cell, or no reasonable number of cells, can follow.

    Notes
    -----
    A cell that holds the bottom of a well and a high wall rounds by the height of the wall where
    the lowest states live. Cells that are long against the wavelength at their own top, and whose
    own bottom is low against it, are therefore halved even where one polynomial would do.

    References
    ----------
    .. [1] L. N. Trefethen, Approximation Theory and Approximation Practice, SIAM (2013), ch. 3, 8.
    """
    left, right = np.array(breaks[:-1], dtype=float), np.array(breaks[1:], dtype=float)
    span = breaks[-1] - breaks[0]
    least = np.inf
    done = []
    while left.size:
        at = left[:, None] + _POINTS * (right - left)[:, None]
        at[:, -1] = right
        for column, side in ((0, np.inf), (-1, -np.inf)):
            inner = np.isin(at[:, column], breaks[1:-1])
            at[inner, column] = np.nextafter(at[inner, column], side)
        samples = [np.broadcast_to(f(at), at.shape) for f in (V, mass)]
        least = min(least, samples[0].min())
        top, bottom = samples[0].max(axis=1) - least, samples[0].min(axis=1) - least
        phase = np.sqrt(2 * unit * samples[1].max(axis=1) * top) * (right - left)
        good = (phase <= _PHASE) | (bottom * _SLOPE >= top)
        spectra = []
        for values, height in zip(samples, (top, np.abs(samples[1]).max(axis=1)), strict=True):
            spectrum, miss, rounding = _fitted(at, values)
            good &= miss <= 0.25 * tolerance * height + rounding
            spectra.append(spectrum)
        done.append((left[good], [s[good] for s in spectra]))
        left, right = left[~good], right[~good]
        short = right - left < _SHORTEST * np.maximum(span, np.minimum(np.abs(left), np.abs(right)))
        if short.any() or left.size > _MOST_CELLS:
            raise TooRough(_roughness(np.sort(left), np.sort(left[short]), breaks))
        middle = 0.5 * (left + right)
        left, right = np.concatenate([left, middle]), np.concatenate([middle, right])
    start = np.concatenate([d[0] for d in done])
    order = np.argsort(start)
    x = np.append(start[order], breaks[-1])
    fields = [np.concatenate([d[1][k] for d in done])[order] for k in (0, 1)]
    return x, [_power(spectrum) for spectrum in fields]


def _roughness(left, short, breaks):
    """What is wrong with a function: left ends of the cells that fail, and of the short ones."""
    if not short.size:
        return (
            f"the function asks for more than {_MOST_CELLS} cells, at x = {left[0]:.12g} and "
            "elsewhere; if its values are noisy, give a larger tolerance, or rows to from_rows"
        )
    # The middle one of many on both sides, rounded to hide by how little it misses.
    place = float(short[short.size // 2])
    digits = 11 - math.ceil(math.log10(max(breaks[-1] - breaks[0], abs(place))))
    place = round(place, digits) + 0.0
    if np.abs(breaks - place).min() <= 10.0**-digits:
        return (
            f"no polynomial follows the function up to x = {place:.12g}, as where it has a root or "
            "a pole; end the span some way off, or give rows to from_rows"
        )
    return (
        f"no polynomial follows the function near x = {place:.12g}; if it jumps or has a kink "
        f"there, write breaks=[{place:.12g}]"
    )


def _fitted(at, values):
    """Chebyshev coefficients of each cell, their miss, and what rounding explains of it."""
    base = values[:, :1]  # taken away first, so that a constant is met exactly
    spectrum = (values[:, ::2] - base) @ _TO_CHEBYSHEV.T
    size = np.abs(values).max(axis=1)
    # Trailing coefficients below rounding are noise; dropping them lowers the degree.
    tail = np.maximum.accumulate(np.abs(spectrum[:, ::-1]), axis=1)[:, ::-1]
    spectrum[tail <= EPS * size[:, None]] = 0.0
    spectrum[:, :1] += base
    miss = np.abs(spectrum @ _JUDGE.T - values[:, 1::2]).max(axis=1)
    # x is rounded before the function sees it: |x| eps times the slope, for a function of x - a.
    slope = np.ptp(values, axis=1) / (at[:, -1] - at[:, 0])
    rounding = 4 * EPS * (size + slope * np.abs(at).max(axis=1))
    return spectrum, miss, rounding


def _power(spectrum):
    """Power coefficients in t of Chebyshev series in 2 t - 1."""
    degree = spectrum.shape[1] - 1
    to_power = np.zeros((degree + 1, degree + 1))
    for j in range(degree + 1):
        c = chebyshev.cheb2poly(np.eye(degree + 1)[j])
        to_power[j, : c.size] = c
    in_s = spectrum @ to_power
    out = reexpanded(in_s, -1.0, 2.0)
    used = np.flatnonzero(np.any(out != 0.0, axis=0))
    return out[:, : used[-1] + 1] if used.size else out[:, :1]
