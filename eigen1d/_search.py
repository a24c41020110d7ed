"""Compiled search: from sweeps to counts, from counts to brackets, from brackets to energies.

Like `_kernels`, these know arrays only, in units with hbar = 1.
"""

import numpy as np
from numba import types

from ._compiled import CELLS, EDGE, EPS, FLOATS, INTEGERS, LANES, kernel
from ._kernels import is_positive, sweep

_PAIR = types.UniTuple(types.float64, 2)
_START = types.Tuple((types.float64, types.float64, types.int64, types.int64))


@kernel
def _joined(psi, phi, psi_r, phi_r, zeros, sigma):
    """turn and angle of `angles` from the two solutions and the zeros that both have passed."""
    sine = sigma * (psi * phi_r + phi * psi_r)
    cosine = phi * phi_r - sigma * psi * (sigma * psi_r)
    if is_positive(psi, phi) != is_positive(psi_r, phi_r):
        sine, cosine = -sine, -cosine
    # Both angles lie in [0, pi), their sum in [0, 2 pi): sine < 0 is its upper half.
    if cosine <= 0.0:
        return zeros + 1, np.arctan2(-sine, -cosine) if sine != 0.0 else 0.0
    return zeros + (2 if sine < 0.0 else 0), np.arctan(sine / cosine)


@kernel(
    entry=True,
    signature=types.void(CELLS, EDGE, EDGE, FLOATS, INTEGERS, FLOATS, INTEGERS, FLOATS),
)
def angles(cells, left, right, energies, stop, sigma, turn, angle):
    """Shoot from both edges and compare the two solutions where they meet.

    With psi_L = A sin(theta) / sigma, phi_L = A cos(theta), and the same for the mirror image of
    the right solution, the sum of both Pruefer angles D grows steadily with E and is (n + 1) pi at
    the level with n nodes.

    Parameters
    ----------
    energies : ndarray, shape (k,), any number
    stop : ndarray of int64, shape (k,)
        Node where they meet.
    sigma : ndarray, shape (k,)
        Scale of phi / psi; any positive number is right, one near sqrt(2 |E - V| / m) is smooth.
    turn : ndarray of int64, shape (k,)
        Result.
    angle : ndarray, shape (k,)
        Result: D = turn pi + angle, with angle in (-pi/2, pi/2], precise near zero.

    References
    ----------
    .. [1] J. D. Pryce, Numerical Solution of Sturm-Liouville Problems (1993), ch. 5.
    """
    trail = np.empty((0, 3, 0))
    psi, phi, psi_r, phi_r = np.empty(LANES), np.empty(LANES), np.empty(LANES), np.empty(LANES)
    zeros, zeros_r = np.empty(LANES, np.int64), np.empty(LANES, np.int64)
    for low in range(0, energies.size, LANES):
        high = min(low + LANES, energies.size)
        lanes = high - low
        sweep(
            cells, left, False, energies[low:high], stop[low:high],
            psi[:lanes], phi[:lanes], zeros[:lanes], trail, 1,
        )  # fmt: skip
        sweep(
            cells, right, True, energies[low:high], stop[low:high],
            psi_r[:lanes], phi_r[:lanes], zeros_r[:lanes], trail, 1,
        )  # fmt: skip
        for lane in range(lanes):
            turn[low + lane], angle[low + lane] = _joined(
                psi[lane], phi[lane], psi_r[lane], phi_r[lane],
                zeros[lane] + zeros_r[lane], sigma[low + lane],
            )  # fmt: skip


