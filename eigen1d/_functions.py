"""Functions of x, cut into cells on which a polynomial is the function to a tolerance."""

import math
from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.polynomial import chebyshev

from ._cells import EPS, repeated, trimmed

# A function is cut into cells on which a polynomial of this degree meets the tolerance. 12 is where
# a cell's smallest interpolation error is still rounding, yet its power coefficients on [0, 1]
# (which grow as (6/rho)**j for a Bernstein ellipse rho) lose no digits: with rho > 15 or so, which
# 1e-13 at degree 12 requires, they decay.
DEGREE = 12
# Chebyshev points of degree 2 * DEGREE: every second one interpolates, the others judge.
_POINTS = 0.5 * (1.0 - np.cos(np.pi * np.arange(2 * DEGREE + 1) / (2 * DEGREE)))
_TO_CHEBYSHEV = np.linalg.inv(chebyshev.chebvander(2 * _POINTS[::2] - 1, DEGREE))
_JUDGE = chebyshev.chebvander(2 * _POINTS[1::2] - 1, DEGREE)


def _shifted_chebyshev():
    """Power coefficients of T_j(2 t - 1), one j a row: whole numbers, without rounding."""
    rows = np.zeros((DEGREE + 1, DEGREE + 1))
    rows[0, 0], rows[1, :2] = 1.0, (-1.0, 2.0)
    for j in range(2, DEGREE + 1):
        rows[j] = -2.0 * rows[j - 1] - rows[j - 2]
        rows[j, 1:] += 4.0 * rows[j - 1, :-1]
    return rows


_TO_POWER = _shifted_chebyshev()
_PHASE, _SLOPE = 4.0, 16.0  # a cell longer than this, with a top this much above its bottom, is cut
# A function is too rough if a cell fails that is shorter than _SHORTEST times its x or the span: a
# kink or a jump is cut for ever. Below that its own rounding, of x alone, hides what it is.
_SHORTEST = 2.0**-40
_AT_ONCE = 32  # cells sampled in one call, halves included, unless more are open
_MOST_CELLS = 1 << 18  # open at once, 50 MB an array: a function with noise everywhere comes here


class TooRough(ValueError):
    """A function that no polynomial follows near a place, or that too many would have to follow."""


