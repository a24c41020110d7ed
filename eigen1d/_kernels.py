"""Compiled kernels of the shooting solver. They know arrays only, in units with hbar = 1.

On a cell of width h, with t in [0, 1]:  psi' = m phi,  phi' = 2 (V - E) psi.  phi = psi'/m is what
stays continuous where the mass jumps. V and m are polynomials in t, the mass also linear in E:
m = mass + E * mass_per_energy. A cell is crossed in one of two ways:

series    Power series of the solution by a two-term recurrence. Cells are cut so that
          2 m |V - E| h^2 <= LARGEST: some 20 terms reach rounding, and psi has at most one zero.
constant  cos/sin or tanh, for cells of constant V and m of any width, which no table of layers
          should pay for by subdivision.

The chain over cells is serial, so trial energies run side by side as lanes of the inner loops.
Sweeping to the left is sweeping to the right through the mirror image, where phi changes sign.
"""

import numpy as np
from numba import types

from ._compiled import CELLS, EDGE, EPS, FLOATS, INTEGERS, LANES, LARGEST, kernel
from ._straight import graded as _graded
from ._straight import straight as _straight

_TERMS = 96  # most terms of a series; a cell that asks for more is cut further
_DEGREE = 32  # most coefficients of a polynomial
_BIG, _SMALL = 2.0**300, 2.0**-300  # amplitudes are kept between these
_LOG_BIG = 300 * np.log(2.0)
_AGE = 16  # steps between two looks at amplitudes: far from enough to leave the range of doubles
_MOST_PARTS = 1 << 20  # of a cell


@kernel
def _polynomial(coefficients, cell, backward, start, ratio, out):
    """Write the coefficients of p(start + ratio t) into `out` and return how many there are.

    With `backward` t counts from the cell's right end to its left. Horner's scheme, shifted.
    """
    size = coefficients.shape[1]
    while size > 1 and coefficients[cell, size - 1] == 0.0:
        size -= 1
    for j in range(size):
        out[j] = coefficients[cell, j]
    if size == 1:
        return size
    offset, scale = (1.0 - start, -ratio) if backward else (start, ratio)
    if offset != 0.0:
        for k in range(size - 1):
            for j in range(size - 2, k - 1, -1):
                out[j] += offset * out[j + 1]
    power = 1.0
    for j in range(1, size):
        power *= scale
        out[j] *= power
    return size


@kernel
def _sum_abs(c, first, size):
    total = 0.0
    for j in range(first, size):
        total += abs(c[j])
    return total


@kernel
def _terms(w, mass, zeta, w_size, m_size, majorant):
    """How many terms of the series are needed, from a majorant of its coefficients.

    `w` and `mass` hold absolute values, already multiplied by h. The state starts as (1, eta) with
    eta such that both equations have the same rate zeta = sqrt(2 m |V - E|) h. Terms are dropped
    when they are below rounding relative to the first one, so that what is lost in a million small
    cells stays below rounding too. Returns _TERMS if that many do not suffice.
    """
    m_total, w_total = _sum_abs(mass, 0, m_size), _sum_abs(w, 0, w_size)
    eta = np.sqrt(w_total / m_total) if w_total > 0.0 else 0.0
    majorant[0, 0] = 1.0
    majorant[1, 0] = eta
    target = 0.03 * EPS * zeta
    quiet = 0
    for k in range(_TERMS - 1):
        psi = 0.0
        for j in range(min(k + 1, m_size)):
            psi += mass[j] * majorant[1, k - j]
        phi = 0.0
        for j in range(min(k + 1, w_size)):
            phi += w[j] * majorant[0, k - j]
        majorant[0, k + 1] = psi / (k + 1)
        majorant[1, k + 1] = phi / (k + 1)
        small = majorant[0, k + 1] <= target and majorant[1, k + 1] <= target * eta
        quiet = quiet + 1 if small else 0
        if quiet > max(m_size, w_size):
            return max(k + 1 - quiet + 1, 1)
    return _TERMS


