"""What a sweep must know of each cell beforehand: cells cut short enough, and terms for each.

A cell is crossed by the power series of the solution, which needs 2 m |V - E| h^2 <= LARGEST: then
psi has at most one zero in it, and some 20 terms reach rounding. Only flat cells are crossed in
closed form, at any width. Both depend on the energies that will be tried; everything here is done
once, for the lowest and the highest of them, and not in the sweeps.
"""

import numpy as np
from numba import types

from ._compiled import (
    COUNTS,
    EPS,
    FLAT,
    FLOATS,
    GRADED_TERMS,
    INTEGERS,
    LARGEST,
    SERIES_TERMS,
    STRAIGHT_TERMS,
    TOO_LONG,
    given,
    kernel,
)

_FINEST = 2.0**-26  # of a cell: halves of halves stay exact in the products of `_part`
# Terms are dropped below this part of what a cell changes psi and phi by, so that what is lost in
# a million cells stays below rounding too.
_LOST = 0.03 * EPS
_TABLES = types.Tuple((FLOATS, *[types.float64[:, ::1]] * 6))


@kernel
def shape(V, mass, per_energy):
    """0: all cells have straight V and constant mass; 1: V and mass are straight; 2: neither."""
    if V.shape[1] > 2 or mass.shape[1] > 2 or per_energy.shape[1] > 2:
        return 2
    return 0 if mass.shape[1] == 1 and per_energy.shape[1] == 0 else 1


@kernel
def _size(c, first):
    total = 0.0
    for j in range(first, c.size):
        total += abs(c[j])
    return total


@kernel
def _straight_terms(size, slope):
    """Terms of a_(k+2) = (z a_k + s a_(k-1)) / ((k+1) (k+2)) by a majorant that starts from
    (1, zeta): as many until three in a row, the reach of the recurrence, are negligible."""
    target = _LOST * np.sqrt(size)
    before, a, b = 0.0, 1.0, np.sqrt(size)
    terms, quiet = 0, 0
    while quiet < 3:
        if terms >= STRAIGHT_TERMS + 3:
            return TOO_LONG
        before, a, b = (
            a, b, ((size - slope) * a + slope * before) / ((terms + 1.0) * (terms + 2.0))
        )  # fmt: skip
        terms += 1
        quiet = quiet + 1 if (terms + 1.0) * b <= target else 0
    return terms - quiet


@kernel
def _series_terms(V, mass, per_energy, h, low, high, majorant, most):
    """Terms of psi' = m phi, phi' = 2 (V - E) psi by a majorant of both series.

    It starts as (1, eta), with eta such that both equations have the rate sqrt(2 m |V - E|) h.
    """
    far = max(abs(low), abs(high))
    m_total = h * (_size(mass, 0) + far * _size(per_energy, 0))
    w_total = 2.0 * h * (max(abs(V[0] - low), abs(V[0] - high)) + _size(V, 1))
    zeta = np.sqrt(m_total * w_total)
    eta = np.sqrt(w_total / m_total) if w_total > 0.0 else 0.0
    majorant[0, 0] = 1.0
    majorant[1, 0] = eta
    reach = max(V.size, mass.size, per_energy.size)
    quiet = 0
    for k in range(most + reach):
        psi, phi = 0.0, 0.0
        for j in range(min(k + 1, mass.size)):
            psi += h * abs(mass[j]) * majorant[1, k - j]
        for j in range(min(k + 1, per_energy.size)):
            psi += h * far * abs(per_energy[j]) * majorant[1, k - j]
        phi = 2.0 * h * max(abs(V[0] - low), abs(V[0] - high)) * majorant[0, k]
        for j in range(1, min(k + 1, V.size)):
            phi += 2.0 * h * abs(V[j]) * majorant[0, k - j]
        majorant[0, k + 1] = psi / (k + 1)
        majorant[1, k + 1] = phi / (k + 1)
        small = psi <= _LOST * zeta * (k + 1) and phi <= _LOST * zeta * eta * (k + 1)
        quiet = quiet + 1 if small else 0
        if quiet > reach:
            return max(k + 1 - quiet, 1)
    return TOO_LONG


