"""Compiled kernels of the shooting solver. They know arrays only, in units with hbar = 1.

On a cell of width h, with t in [0, 1]:  psi' = m phi,  phi' = 2 (V - E) psi.  phi = psi'/m is what
stays continuous where the mass jumps. V and m are polynomials in t, the mass also linear in E:
m = mass + E * mass_per_energy. How a cell is crossed was decided beforehand, see `_plan`:

straight    Power series of the solution, in short cells of straight V and mass: few terms.
propagated  In other short cells, by a tabulated polynomial of the energy.
constant    cos/sin or tanh, for cells of constant V and m of any width, which no table of layers
            should pay for by subdivision.

The chain over cells is serial, so trial energies run side by side as lanes of the inner loops.
Sweeping to the left is sweeping to the right through the mirror image, where phi changes sign.
"""

import numpy as np
from numba import types

from ._compiled import (
    CELLS,
    EDGE,
    FLAT,
    FLOATS,
    INTEGERS,
    LANES,
    SERIES_TERMS,
    apart,
    floats,
    kernel,
)
from ._propagators import orders, propagated
from ._straight import graded, shape, straight

_BIG, _SMALL = 2.0**300, 2.0**-300  # amplitudes are kept between these
_LOG_BIG = 300 * np.log(2.0)
_AGE = 16  # steps between two looks at amplitudes: far from enough to leave the range of doubles


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


@kernel(inline=True)
def _line(coefficients, cell, backward):
    """Value and slope of a straight line over a cell, from its left or its right end."""
    size = coefficients.shape[1]
    value = coefficients[cell, 0] if size > 0 else 0.0
    slope = coefficients[cell, 1] if size > 1 else 0.0
    if backward:
        return value + slope, -slope
    return value, slope


@kernel(inline=True)
def _advance(
    width, V, mass, per_energy, terms, at, table, shift, constant, cell, backward, state, lanes, log
):
    """Carry `state` (see `straight`) across a cell, from its left or its right end.

    Returns about how many steps amplitudes may have grown by.
    """
    h, count = width[cell], int(terms[cell])
    if count == FLAT:
        q = per_energy[cell, 0] if per_energy.shape[1] > 0 else 0.0
        _flat(V[cell, 0], mass[cell, 0], q, h, state, lanes, log)
        return _AGE
    if at.size > 0 and at[cell] >= 0:
        powers = orders(count, per_energy.shape[1] > 0)
        propagated(state, table, at[cell], shift, backward, powers)
        return 1
    v, slope = _line(V, cell, backward)
    m, m_slope = _line(mass, cell, backward)
    if constant:
        straight(state, v, slope, m, h, count)
    else:
        q, q_slope = _line(per_energy, cell, backward)
        graded(state, v, slope, m, m_slope, q, q_slope, h, count)
    return 1


@kernel
def _begin(V, mass, cell, backward, least, state, log):
    """Let energies below `least` begin behind a cell instead: there only, as if it were an edge."""
    v, m = V[cell, 0], mass[cell, 0]
    for j in range(1, 1 if backward else V.shape[1]):
        v += V[cell, j]
    for j in range(1, 1 if backward else mass.shape[1]):
        m += mass[cell, j]
    for lane in range(LANES):
        energy = state[5 * LANES + lane]
        if energy < least:
            state[lane] = 1.0
            state[LANES + lane] = np.sqrt(2.0 * max(v - energy, 0.0) / m)
            for row in range(2, 5):
                state[row * LANES + lane] = 0.0
            log[lane] = 0.0


@kernel
def _taken(state, stop, node, backward, psi, phi, zeros):
    """Take the results of lanes that end at a node; the next such node, -1 if there is none."""
    due = -1
    for lane in range(stop.size):
        if stop[lane] == node:
            psi[lane], phi[lane] = state[lane], state[LANES + lane]
            zeros[lane] = int(state[4 * LANES + lane])
        elif backward and stop[lane] < node:
            due = max(due, stop[lane])
        elif not backward and stop[lane] > node:
            due = stop[lane] if due < 0 else min(due, stop[lane])
    return due


_SWEEP = types.void(
    CELLS, EDGE, types.boolean, FLOATS, INTEGERS, FLOATS, FLOATS, INTEGERS,
    types.float64[:, :, ::1], types.int64,
)  # fmt: skip