@kernel
def _add(value, carry, lane, increment):
    """Compensated sum (two-sum of D. E. Knuth, TAOCP 2, sec. 4.2.2): value + carry gain increment.

    A cell of a fine table changes psi by little; adding that plainly would cost half an ulp of psi
    a cell, which a table of 10^7 rows turns into 1e-13 of the energy or worse.
    """
    before = value[lane]
    increment += carry[lane]
    after = before + increment
    part = after - before
    carry[lane] = (before - (after - part)) + (increment - part)
    value[lane] = after


@kernel
def _series(a, b, w, mass, lanes, terms, w_size, m_size):
    """Fill the power series psi = sum a_k t^k, phi = sum b_k t^k for all lanes.

    Shapes: a, b (terms + 1, LANES) with row 0 given; w, mass (size, LANES), multiplied by h.
    """
    for k in range(terms):
        inverse = 1.0 / (k + 1)
        for lane in range(lanes):
            a[k + 1, lane] = mass[0, lane] * b[k, lane]
            b[k + 1, lane] = w[0, lane] * a[k, lane]
        for j in range(1, min(k + 1, m_size)):
            for lane in range(lanes):
                a[k + 1, lane] += mass[j, lane] * b[k - j, lane]
        for j in range(1, min(k + 1, w_size)):
            for lane in range(lanes):
                b[k + 1, lane] += w[j, lane] * a[k - j, lane]
        for lane in range(lanes):
            a[k + 1, lane] *= inverse
            b[k + 1, lane] *= inverse


@kernel
def is_positive(psi, phi):
    """Sign of psi just beyond the point: at a zero, that of its slope."""
    return psi > 0.0 or (psi == 0.0 and phi > 0.0)


@kernel
def _constant(v, mass, h, psi, phi):
    """Cross a cell of constant V - E = v and mass.

    Returns
    -------
    psi, phi : float
        At the far end, divided by exp(log) where the solution grows.
    zeros : int
        Of psi in the cell, its far end included.
    log : float
    """
    z = 2.0 * mass * v * h * h
    if z < 0.0:
        k = np.sqrt(-z)
        c, s = np.cos(k), np.sin(k) / k
        out_psi = c * psi + s * mass * h * phi
        out_phi = c * phi + s * 2.0 * v * h * psi
        # Pruefer angle from the first to the last point, in half turns. Its parity is taken from
        # the signs at both ends, which the caller and the next cell see too: a zero that rounding
        # puts on either side of the joint is then counted once, not twice or never.
        angle = np.arctan2(psi, phi * mass * h / k) / np.pi
        angle -= np.floor(angle)
        turns = angle + k / np.pi
        odd = 1 if is_positive(psi, phi) != is_positive(out_psi, out_phi) else 0
        zeros = odd + 2 * int(np.round(0.5 * (turns - 0.5 - odd)))
        return out_psi, out_phi, max(zeros, odd), 0.0
    if z == 0.0:
        out_psi, out_phi, log = psi + mass * h * phi, phi, 0.0
    else:
        # In the growing and the decaying solution, not by cosh and sinh: where a state decays into
        # a barrier and grows out of it again, those round psi and phi apart by eps * exp(2 k).
        k = np.sqrt(z)
        slope = k / (mass * h)
        grows, decays = 0.5 * (psi + phi / slope), 0.5 * (psi - phi / slope)
        decays *= np.exp(-2.0 * k)
        out_psi, out_phi, log = grows + decays, slope * (grows - decays), k
    zeros = 1 if is_positive(psi, phi) != is_positive(out_psi, out_phi) else 0
    return out_psi, out_phi, zeros, log


@kernel
def _start(edge, energy):
    """psi and phi at an edge, for the solution that is right there, growing inwards.

    `edge` is (is open, V, mass, mass_per_energy). Open: phi/psi = kappa/m. Wall: psi = 0.
    """
    if edge[0] == 0.0:
        return 0.0, 1.0
    mass = edge[2] + energy * edge[3]
    return 1.0, np.sqrt(2.0 * max(edge[1] - energy, 0.0) / mass)


@kernel
def _rescale(p, f, p_carry, f_carry, log, lanes):
    for lane in range(lanes):
        size = abs(p[lane]) + abs(f[lane])
        factor = 1.0
        if size > _BIG:
            factor = _SMALL
            log[lane] += _LOG_BIG
        elif size < _SMALL:
            factor = _BIG
            log[lane] -= _LOG_BIG
        if factor != 1.0:
            p[lane] *= factor
            f[lane] *= factor
            p_carry[lane] *= factor
            f_carry[lane] *= factor


