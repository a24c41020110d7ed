"""Compiled kernels of the shooting solver. They know arrays only, in units with hbar = 1.

On a cell of width h, with t in [0, 1]:  psi' = m phi,  phi' = 2 (V - E) psi.  phi = psi'/m is what
stays continuous where the mass jumps. V and m are polynomials in t, the mass also linear in E:
m = mass + E * mass_per_energy. How a cell is crossed was decided beforehand, see `_plan`:

series    Power series of the solution by a two-term recurrence, in short cells.
constant  cos/sin or tanh, for cells of constant V and m of any width, which no table of layers
          should pay for by subdivision.

The chain over cells is serial, so trial energies run side by side as lanes of the inner loops.
Sweeping to the left is sweeping to the right through the mirror image, where phi changes sign.
"""

import numpy as np
from numba import types

from ._compiled import CELLS, EDGE, FLAT, FLOATS, INTEGERS, LANES, SERIES_TERMS, kernel
from ._plan import shape
from ._straight import graded, straight

_BIG, _SMALL = 2.0**300, 2.0**-300  # amplitudes are kept between these
_LOG_BIG = 300 * np.log(2.0)
_AGE = 16  # steps between two looks at amplitudes: far from enough to leave the range of doubles
# Rows of LANES numbers in the scratch of a series, see `_series`.
_A = 2
_B = _A + SERIES_TERMS + 1
_M = _B + SERIES_TERMS + 1


@kernel
def _series(work, w, terms, w_size, m_size):
    """Fill the power series psi = sum a_k t^k, phi = sum b_k t^k for all lanes.

    Rows of LANES numbers in `work`: a from _A and b from _B on, row 0 of each given; the mass from
    _M on and, behind it, the first coefficient of w, multiplied by h; the further ones, in `w`, are
    the same for all lanes. Rows 0 and 1 hold sums. One array and loops of fixed length are what the
    vector unit takes.
    """
    first_w = (_M + m_size) * LANES
    for k in range(terms):
        a, b = (_A + k) * LANES, (_B + k) * LANES
        for lane in range(LANES):
            work[lane] = work[_M * LANES + lane] * work[b + lane]
            work[LANES + lane] = work[first_w + lane] * work[a + lane]
        for j in range(1, min(k + 1, m_size)):
            m, b = (_M + j) * LANES, (_B + k - j) * LANES
            for lane in range(LANES):
                work[lane] += work[m + lane] * work[b + lane]
        for j in range(1, min(k + 1, w_size)):
            c, a = w[j], (_A + k - j) * LANES
            for lane in range(LANES):
                work[LANES + lane] += c * work[a + lane]
        a, b, inverse = (_A + k + 1) * LANES, (_B + k + 1) * LANES, 1.0 / (k + 1)
        for lane in range(LANES):
            work[a + lane] = work[lane] * inverse
            work[b + lane] = work[LANES + lane] * inverse


@kernel
def _add(state, work, terms):
    """Add the series to psi and phi in `state`, and count zeros.

    Compensated (two-sum of D. E. Knuth, TAOCP 2, sec. 4.2.2): a cell of a fine table changes psi by
    little; adding that plainly would cost half an ulp of psi a cell, which a table of 10^7 rows
    turns into 1e-13 of the energy or worse.
    """
    for lane in range(LANES):
        work[lane] = work[(_A + terms) * LANES + lane]
        work[LANES + lane] = work[(_B + terms) * LANES + lane]
    for k in range(terms - 1, 0, -1):
        a, b = (_A + k) * LANES, (_B + k) * LANES
        for lane in range(LANES):
            work[lane] += work[a + lane]
            work[LANES + lane] += work[b + lane]
    for lane in range(LANES):
        p, f = state[lane], state[LANES + lane]
        gain = work[lane] + state[2 * LANES + lane]
        new_p = p + gain
        part = new_p - p
        state[2 * LANES + lane] = (p - (new_p - part)) + (gain - part)
        state[lane] = new_p
        gain = work[LANES + lane] + state[3 * LANES + lane]
        new_f = f + gain
        part = new_f - f
        state[3 * LANES + lane] = (f - (new_f - part)) + (gain - part)
        state[LANES + lane] = new_f
        was = (p > 0.0) | ((p == 0.0) & (f > 0.0))
        now = (new_p > 0.0) | ((new_p == 0.0) & (new_f > 0.0))
        state[4 * LANES + lane] += 1.0 if was != now else 0.0


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
        zeros = odd + 2 * int(np.floor(0.5 * (turns - 0.5 - odd) + 0.5))
        return out_psi, out_phi, max(zeros, odd), 0.0
    if z == 0.0:
        out_psi, out_phi, log = psi + mass * h * phi, phi, 0.0
    else:
        # In the growing and the decaying solution, not by cosh and sinh: where a state decays into
        # a barrier and grows out of it again, those round psi and phi apart by eps * exp(2 k).
        k = np.sqrt(z)
        slope = k / (mass * h)
        grows, decays = 0.5 * (psi + phi / slope), 0.5 * (psi - phi / slope)
        if grows == 0.0:  # at a level to the last digit; what is left must not round to nothing
            out_psi, out_phi, log = decays, -slope * decays, -k
        else:
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
def _rescale(state, log):
    """Bring amplitudes back into range; `log` keeps the logarithm of what was divided out."""
    for lane in range(LANES):
        size = abs(state[lane]) + abs(state[LANES + lane])
        factor = 1.0
        if size > _BIG:
            factor = _SMALL
            log[lane] += _LOG_BIG
        elif size < _SMALL:
            factor = _BIG
            log[lane] -= _LOG_BIG
        if factor != 1.0:
            for row in range(4):  # psi, phi and their carries
                state[row * LANES + lane] *= factor


