"""Arithmetic of piecewise polynomials: plain arrays in, plain arrays out.

A cell polynomial is a row of power coefficients c[0], c[1], ... in t, where t runs from 0 at the
cell's left end to 1 at its right end. All functions work on many cells at once.
"""

import math
from functools import lru_cache
from itertools import pairwise

import numpy as np

EPS = np.finfo(float).eps

_BLOCK = 1 << 16


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

    No value is below the least of a cell's Bernstein coefficients, the first and last of which are
    its ends: only cells with one that is lower than all ends are looked into.
    """
    cells = distinct(coefficients)
    degree = cells.shape[1] - 1
    if degree == 0:
        return float(cells.min())
    least = np.inf
    for block in blocks(cells.shape[0]):
        bernstein = _to_bernstein(degree).T @ cells[block].T
        least = min(least, float(bernstein[::degree].min()))
        if degree == 1:
            continue
        bound = bernstein.min(axis=0)
        low = np.flatnonzero(bound < least)
        for row in low[np.argsort(bound[low])]:
            if bound[row] < least:
                inside = _least_inside(cells[block][row].tolist(), bernstein[:, row].tolist())
                least = min(least, inside)
    return least


@lru_cache
def _to_bernstein(degree):
    """The matrix from powers of t to Bernstein polynomials: t^k = sum_i C(i,k) / C(n,k) B_i."""
    size = range(degree + 1)
    return np.array([[math.comb(i, k) / math.comb(degree, k) for i in size] for k in size])


def _least_inside(c, bernstein):
    """The least value of one polynomial, given as both kinds of coefficients, plain floats.

    A cell is halved by de Casteljau's scheme until the Bernstein coefficients of a part fall and
    then rise: the slope has one zero there. A part that cannot hold less than was found is left.
    """
    rounding = EPS * sum(map(abs, c))
    least = min(bernstein[0], bernstein[-1])
    parts = [(0.0, 1.0, bernstein)]
    while parts:
        start, end, b = parts.pop()
        if min(b) >= least - rounding:
            continue
        falls = [later < before for before, later in pairwise(b)]
        if falls == sorted(falls, reverse=True):
            least = min(least, _bottom(c, start, end))
            continue
        middle, left, right = 0.5 * (start + end), [], []
        while b:
            left.append(b[0])
            right.append(b[-1])
            b = [0.5 * (before + later) for before, later in pairwise(b)]
        least = min(least, left[-1])
        parts += [(start, middle, left), (middle, end, right[::-1])]
    return least


def _bottom(c, start, end):
    """The least value between a fall and a rise, by Newton's method for the slope, in bounds."""
    t = 0.5 * (start + end)
    least = np.inf
    while True:
        value, slope, half_bend = c[-1], 0.0, 0.0
        for coefficient in c[-2::-1]:
            half_bend = half_bend * t + slope
            slope = slope * t + value
            value = value * t + coefficient
        least = min(least, value)
        start, end = (t, end) if slope < 0.0 else (start, t)
        move = -0.5 * slope / half_bend if half_bend > 0.0 else np.inf
        if not start <= t + move <= end:
            move = 0.5 * (start + end) - t
        if abs(move) <= 1e-9:  # its square is what the value still changes by
            return least
        t += move


def distinct(cells):
    """Return the cells, or one of them if they are one number for all."""
    return cells[:1] if cells.strides[0] == 0 else cells


def blocks(count):
    """Slices that cover so many cells, short enough for temporary arrays to stay in the cache."""
    return (slice(i, min(i + _BLOCK, count)) for i in range(0, count, _BLOCK))


def repeated(value, shape):
    """Return an array that is one number everywhere, with no memory of its own.

    As np.broadcast_to, at a tenth of its time.
    """
    one = np.array(value, dtype=float)
    one.flags.writeable = False
    return np.ndarray(shape, float, one, 0, (0,) * len(shape))


def trimmed(cells):
    """Return the cells without powers that none of them has."""
    used = cells.shape[1]
    while used > 1 and not cells[:, used - 1].any():
        used -= 1
    return cells if used == cells.shape[1] else np.ascontiguousarray(cells[:, :used])


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