@apart(_SWEEP)
def sweep(cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride):
    """Shoot from one edge to the nodes `stop`, for up to LANES energies at once.

    Parameters
    ----------
    cells : tuple
        As `CELLS` says, from `_plan.prepare`.
    edge : ndarray, shape (4,)
        Where the sweep starts, see `_start`.
    backward : bool
        From the right edge to the left; phi then has the mirror image's sign.
    energies : ndarray, shape (lanes,)
    stop : ndarray of int64, shape (lanes,)
        Node (0 to cells) at which each lane's result is taken.
    psi, phi : ndarray, shape (lanes or more,)
        Result: the solution at `stop`, to a positive factor.
    zeros : ndarray of int64, shape (lanes or more,)
        Result: zeros of psi between the edge and `stop`, that node included.
    trail : ndarray, shape (samples, 3, lanes)
        Result: psi, phi and the logarithm of their common factor at the nodes 0, stride, 2 stride,
        ... that the sweep reaches; no samples, no record.
    """
    lanes, count = energies.size, cells[0].size
    # All lanes are carried along, also unused ones: loops of a fixed length are vectors.
    state, log = floats(7 * LANES), floats(LANES)
    for i in range(7 * LANES):
        state[i] = 0.0
    for lane in range(LANES):
        log[lane] = 0.0
    width, V, mass, per_energy, terms, at, table, span, least = cells
    constant, floor, scale = shape(V, mass, per_energy) == 0, span[0], span[1]
    node = count if backward else 0
    for lane in range(LANES):
        energy = energies[lane] if lane < lanes else energies[0]
        state[5 * LANES + lane] = energy
        state[6 * LANES + lane] = (energy - floor) / scale
        state[lane], state[LANES + lane] = _start(edge, energy)
    lowest = energies[0]
    for lane in range(lanes):
        lowest = min(lowest, energies[lane])
    due = stop[0]  # the next node where a lane ends
    for lane in range(lanes):
        due = max(due, stop[lane]) if backward else min(due, stop[lane])
    age = 0  # steps since amplitudes were last brought into range
    while True:
        if trail.shape[0] > 0 and node % stride == 0:
            for lane in range(lanes):
                trail[node // stride, 0, lane] = state[lane]
                trail[node // stride, 1, lane] = state[LANES + lane]
                trail[node // stride, 2, lane] = log[lane]
        if node == due:
            due = _taken(state, stop, node, backward, psi, phi, zeros)
            if due < 0:
                return
        cell = node - 1 if backward else node
        shift = (least[cell] - floor) / scale if least.size > 0 else 0.0
        age += _advance(
            width, V, mass, per_energy, terms, at, table, shift, constant, cell, backward, state,
            lanes, log,
        )  # fmt: skip
        if age >= _AGE:
            _rescale(state, log)
            age = 0
        if least.size > 0 and least[cell] > lowest:
            _begin(V, mass, cell, backward, least[cell], state, log)
        node += -1 if backward else 1


@kernel(signature=_SWEEP, entry=True)
def swept(cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride):
    """`sweep`, to be called from Python."""
    sweep(cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride)


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


@kernel
def _series(cells, cell, energy, psi, phi, a, b):
    """Power series psi = sum a_k t^k, phi = sum b_k t^k in a short cell; the number of terms."""
    width, V, mass, per_energy, terms = cells[:5]
    h, most = width[cell], int(terms[cell])
    a[0], b[0] = psi, phi
    for k in range(most):
        p, f = 0.0, 2.0 * h * (V[cell, 0] - energy) * a[k]
        for j in range(min(k + 1, mass.shape[1])):
            p += h * mass[cell, j] * b[k - j]
        for j in range(min(k + 1, per_energy.shape[1])):
            p += h * energy * per_energy[cell, j] * b[k - j]
        for j in range(1, min(k + 1, V.shape[1])):
            f += 2.0 * h * V[cell, j] * a[k - j]
        a[k + 1], b[k + 1] = p / (k + 1), f / (k + 1)
    return most


@kernel(
    entry=True,
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
    ),
)
def along(cells, energies, start_psi, start_phi, start_log, cell, fraction, backward, psi, phi):
    """Evaluate wave functions inside cells.

    Parameters
    ----------
    energies : ndarray, shape (levels,)
    start_psi, start_phi, start_log : ndarray, shape (levels, cells + 1)
        At the nodes: psi and phi, and the logarithm of their common factor.
    cell : ndarray of int64, shape (points,)
    fraction : ndarray, shape (points,)
        0 to 1 across the cell.
    backward : ndarray of int64, shape (levels,)
        From this cell on, a level grows to the left: closed forms start from the right.
    psi, phi : ndarray, shape (levels, points)
        Result.
    """
    a, b = floats(SERIES_TERMS + 1), floats(SERIES_TERMS + 1)
    for level in range(energies.size):
        last, terms = -1, 0
        for point in range(cell.size):
            c, t = cell[point], fraction[point]
            if cells[4][c] == FLAT:
                psi[level, point], phi[level, point] = _along_flat(
                    cells, c, t, energies[level], (start_psi, start_phi, start_log), level,
                    1 if c >= backward[level] else 0,
                )  # fmt: skip
                continue
            if c != last:
                terms = _series(
                    cells, c, energies[level], start_psi[level, c], start_phi[level, c], a, b
                )
                last = c
            p, f = a[terms], b[terms]
            for k in range(terms - 1, -1, -1):
                p, f = p * t + a[k], f * t + b[k]
            grown = np.exp(start_log[level, c]) if start_log[level, c] != 0.0 else 1.0
            psi[level, point], phi[level, point] = p * grown, f * grown