@kernel
def _scratch(V, mass, per_energy):
    m_size = max(mass.shape[1], per_energy.shape[1])
    return np.zeros((_M + m_size + 1) * LANES), np.empty(V.shape[1])


@kernel
def _used(coefficients, cell):
    """How many coefficients a cell has up to the last that is not zero."""
    size = coefficients.shape[1]
    while size > 1 and coefficients[cell, size - 1] == 0.0:
        size -= 1
    return size


@kernel
def _curved(V, mass, per_energy, cell, h, fraction, terms, state, scratch):
    """Cross the first `fraction` of a cell of any polynomials by the general series."""
    work, w = scratch
    w_size, m_size = _used(V, cell), max(_used(mass, cell), _used(per_energy, cell))
    power = h * fraction
    for j in range(m_size):
        shared = power * mass[cell, j] if j < mass.shape[1] else 0.0
        own = power * per_energy[cell, j] if j < per_energy.shape[1] else 0.0
        for lane in range(LANES):
            work[(_M + j) * LANES + lane] = shared + own * state[5 * LANES + lane]
        power *= fraction
    power = 2.0 * h * fraction
    for lane in range(LANES):
        work[(_M + m_size) * LANES + lane] = power * (V[cell, 0] - state[5 * LANES + lane])
        work[_A * LANES + lane] = state[lane]
        work[_B * LANES + lane] = state[LANES + lane]
    for j in range(1, w_size):
        power *= fraction
        w[j] = power * V[cell, j]
    _series(work, w, terms, w_size, m_size)
    _add(state, work, terms)