@kernel
def _terms(kind, V, mass, per_energy, h, low, high, majorant):
    """How many terms a cell of this `shape` needs; FLAT: closed form; TOO_LONG: to be cut."""
    far = max(abs(low), abs(high))
    slope = _size(V, 1)
    reach = max(abs(V[0] - low), abs(V[0] - high)) + slope
    size = 2.0 * (_size(mass, 0) + far * _size(per_energy, 0)) * reach * h * h
    if size > LARGEST:
        flat = slope == 0.0 and _size(mass, 1) == 0.0 and _size(per_energy, 1) == 0.0
        return FLAT if flat else TOO_LONG
    if kind == 0:
        return max(_straight_terms(size, size * slope / reach if reach > 0.0 else 0.0), 1)
    most = GRADED_TERMS if kind == 1 else SERIES_TERMS
    return _series_terms(V, mass, per_energy, h, low, high, majorant, most)


@kernel
def _work(V, mass, per_energy):
    columns = max(V.shape[1], mass.shape[1], per_energy.shape[1])
    return np.empty((2, SERIES_TERMS + columns + 2)), np.empty((3, columns)), np.empty((2, columns))


@kernel(
    signature=types.boolean(
        given(1), given(2), given(2), given(2), types.float64, types.float64, COUNTS
    )
)
def plan(width, V, mass, per_energy, low, high, terms):
    """Write the terms that each cell needs at energies from low to high.

    Parameters
    ----------
    width, V, mass, per_energy : ndarray
        Shapes (cells,) and (cells, degree + 1).
    low, high : float
    terms : ndarray of uint8, shape (cells,)
        Result: the number of terms, or FLAT, or TOO_LONG.

    Returns
    -------
    bool
        Whether no cell is too long.
    """
    kind = shape(V, mass, per_energy)
    majorant = _work(V, mass, per_energy)[0]
    short = True
    for cell in range(width.size):
        needed = _terms(
            kind, V[cell], mass[cell], per_energy[cell], width[cell], low, high, majorant
        )
        terms[cell] = needed
        if needed == TOO_LONG:
            short = False
    return short


@kernel
def _part(c, offset, ratio, pairs, out):
    """Write the coefficients of p(offset + ratio t) into `out`.

    Horner's scheme for a Taylor shift, with sums in pairs of doubles. Where power coefficients are
    large and V is small, as at the bottoms of a double well in one cell, plain ones round by more
    than a bracket is wide (test_shooting.py, "sextic-corner").
    """
    size = c.size
    for j in range(size):
        pairs[0, j], pairs[1, j] = c[j], 0.0
    for k in range(size - 1):
        for j in range(size - 2, k - 1, -1):
            # Half of the digits of a coefficient, times the 26 bits of an offset, is exact.
            upper = pairs[0, j + 1] * (2.0**27 + 1)
            upper -= upper - pairs[0, j + 1]
            product = offset * upper
            before = pairs[0, j]
            total = before + product
            part = total - before
            pairs[0, j] = total
            pairs[1, j] += (before - (total - part)) + (product - part)
            pairs[1, j] += offset * ((pairs[0, j + 1] - upper) + pairs[1, j + 1])
    power = 1.0
    for j in range(size):
        out[j] = (pairs[0, j] + pairs[1, j]) * power
        power *= ratio


@kernel
def _trim(c, size):
    """Set to zero what is far below rounding of `size` at the end of a polynomial: parts of a cell
    are so short that its highest powers vanish, and no sweep should pay for them."""
    for j in range(c.size - 1, 0, -1):
        if abs(c[j]) > 2.0**-8 * EPS * size:
            return
        c[j] = 0.0


@kernel
def _longer(array):
    out = np.empty(2 * array.size, array.dtype)
    for i in range(array.size):
        out[i] = array[i]
    return out