@kernel
def _load(w_cell, m_cell, q_cell, w_size, m_size, q_size, energies, low, high, h, w, m, majorant):
    """Spread a cell's polynomials over the lanes, multiplied by h; return the terms needed."""
    lanes = energies.size
    sizes = max(m_size, q_size)
    for j in range(sizes):
        shared = m_cell[j] * h if j < m_size else 0.0
        own = q_cell[j] * h if j < q_size else 0.0
        for lane in range(lanes):
            m[j, lane] = shared + own * energies[lane]
        m_cell[j] = abs(shared) + abs(own) * max(abs(low), abs(high))
    for lane in range(lanes):
        w[0, lane] = 2.0 * h * (w_cell[0] - energies[lane])
    w_cell[0] = 2.0 * h * max(abs(w_cell[0] - low), abs(w_cell[0] - high))
    for j in range(1, w_size):
        shared = 2.0 * h * w_cell[j]
        for lane in range(lanes):
            w[j, lane] = shared
        w_cell[j] = abs(shared)
    zeta = np.sqrt(_sum_abs(m_cell, 0, sizes) * _sum_abs(w_cell, 0, w_size))
    return _terms(w_cell, m_cell, zeta, w_size, sizes, majorant)


@kernel
def _scratch():
    return (
        np.empty((_TERMS + 1, LANES)),
        np.empty((_TERMS + 1, LANES)),
        np.empty((_DEGREE, LANES)),
        np.empty((_DEGREE, LANES)),
        np.empty(_DEGREE),
        np.empty(_DEGREE),
        np.empty(_DEGREE),
        np.empty((2, _TERMS + 1)),
    )


@kernel
def _cross(
    V, mass, per_energy, cell, h, backward, fraction, energies, low, high,
    p, f, p_carry, f_carry, log, count, scratch,
):  # fmt: skip
    """Carry the state of all lanes across the first `fraction` of a cell of width h.

    Shapes: p, f (psi and phi), p_carry, f_carry, log, count and energies (lanes,); low and high are
    the ends of the energies. Returns about how many powers of 10 amplitudes may have grown by.
    """
    a, b, w, m, w_cell, m_cell, q_cell, majorant = scratch
    lanes = energies.size
    w_size = _polynomial(V, cell, backward, 0.0, fraction, w_cell)
    m_size = _polynomial(mass, cell, backward, 0.0, fraction, m_cell)
    q_size = 0
    if per_energy.shape[1] > 0:
        q_size = _polynomial(per_energy, cell, backward, 0.0, fraction, q_cell)
    h *= fraction
    reach = max(abs(w_cell[0] - low), abs(w_cell[0] - high)) + _sum_abs(w_cell, 1, w_size)
    weight = _sum_abs(m_cell, 0, m_size)
    if q_size > 0:
        weight += max(abs(low), abs(high)) * _sum_abs(q_cell, 0, q_size)
    size = 2.0 * weight * reach * h * h
    if size > LARGEST and w_size == 1 and m_size == 1 and q_size <= 1:
        for lane in range(lanes):
            m_lane = m_cell[0] + (energies[lane] * q_cell[0] if q_size else 0.0)
            p[lane], f[lane], crossed, grown = _constant(
                w_cell[0] - energies[lane], m_lane, h, p[lane], f[lane]
            )
            p_carry[lane], f_carry[lane] = 0.0, 0.0
            count[lane] += crossed
            log[lane] += grown
        return 8
    parts = max(int(np.ceil(np.sqrt(size / LARGEST))), 1)
    part, age = 0, 0
    while part < parts:
        if parts > 1:
            start, ratio = fraction * part / parts, fraction / parts
            w_size = _polynomial(V, cell, backward, start, ratio, w_cell)
            m_size = _polynomial(mass, cell, backward, start, ratio, m_cell)
            if q_size > 0:
                q_size = _polynomial(per_energy, cell, backward, start, ratio, q_cell)
        terms = _load(
            w_cell, m_cell, q_cell, w_size, m_size, q_size, energies, low, high, h / parts,
            w, m, majorant,
        )  # fmt: skip
        if terms >= _TERMS and parts < _MOST_PARTS:
            parts, part = 2 * parts, 2 * part  # a wilder polynomial than `size` could tell
            continue
        for lane in range(lanes):
            a[0, lane], b[0, lane] = p[lane], f[lane]
        _series(a, b, w, m, lanes, terms, w_size, max(m_size, q_size))
        for lane in range(lanes):
            before = is_positive(p[lane], f[lane])
            gain_p, gain_f = a[terms, lane], b[terms, lane]
            for k in range(terms - 1, 0, -1):
                gain_p += a[k, lane]
                gain_f += b[k, lane]
            _add(p, p_carry, lane, gain_p)
            _add(f, f_carry, lane, gain_f)
            if is_positive(p[lane], f[lane]) != before:
                count[lane] += 1
        part += 1
        age += 1
        if age >= _AGE:
            _rescale(p, f, p_carry, f_carry, log, lanes)
            age = 0
    return age