@kernel
def _flat(v, mass, per_energy, h, state, lanes, log):
    """Cross a cell of constant V and mass in closed form, in the lanes in use: it is not cheap."""
    for lane in range(lanes):
        energy = state[5 * LANES + lane]
        psi, phi, crossed, grown = _constant(
            v - energy, mass + energy * per_energy, h, state[lane], state[LANES + lane]
        )
        state[lane], state[LANES + lane] = psi, phi
        state[2 * LANES + lane], state[3 * LANES + lane] = 0.0, 0.0
        state[4 * LANES + lane] += crossed
        log[lane] += grown


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
def _advance(cells, kind, cell, backward, fraction, state, lanes, log, scratch):
    """Carry `state` (see `straight`) across part of a cell, from its left or its right end.

    Returns about how many steps amplitudes may have grown by.
    """
    width, V, mass, per_energy, V_right, mass_right, per_energy_right, terms = cells
    h, count = width[cell], int(terms[cell])
    if count == FLAT:
        q = per_energy[cell, 0] if per_energy.shape[1] > 0 else 0.0
        _flat(V[cell, 0], mass[cell, 0], q, h * fraction, state, lanes, log)
        return _AGE
    if kind < 2:
        v, slope = _line(V, cell, backward, fraction)
        m, m_slope = _line(mass, cell, backward, fraction)
        if kind == 0:
            straight(state, v, slope, m, h * fraction, count)
        else:
            q, q_slope = _line(per_energy, cell, backward, fraction)
            graded(state, v, slope, m, m_slope, q, q_slope, h * fraction, count)
        return 1
    count = min(count, SERIES_TERMS)
    if backward:
        _curved(
            V_right, mass_right, per_energy_right, cell, h, fraction, count, state, scratch
        )
    else:
        _curved(V, mass, per_energy, cell, h, fraction, count, state, scratch)
    return 1


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
    cells : (width, V, mass, mass_per_energy, V, mass, mass_per_energy, terms)
        Shapes (cells,) and (cells, degree + 1); polynomials as seen from the left end of each cell,
        then from its right end (which straight ones do without: anything of the same shape).
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
    lanes, count = energies.size, cells[0].size
    # All lanes are carried along, also unused ones: loops of a fixed length are vectors.
    state, log = np.zeros(6 * LANES), np.zeros(LANES)
    kind, scratch = shape(cells[1], cells[2], cells[3]), _scratch(cells[1], cells[2], cells[3])
    node = count if backward else 0
    last = stop[0]
    for lane in range(LANES):
        energy = energies[lane] if lane < lanes else energies[0]
        state[5 * LANES + lane] = energy
        state[lane], state[LANES + lane] = _start(edge, energy)
        if lane < lanes:
            last = min(last, stop[lane]) if backward else max(last, stop[lane])
    age = 0  # steps since amplitudes were last brought into range
    while True:
        if trail.shape[0] > 0 and node % stride == 0:
            for lane in range(lanes):
                trail[node // stride, 0, lane] = state[lane]
                trail[node // stride, 1, lane] = state[LANES + lane]
                trail[node // stride, 2, lane] = log[lane]
        for lane in range(lanes):
            if stop[lane] == node:
                psi[lane], phi[lane] = state[lane], state[LANES + lane]
                zeros[lane] = int(state[4 * LANES + lane])
        if node == last:
            return
        cell = node - 1 if backward else node
        age += _advance(cells, kind, cell, backward, 1.0, state, lanes, log, scratch)
        if age >= _AGE:
            _rescale(state, log)
            age = 0
        node += -1 if backward else 1


@kernel
def _inside_barrier(k, fraction, psi, log, psi_right, log_right, slope):
    """psi and phi in a flat barrier of k decay lengths from psi at both ends, as exp(log) psi.

    From one end alone a state that decays towards the other loses all digits on the way.
    """
    u, u_right = k * fraction, k * (1.0 - fraction)
    whole = -np.expm1(-2.0 * k)
    a = psi * np.exp(log - u) / whole
    b = psi_right * np.exp(log_right - u_right) / whole
    shrink, shrink_right = np.exp(-2.0 * u_right), np.exp(-2.0 * u)
    return (
        a * (1.0 - shrink) + b * (1.0 - shrink_right),
        slope * (b * (1.0 + shrink_right) - a * (1.0 + shrink)),
    )


@kernel
def _along_flat(cells, c, fraction, energy, start, level, side):
    """psi and phi of one level inside a cell that is crossed in closed form."""
    width, V, mass, per_energy = cells[:4]
    start_psi, start_phi, start_log = start
    m = mass[c, 0] + (energy * per_energy[c, 0] if per_energy.shape[1] > 0 else 0.0)
    v = V[c, 0] - energy
    if v > 0.0:
        k = np.sqrt(2.0 * m * v) * width[c]
        return _inside_barrier(
            k, fraction, start_psi[level, c], start_log[level, c], start_psi[level, c + 1],
            start_log[level, c + 1], k / (m * width[c]),
        )  # fmt: skip
    sign, part = (-1.0, 1.0 - fraction) if side == 1 else (1.0, fraction)
    psi, phi, _, log = _constant(
        v, m, width[c] * part, start_psi[level, c + side], sign * start_phi[level, c + side]
    )
    grown = np.exp(log + start_log[level, c + side])
    return psi * grown, sign * phi * grown


@kernel(
    signature=types.void(
        CELLS,
        FLOATS,
        types.float64[:, ::1],
        types.float64[:, ::1],
        types.float64[:, ::1],
        INTEGERS,
        FLOATS,
        INTEGERS,
        types.float64[:, ::1],
        types.float64[:, ::1],
    )
)
def along(cells, energies, start_psi, start_phi, start_log, cell, fraction, backward, psi, phi):
    """Evaluate wave functions inside cells, from the node on the side where they grow inwards.

    Parameters
    ----------
    energies : ndarray, shape (levels,)
    start_psi, start_phi, start_log : ndarray, shape (levels, cells + 1)
        At the nodes: psi and phi, and the logarithm of their common factor.
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
    kind, scratch = shape(cells[1], cells[2], cells[3]), _scratch(cells[1], cells[2], cells[3])
    state, log, level_of = np.zeros(6 * LANES), np.zeros(LANES), np.empty(LANES, np.int64)
    for point in range(cell.size):
        c = cell[point]
        if cells[7][c] == FLAT:
            for level in range(energies.size):
                side = 1 if c >= backward[level] else 0
                psi[level, point], phi[level, point] = _along_flat(
                    cells, c, fraction[point], energies[level],
                    (start_psi, start_phi, start_log), level, side,
                )  # fmt: skip
            continue
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
                for carry in range(2 * LANES, 4 * LANES):
                    state[carry] = 0.0
                _advance(cells, kind, c, side == 1, part, state, lanes, log, scratch)
                for lane in range(lanes):
                    grown = 1.0
                    total = log[lane] + start_log[level_of[lane], c + side]
                    log[lane] = 0.0
                    if total != 0.0:
                        grown = np.exp(total)
                    psi[level_of[lane], point] = state[lane] * grown
                    phi[level_of[lane], point] = sign * state[LANES + lane] * grown