@kernel(
    entry=True,
    signature=types.void(
        CELLS,
        EDGE,
        EDGE,
        types.int64,
        types.float64,
        _PAIR,
        types.int64,
        types.int64,
        _START,
        types.float64[:, ::1],
        types.int64[:, ::1],
    )
)
def isolate(cells, left, right, stop, sigma, resolution, first, last, start, bracket, count):
    """Cut an energy interval until each wanted level is alone in its piece, by counting.

    Parameters
    ----------
    stop, sigma
        One node and one scale for all energies, see `angles`.
    resolution : (relative, floor)
        A piece narrower than relative * |E - floor| + spacing of doubles at E is not cut further.
    first, last : int
        Levels wanted: first <= n < last.
    start : (low, high, count_low, count_high)
        The interval and the number of levels below each end.
    bracket, count : ndarray, shape (last - first, 2), of float64 and int64
        Result: the piece that holds each level and the numbers of levels below its ends.
    """
    size = last - first
    ends, counts = np.empty((size, 2)), np.empty((size, 2), np.int64)
    ends[0, 0], ends[0, 1], counts[0, 0], counts[0, 1] = start
    pieces = 1
    while pieces > 0:
        each = max(LANES // pieces, 1)
        points = np.empty(pieces * LANES)
        owner = np.empty(pieces * LANES, np.int64)
        used = 0
        for i in range(pieces):
            inside = max(each, min(counts[i, 1] - counts[i, 0], LANES - 1))
            for k in range(inside):
                points[used] = ends[i, 0] + (ends[i, 1] - ends[i, 0]) * ((k + 1.0) / (inside + 1.0))
                owner[used] = i
                used += 1
        turn, angle = np.empty(used, np.int64), np.empty(used)
        stops, sigmas = np.empty(used, np.int64), np.empty(used)
        for k in range(used):
            stops[k], sigmas[k] = stop, sigma
        angles(cells, left, right, points[:used], stops, sigmas, turn, angle)
        new_ends, new_counts = np.empty((size, 2)), np.empty((size, 2), np.int64)
        kept, k = 0, 0
        for i in range(pieces):
            low, n_low = ends[i, 0], counts[i, 0]
            while n_low < counts[i, 1]:
                if k < used and owner[k] == i:
                    high, n_high = points[k], turn[k] - (1 if angle[k] < 0.0 else 0)
                    n_high = min(max(n_high, n_low), counts[i, 1])
                    k += 1
                else:
                    high, n_high = ends[i, 1], counts[i, 1]
                if n_high > first and n_low < last and n_high > n_low:
                    floor = resolution[1]
                    size_high = max(abs(low), abs(high))
                    fine = resolution[0] * (high - floor) + 2.0 * EPS * size_high
                    if n_high == n_low + 1 or high - low <= fine:
                        for n in range(max(n_low, first), min(n_high, last)):
                            bracket[n - first, 0], bracket[n - first, 1] = low, high
                            count[n - first, 0], count[n - first, 1] = n_low, n_high
                    else:
                        new_ends[kept, 0], new_ends[kept, 1] = low, high
                        new_counts[kept, 0], new_counts[kept, 1] = n_low, n_high
                        kept += 1
                low, n_low = high, n_high
            while k < used and owner[k] == i:
                k += 1
        ends, counts, pieces = new_ends, new_counts, kept


@kernel
def _between(one, other, share, edge):
    """The energy at `share` of the way from one to other, measured in u."""
    if edge == np.inf:
        return one + share * (other - one)
    u_one, u_other = -np.sqrt(max(edge - one, 0.0)), -np.sqrt(max(edge - other, 0.0))
    both = u_one + u_other
    step = share * (one - other) / both if both != 0.0 else 0.0
    # E is moved, not recomputed from u: edge - u^2 would round to the depth of the edge.
    point = one - step * (2.0 * u_one + step)
    if min(one, other) < point < max(one, other):
        return point
    # Beside the edge u has digits that E has not: the step may round to nothing, for ever.
    return 0.5 * (one + other)


@kernel
def _ratio(a, b, c, edge):
    """(u_a - u_b) / (u_c - u_b), without cancellation."""
    if edge == np.inf:
        return (a - b) / (c - b)
    u = -np.sqrt(max(edge - b, 0.0))
    u_a, u_c = -np.sqrt(max(edge - a, 0.0)), -np.sqrt(max(edge - c, 0.0))
    return (a - b) / (c - b) * ((u_c + u) / (u_a + u))


@kernel
def _narrow(x, f, share, i, point, value, edge, resolution):
    """One step of Chandrupatla's method for level i; True when its bracket is closed."""
    if (value < 0.0) == (f[0, i] < 0.0):
        x[2, i], f[2, i] = x[0, i], f[0, i]
    else:
        x[2, i], f[2, i] = x[1, i], f[1, i]
        x[1, i], f[1, i] = x[0, i], f[0, i]
    x[0, i], f[0, i] = point, value
    x1, x2, x3 = x[0, i], x[1, i], x[2, i]
    f1, f2, f3 = f[0, i], f[1, i], f[2, i]
    height = max(point - resolution[1], 0.0)
    if edge < np.inf:
        # Near the continuum the state lies mostly in the tails, which round nothing.
        height = min(height, np.sqrt(height * max(edge - point, 0.0)))
    fine = 0.25 * resolution[0] * height + EPS * abs(point)
    width = abs(x2 - x1)
    if value == 0.0 or width <= fine:
        return True
    least = fine / width
    share[i] = 0.5
    if f3 != f1 and f3 != f2:
        xi = _ratio(x1, x2, x3, edge)
        ph = (f1 - f2) / (f3 - f2)
        if ph * ph < xi and (1.0 - ph) ** 2 < 1.0 - xi:
            share[i] = f1 / (f2 - f1) * f3 / (f2 - f3) + _ratio(x3, x1, x2, edge) * f1 / (
                f3 - f1
            ) * f2 / (f3 - f2)
    if least >= 0.5:
        share[i] = 0.5
    else:
        share[i] = min(max(share[i], least), 1.0 - least)
    return False


@kernel(
    entry=True,
    signature=types.boolean[::1](
        CELLS,
        EDGE,
        EDGE,
        types.float64,
        INTEGERS,
        FLOATS,
        _PAIR,
        INTEGERS,
        types.float64[:, ::1],
        FLOATS,
        types.int64,
    )
)
def refine(cells, left, right, edge, stop, sigma, resolution, n, bracket, energy, rounds):
    """Close the brackets of isolated levels by root finding on the angle of `angles`.

    Inverse quadratic interpolation kept inside the bracket, with bisection where that is unsafe
    (T. R. Chandrupatla, Adv. Eng. Softw. 28 (1997) 145), in the variable u = -sqrt(edge - E), in
    which the angle is smooth up to the continuum; u = E between two walls (edge infinite).

    Parameters
    ----------
    stop, sigma : ndarray, shape (k,)
    resolution : (relative, floor)
        As for `isolate`; the error aimed at.
    n : ndarray of int64, shape (k,)
    bracket : ndarray, shape (k, 2)
        Holds just level n; overwritten by a smaller one.
    energy : ndarray, shape (k,)
        Result: the best energy.
    rounds : int
        Most evaluations a level.

    Returns
    -------
    ndarray of bool, shape (k,)
        Which levels have converged.
    """
    size = n.size
    # x1 is the newest end of the bracket, x2 the other one, x3 the point dropped last.
    x, f = np.empty((3, size)), np.empty((3, size))
    turn, angle = np.empty(size, np.int64), np.empty(size)
    points, stops, sigmas = np.empty(size), np.empty(size, np.int64), np.empty(size)
    for end in range(2):
        for i in range(size):
            points[i] = bracket[i, end]
        angles(cells, left, right, points, stop, sigma, turn, angle)
        for i in range(size):
            x[end, i], x[2, i] = bracket[i, end], bracket[i, end]
            f[end, i] = (turn[i] - n[i] - 1) * np.pi + angle[i]
            f[2, i] = f[end, i]
    share, done = np.empty(size), np.zeros(size, np.bool_)
    for i in range(size):
        share[i] = 0.5
        if f[0, i] >= 0.0 or f[1, i] < 0.0:
            # The count that made this bracket and the angle at its end differ by rounding: the
            # level is that end.
            energy[i] = x[0, i] if f[0, i] >= 0.0 else x[1, i]
            done[i] = True
    active = np.empty(size, np.int64)
    for _ in range(rounds):
        used = 0
        for i in range(size):
            if not done[i]:
                points[used] = _between(x[0, i], x[1, i], share[i], edge)
                active[used], stops[used], sigmas[used] = i, stop[i], sigma[i]
                used += 1
        if used == 0:
            break
        angles(
            cells, left, right, points[:used], stops[:used], sigmas[:used], turn[:used],
            angle[:used],
        )  # fmt: skip
        for k in range(used):
            i = active[k]
            value = (turn[k] - n[i] - 1) * np.pi + angle[k]
            done[i] = _narrow(x, f, share, i, points[k], value, edge, resolution)
    for i in range(size):
        if f[0, i] < 0.0 or f[1, i] < 0.0:
            best = 0 if abs(f[0, i]) < abs(f[1, i]) else 1
            energy[i] = x[best, i]
        bracket[i, 0], bracket[i, 1] = min(x[0, i], x[1, i]), max(x[0, i], x[1, i])
    return done