@kernel
def _shape(V, mass, per_energy):
    """0: all cells have straight V and constant mass; 1: V and mass are straight; 2: neither."""
    if V.shape[1] > 2 or mass.shape[1] > 2 or per_energy.shape[1] > 2:
        return 2
    return 0 if mass.shape[1] == 1 and per_energy.shape[1] == 0 else 1


@kernel
def _line(coefficients, cell, backward, fraction):
    """Value and slope of a straight line over the first `fraction` of a cell."""
    size = coefficients.shape[1]
    value = coefficients[cell, 0] if size > 0 else 0.0
    slope = coefficients[cell, 1] if size > 1 else 0.0
    if backward:
        value, slope = value + slope, -slope
    return value, slope * fraction


@kernel
def _advance(
    V, mass, per_energy, shape, cell, h, backward, fraction, state, lanes, low, high, log, scratch
):
    """Carry `state` (see `_straight`) across part of a cell in the cheapest way that is exact.

    Returns about how many steps amplitudes may have grown by.
    """
    if shape < 2:
        v, slope = _line(V, cell, backward, fraction)
        m, m_slope = _line(mass, cell, backward, fraction)
        if shape == 0:
            if _straight(state, v, slope, m, h * fraction, low, high):
                return 1
        else:
            q, q_slope = _line(per_energy, cell, backward, fraction)
            if _graded(state, v, slope, m, m_slope, q, q_slope, h * fraction, low, high):
                return 1
    energies = state[5 * LANES : 5 * LANES + lanes]
    return _cross(
        V, mass, per_energy, cell, h, backward, fraction, energies, low, high,
        state[:lanes], state[LANES : LANES + lanes], state[2 * LANES : 2 * LANES + lanes],
        state[3 * LANES : 3 * LANES + lanes], log[:lanes], state[4 * LANES : 4 * LANES + lanes],
        scratch,
    )  # fmt: skip