def cells(V, mass, breaks, tolerance, unit=1.0):
    """Cut functions into common polynomial cells, by Chebyshev interpolation and halving.

    Parameters
    ----------
    V : callable
        Maps an array, shape (positions,), to an array of the same shape, or to one number. The
        tolerance is relative to the cell's own height above the least V sampled.
    mass : callable or float
        The same; the tolerance is relative to its size.
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

    Cells, their halves, and halves of those are sampled in one call and judged side by side; taken
    are the longest that are good.

    References
    ----------
    .. [1] L. N. Trefethen, Approximation Theory and Approximation Practice, SIAM (2013), ch. 3, 8.
    """
    functions = [f for f in (V, mass) if callable(f)]
    left, right = breaks[:-1], breaks[1:]
    least, done = np.inf, []
    while left.size:
        depth = max((_AT_ONCE // left.size).bit_length() - 2, 0)
        start, end, above = _with_halves(left, right, depth)
        at = _positions(start, end, breaks[1:-1])
        fits = [_fitted(function, at) for function in functions]
        least = min(least, fits[0].low.min())
        top, bottom = fits[0].high - least, fits[0].low - least
        heaviest = fits[1].high if callable(mass) else mass
        phase = np.sqrt(2 * unit * heaviest * top) * (end - start)
        good = (phase <= _PHASE) | (bottom * _SLOPE >= top)
        for fit, height in zip(fits, (top, heaviest), strict=False):
            good &= fit.miss <= 0.25 * tolerance * height + fit.rounding
        longest = (above @ good.reshape(-1, left.size) == 0.0).ravel()  # not part of a good one
        taken, failed = longest & good, longest & ~good
        done.append((start[taken], [fit.spectrum[:, taken] for fit in fits]))
        lasting = np.maximum(breaks[-1] - breaks[0], np.minimum(np.abs(start), np.abs(end)))
        short = start[failed & (end - start < _SHORTEST * lasting)]
        failed[: -(left.size << depth)] = False  # but for those whose halves are judged already
        left, right = start[failed], end[failed]
        if short.size or left.size > _MOST_CELLS:
            raise TooRough(_roughness(np.sort(left), np.sort(short), breaks))
        middle = 0.5 * (left + right)
        left, right = np.concatenate([left, middle]), np.concatenate([middle, right])
    start = np.concatenate([d[0] for d in done])
    order = np.argsort(start)
    spectra = (np.concatenate(parts, axis=1) for parts in zip(*(d[1] for d in done), strict=True))
    fields = [trimmed(spectrum[:, order].T @ _TO_POWER) for spectrum in spectra]
    if not callable(mass):  # to the last digit, and without memory of its own
        fields.append(repeated(mass, (start.size, 1)))
    return np.append(start[order], breaks[-1]), fields


def _with_halves(left, right, depth):
    """Begin and end of cells, then of their halves, of their halves ..., shape (parts * cells,);
    and a matrix, shape (parts, parts): 1 where a part of a cell lies in another."""
    share, first, last, above = _halves(depth)
    grid = left + share[:, None] * (right - left)
    grid[-1] = right
    return grid[first].ravel(), grid[last].ravel(), above


@lru_cache
def _halves(depth):
    count = 2**depth
    length = np.repeat(count >> np.arange(depth + 1), 2 ** np.arange(depth + 1))
    first = np.concatenate([np.arange(0, count, step) for step in np.unique(length)[::-1]])
    last = first + length
    inside = (first[:, None] >= first) & (last[:, None] <= last) & (length[:, None] < length)
    return np.arange(count + 1) / count, first, last, inside.astype(float)


def _positions(start, end, breaks):
    """Chebyshev points of each cell, shape (points, cells); at breaks, just beside them."""
    at = start + _POINTS[:, None] * (end - start)
    at[-1] = end
    if breaks.size:
        for row, side in ((0, np.inf), (-1, -np.inf)):
            near = np.isin(at[row], breaks)
            at[row, near] = np.nextafter(at[row, near], side)
    return at


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


class _Fit(NamedTuple):
    """Chebyshev series on cells: coefficients, shape (degree + 1, cells), by how much they miss the
    function, what of it the function's own rounding explains, and the range of its samples."""

    spectrum: np.ndarray
    miss: np.ndarray
    rounding: np.ndarray
    low: np.ndarray
    high: np.ndarray


def _fitted(function, at):
    """The `_Fit` of a function that is asked at `at`, shape (points, cells)."""
    values = np.asarray(function(at.ravel()), dtype=float)
    values = values.reshape(at.shape) if values.ndim else np.full(at.shape, values)
    base = values[0]  # taken away first, so that a constant is met exactly
    spectrum = _TO_CHEBYSHEV @ (values[::2] - base)
    low, high = values.min(axis=0), values.max(axis=0)
    size = np.maximum(np.abs(low), np.abs(high))
    # Trailing coefficients below rounding are noise; dropping them lowers the degree.
    tail = np.maximum.accumulate(np.abs(spectrum[::-1]))[::-1]
    spectrum *= tail > EPS * size
    spectrum[0] += base
    miss = np.abs(_JUDGE @ spectrum - values[1::2]).max(axis=0)
    # x is rounded before the function sees it: |x| eps times the slope, for a function of x - a.
    far = np.maximum(np.abs(at[0]), np.abs(at[-1]))
    slope = (high - low) / np.maximum(at[-1] - at[0], EPS * far)
    return _Fit(spectrum, miss, 4 * EPS * (size + slope * far), low, high)