@kernel
def _leaves(width, V, mass, per_energy, low, high):
    """Halve cells, and halves again, until each part is short: (owner, offset, ratio, terms)."""
    kind = shape(V, mass, per_energy)
    majorant, row, pairs = _work(V, mass, per_energy)
    room = 2 * width.size + 64
    owner, offset, ratio = np.empty(room, np.int64), np.empty(room), np.empty(room)
    terms = np.empty(room, np.uint8)
    starts, ratios = np.empty(64), np.empty(64)
    count = 0
    for cell in range(width.size):
        starts[0], ratios[0] = 0.0, 1.0
        waiting = 1
        while waiting > 0:
            waiting -= 1
            start, share = starts[waiting], ratios[waiting]
            v = row[0, : V.shape[1]]
            m = row[1, : mass.shape[1]]
            q = row[2, : per_energy.shape[1]]
            _part(V[cell], start, share, pairs, v)
            _part(mass[cell], start, share, pairs, m)
            _part(per_energy[cell], start, share, pairs, q)
            needed = _terms(kind, v, m, q, width[cell] * share, low, high, majorant)
            if needed == TOO_LONG and share > _FINEST:
                starts[waiting], ratios[waiting] = start + 0.5 * share, 0.5 * share
                starts[waiting + 1], ratios[waiting + 1] = start, 0.5 * share
                waiting += 2
                continue
            if count == owner.size:
                owner, offset, ratio = _longer(owner), _longer(offset), _longer(ratio)
                terms = _longer(terms)
            owner[count], offset[count], ratio[count] = cell, start, share
            terms[count] = needed
            count += 1
    return owner[:count], offset[:count], ratio[:count], terms[:count]


@kernel(
    signature=types.Tuple((INTEGERS, FLOATS, COUNTS, _TABLES))(
        given(1), given(2), given(2), given(2), types.float64, types.float64
    )
)
def cut(width, V, mass, per_energy, low, high):
    """Cut cells until each is short, for energies from low to high.

    They are halved and halved again: then their widths and places are exact. From differences of
    positions the widths of a profile far from x = 0 would lose digits (test_shooting.py,
    "far-away-curved").

    Returns
    -------
    owner, offset : ndarray, shape (parts,)
        The cell that each part is of, and where in it, from 0 to 1, the part begins.
    terms : ndarray of uint8, shape (parts,)
        As from `plan`.
    tables : (width, V, mass, per_energy, V, mass, per_energy)
        Of the parts; the polynomials first as seen from the left end, then from the right end.
    """
    owner, offset, ratio, terms = _leaves(width, V, mass, per_energy, low, high)
    count = owner.size
    pairs = _work(V, mass, per_energy)[2]
    widths = np.empty(count)
    V_left, V_right = np.empty((count, V.shape[1])), np.empty((count, V.shape[1]))
    m_left, m_right = np.empty((count, mass.shape[1])), np.empty((count, mass.shape[1]))
    columns = per_energy.shape[1]
    q_left, q_right = np.empty((count, columns)), np.empty((count, columns))
    for i in range(count):
        cell, start, share = owner[i], offset[i], ratio[i]
        widths[i] = width[cell] * share
        _part(V[cell], start, share, pairs, V_left[i])
        _part(V[cell], start + share, -share, pairs, V_right[i])
        _part(mass[cell], start, share, pairs, m_left[i])
        _part(mass[cell], start + share, -share, pairs, m_right[i])
        for c in (V_left[i], V_right[i]):
            _trim(c, max(abs(c[0] - low), abs(c[0] - high)))
        for c in (m_left[i], m_right[i]):
            _trim(c, c[0])
        _part(per_energy[cell], start, share, pairs, q_left[i])
        _part(per_energy[cell], start + share, -share, pairs, q_right[i])
    tables = (widths, V_left, m_left, q_left, V_right, m_right, q_right)
    return owner, offset, terms, tables