@kernel(
    signature=types.void(
        CELLS,
        EDGE,
        types.boolean,
        FLOATS,
        INTEGERS,
        FLOATS,
        FLOATS,
        INTEGERS,
        types.float64[:, :, ::1],
        types.int64,
    )
)
def sweep(cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride):
    """Shoot from one edge to the nodes `stop`, for up to LANES energies at once.

    Parameters
    ----------
    cells : (width, V, mass, mass_per_energy)
        Shapes (cells,) and (cells, degree + 1).
    edge : ndarray, shape (4,)
        Where the sweep starts, see `_start`.
    backward : bool
        From the right edge to the left; phi then has the mirror image's sign.
    energies : ndarray, shape (lanes,)
    stop : ndarray of int64, shape (lanes,)
        Node (0 to cells) at which each lane's result is taken.
    psi, phi : ndarray, shape (lanes,)
        Result: the solution at `stop`, to a positive factor.
    zeros : ndarray of int64, shape (lanes,)
        Result: zeros of psi between the edge and `stop`, that node included.
    trail : ndarray, shape (samples, 3, lanes)
        Result: psi, phi and the logarithm of their common factor at the nodes 0, stride, 2 stride,
        ... that the sweep reaches; no samples, no record.
    """
    width, V, mass, per_energy = cells
    lanes = energies.size
    # Full lanes for `_straight`, whose loops have a fixed length; the used ones for the rest.
    state = np.zeros(6 * LANES)
    state[5 * LANES :] = energies[0]
    state[5 * LANES : 5 * LANES + lanes] = energies
    p, f = state[:lanes], state[LANES : LANES + lanes]
    p_carry, f_carry = state[2 * LANES : 2 * LANES + lanes], state[3 * LANES : 3 * LANES + lanes]
    count, log = state[4 * LANES : 4 * LANES + lanes], np.zeros(lanes)
    scratch = _scratch()
    shape = _shape(V, mass, per_energy)
    low, high = energies.min(), energies.max()
    for lane in range(lanes):
        p[lane], f[lane] = _start(edge, energies[lane])
    node = width.size if backward else 0
    last = stop.min() if backward else stop.max()
    age = 0  # steps since amplitudes were last brought into range
    while True:
        if trail.shape[0] > 0 and node % stride == 0:
            for lane in range(lanes):
                trail[node // stride, 0, lane] = p[lane]
                trail[node // stride, 1, lane] = f[lane]
                trail[node // stride, 2, lane] = log[lane]
        for lane in range(lanes):
            if stop[lane] == node:
                psi[lane], phi[lane], zeros[lane] = p[lane], f[lane], int(count[lane])
        if node == last:
            return
        cell = node - 1 if backward else node
        age += _advance(
            V, mass, per_energy, shape, cell, width[cell], backward, 1.0,
            state, lanes, low, high, log, scratch,
        )  # fmt: skip
        if age >= _AGE:
            _rescale(p, f, p_carry, f_carry, log, lanes)
            age = 0
        node += -1 if backward else 1


@kernel(
    signature=types.void(
        CELLS,
        FLOATS,
        types.float64[:, ::1],
        types.float64[:, ::1],
        INTEGERS,
        FLOATS,
        INTEGERS,
        types.float64[:, ::1],
        types.float64[:, ::1],
    )
)
def along(cells, energies, start_psi, start_phi, cell, fraction, backward, psi, phi):
    """Evaluate wave functions inside cells, from the node on the side where they grow inwards.

    Parameters
    ----------
    energies : ndarray, shape (levels,)
    start_psi, start_phi : ndarray, shape (levels, cells + 1)
        At the nodes.
    cell : ndarray of int64, shape (points,)
    fraction : ndarray, shape (points,)
        0 to 1 across the cell.
    backward : ndarray of int64, shape (levels,)
        From this cell on, a level is evaluated from the right.
    psi, phi : ndarray, shape (levels, points)
        Result.
    """
    if energies.size == 0:
        return
    width, V, mass, per_energy = cells
    shape = _shape(V, mass, per_energy)
    scratch = _scratch()
    low, high = energies.min(), energies.max()
    state, log, level_of = np.zeros(6 * LANES), np.zeros(LANES), np.empty(LANES, np.int64)
    for point in range(cell.size):
        c = cell[point]
        for side in range(2):
            part = fraction[point] if side == 0 else 1.0 - fraction[point]
            sign = 1.0 if side == 0 else -1.0
            level = 0
            while level < energies.size:
                lanes = 0
                while level < energies.size and lanes < LANES:
                    if (c >= backward[level]) == (side == 1):
                        level_of[lanes] = level
                        state[lanes] = start_psi[level, c + side]
                        state[LANES + lanes] = sign * start_phi[level, c + side]
                        state[5 * LANES + lanes] = energies[level]
                        lanes += 1
                    level += 1
                if lanes == 0:
                    continue
                state[2 * LANES : 4 * LANES] = 0.0
                _advance(
                    V, mass, per_energy, shape, c, width[c], side == 1, part,
                    state, lanes, low, high, log, scratch,
                )  # fmt: skip
                for lane in range(lanes):
                    grown = 1.0
                    if log[lane] != 0.0:
                        grown, log[lane] = np.exp(log[lane]), 0.0
                    psi[level_of[lane], point] = state[lane] * grown
                    phi[level_of[lane], point] = sign * state[LANES + lane] * grown
