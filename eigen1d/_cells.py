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
            guess = start + (end - start) * b.index(min(b)) / (len(b) - 1)
            least = min(least, _bottom(c, start, end, guess))
            continue
        middle, left, right = 0.5 * (start + end), [], []
        while b:
            left.append(b[0])
            right.append(b[-1])
            b = [0.5 * (before + later) for before, later in pairwise(b)]
        least = min(least, left[-1])
        parts += [(start, middle, left), (middle, end, right[::-1])]
    return least


def _bottom(c, start, end, t):
    """The least value between a fall and a rise, by Newton's method for the slope, in bounds."""
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


def least_width(x):
    """Return the width of the narrowest cell, without an array of all widths."""
    return min((x[b.start + 1 : b.stop + 1] - x[b]).min() for b in blocks(x.size - 1))


def merged(x, fields):
    """Join neighbouring cells that carry the same polynomials.

    Parameters
    ----------
    x : ndarray, shape (cells + 1,)
        Breakpoints, ascending.
    fields : list of ndarray, shape (cells, degree + 1)
        V, mass, ...: cells join only where all of them agree to rounding. Its arrays are replaced
        one by one, so that few copies of a long table stand side by side.

    Returns
    -------
    x, fields
        The same function on as few cells.

    Notes
    -----
    A run of cells is joined only if the polynomial through points spread over the whole run (for
    straight lines: the chord) passes within rounding of every cell in it. Comparing neighbours
    alone would let many small bends add up: a finely sampled parabola looks straight from one row
    to the next. A run that fails is left as it was, which is always right. So are all cells where
    fewer than a quarter could be saved; half in a long table, whose copy takes memory.
    """
    count = x.size - 1
    worth = max(count // (2 if count > _BLOCK else 4), 1)
    varied = [k for k, field in enumerate(fields) if field.strides[0]]  # one number always goes on
    same = np.ones(count - 1, dtype=bool)
    for find in (_may_go_on, _go_on):
        for block in blocks(count - 1):
            ends, cells = slice(block.start, block.stop + 2), slice(block.start, block.stop + 1)
            for k in varied:
                find(x[ends], fields[k][cells], same[block])
        if np.count_nonzero(same) < worth:
            return x, fields
    # Runs of more than one cell, by the first and the last cell of each.
    runs = np.flatnonzero(np.diff(same, prepend=False, append=False)).reshape(-1, 2)
    good = [_hold(x, [fields[k] for k in varied], *runs[part].T) for part in blocks(len(runs))]
    runs = runs[np.concatenate(good)]
    first, last = runs.T
    saved = last - first
    if saved.sum() < worth:
        return x, fields
    change = np.zeros(count + 1, dtype=np.int8)
    change[first + 1] = 1
    change[last + 1] -= 1
    kept = np.cumsum(change[:-1], out=change[:-1]) == 0
    place = first - np.cumsum(saved) + saved  # of the joined cells among those kept
    for k, field in enumerate(fields):
        joined = field[kept] if k in varied else field[: count - saved.sum()]
        for part in blocks(first.size if k in varied else 0):
            joined[place[part]] = _through_runs(x, field, first[part], last[part])
        fields[k] = joined
    return x[np.append(kept, True)], fields


def _may_go_on(x, field, same):
    """Clear `same` where a cell cannot continue the one before: most pairs, at little cost.

    A jump, or what a change of the highest derivative does in the shorter cell, must be within the
    rounding that `_go_on` allows, as far as the largest of all coefficients tell.
    """
    degree = field.shape[1] - 1
    rounding = field.shape[1] * np.abs(field).max()
    if degree:
        width = x[1:] - x[:-1]
        rounding += np.abs(field[:, 1]).max() * max(-x[0], x[-1]) / width.min()
        highest = field[:, -1] / width**degree
        bend = (highest[1:] - highest[:-1]) * np.minimum(width[1:], width[:-1]) ** degree
        same &= np.abs(bend) <= 20 * EPS * rounding
        if not same.any():
            return
    jump = field[1:, 0] - evaluated(field[:-1], 1.0)
    same &= np.abs(jump) <= 20 * EPS * rounding


def _go_on(x, field, same):
    """Clear `same` where a cell does not continue the polynomial of the one before."""
    pair = np.flatnonzero(same)
    before, after = field[pair], field[pair + 1]
    start, middle, end = x[pair], x[pair + 1], x[pair + 2]
    scale = np.maximum(_size(start, middle, before), _size(middle, end, after))
    close = np.abs(evaluated(before, 1.0) - after[:, 0]) <= 8 * EPS * scale
    if field.shape[1] > 1:
        # The longer cell is carried on to the shorter one; the other way would magnify rounding.
        left, right = middle - start, end - middle
        forward = left >= right
        base = np.where(forward[:, None], before, after)
        offset = np.where(forward, 1.0, -left / right)
        ratio = np.where(forward, right / left, left / right)
        target = np.where(forward[:, None], after, before)
        miss = _largest(reexpanded(base, offset, ratio) - target)
        close &= miss <= 16 * EPS * scale
    same[pair] = close


def _size(start, end, field):
    """What rounding is relative to: the values of each cell, and those of its slope times x."""
    size = evaluated(np.abs(field), 1.0)
    if field.shape[1] > 1:
        size += np.abs(field[:, 1]) * np.maximum(np.abs(start), np.abs(end)) / (end - start)
    return size


def _largest(coefficients):
    """The largest of each cell's coefficients; along so short an axis np.max takes ten times it."""
    largest = np.abs(coefficients[:, 0])
    for j in range(1, coefficients.shape[1]):
        np.maximum(largest, np.abs(coefficients[:, j]), out=largest)
    return largest


def _hold(x, fields, first, last):
    """Whether one polynomial stands for all cells of each run, from `first` to `last`."""
    start, end = x[first], x[last + 1]
    joined = [_through_runs(x, field, first, last) for field in fields]
    size = [_size(start, end, candidate) for candidate in joined]
    good = np.ones(first.size, dtype=bool)
    stop = np.cumsum(last - first + 1)
    for block in blocks(stop[-1]):
        step = np.arange(block.start, block.stop)
        run = np.searchsorted(stop, step, side="right")
        cell = step + (last + 1 - stop)[run]
        length = (end - start)[run]
        offset, ratio = (x[cell] - start[run]) / length, (x[cell + 1] - x[cell]) / length
        for field, candidate, rounding in zip(fields, joined, size, strict=True):
            miss = _largest(reexpanded(candidate[run], offset, ratio) - field[cell])
            good[run[miss > 8 * EPS * rounding[run]]] = False
        if not good.any():
            break
    return good


# Powers 1, 2, ... of t that rise by one from t = 0 to 1/n, 2/n, ... 1, and by none to the others.
_THROUGH = {
    1: [[1.0]],
    2: [[4.0, -4.0], [-1.0, 2.0]],
    3: [[9.0, -22.5, 13.5], [-4.5, 18.0, -13.5], [1.0, -4.5, 4.5]],
}


def _through_runs(x, field, first, last):
    """The polynomial through degree + 1 equally spaced points of each run of cells."""
    degree = field.shape[1] - 1
    out = np.empty((first.size, degree + 1))
    out[:, 0] = field[first, 0]
    if degree:
        for k in range(1, degree):
            at = x[first] + k / degree * (x[last + 1] - x[first])
            cell = np.searchsorted(x, at, side="right") - 1
            out[:, k] = evaluated(field[cell], (at - x[cell]) / (x[cell + 1] - x[cell]))
        out[:, degree] = evaluated(field[last], 1.0)
        out[:, 1:] = (out[:, 1:] - out[:, :1]) @ _THROUGH[degree]
    return out


def padded(fields):
    """Return the arrays with zero columns added, so that all have the highest degree."""
    width = max(f.shape[1] for f in fields)
    return [np.pad(f, ((0, 0), (0, width - f.shape[1]))) for f in fields]


def scaled(coefficients, factor):
    """Return the cells times a number; one number for all cells stays one number."""
    if coefficients.strides[0] == 0:
        return repeated(coefficients[0, 0] * factor, coefficients.shape)
    return coefficients * factor


def product(a, b):
    """Return the coefficients of the product of two polynomials, cell by cell."""
    out = np.zeros((a.shape[0], a.shape[1] + b.shape[1] - 1))
    for j in range(b.shape[1]):
        out[:, j : j + a.shape[1]] += a * b[:, j : j + 1]
    return out


def graded(start, end):
    """Return cells that run straight from `start` to `end`, shape (cells,); constant if equal."""
    if start is end or np.array_equal(start, end):
        return start[:, None]
    return np.column_stack([start, end - start])


def from_ppoly(function, x):
    """Return the coefficients of a PPoly on cells with ends `x`, which refine its own."""
    if x is function.x:
        piece = slice(None)
    else:
        piece = np.searchsorted(function.x, x[:-1], side="right") - 1
        piece = np.clip(piece, 0, function.c.shape[1] - 1)
    width = np.diff(function.x)[piece]
    power = np.arange(function.c.shape[0])[:, None]
    own = np.ascontiguousarray((function.c[::-1, piece] * width**power).T, dtype=float)
    if x is function.x:
        return own
    return reexpanded(own, (x[:-1] - function.x[:-1][piece]) / width, np.diff(x) / width)
