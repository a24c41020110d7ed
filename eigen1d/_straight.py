"""Cells of straight V and constant mass in vector lanes: what tables of many rows consist of.

With t in [0, 1] across the cell and h psi' = m h phi, psi'' = (z + s t) psi gives the power series
a_(k+2) = (z a_k + s a_(k-1)) / ((k+1) (k+2)), and nothing else.
"""

import numpy as np

from ._compiled import EPS, LANES, LARGEST, kernel

_MOST = 22  # most terms; a cell that asks for more is left to the general series
_INVERSE = 1.0 / ((np.arange(_MOST) + 1.0) * (np.arange(_MOST) + 2.0))


def _straight_step(terms):
    """Make the kernel that crosses a short cell of straight V and constant mass with `terms` terms.

    A constant number of terms is unrolled, which leaves one loop over lanes for the vector unit;
    all its data in one array at constant offsets spares it checks for overlap. 2.4 ns a lane with
    4 terms, 3.5 ns with 8, against 26 ns with terms outside lanes in separate arrays.
    """

    @kernel
    def step(state, v, scale, s, mh):
        inverse = 1.0 / mh
        for lane in range(LANES):
            p, f = state[lane], state[LANES + lane]
            z = scale * (v - state[5 * LANES + lane])
            before, a, b = 0.0, p, mh * f
            gain_p, gain_f = b, 0.0
            for k in range(terms):
                c = (z * a + s * before) * (1.0 / ((k + 1.0) * (k + 2.0)))
                gain_p += c
                gain_f += (k + 2.0) * c
                before, a, b = a, b, c
            # Compensated sums as in `_kernels._add`, whose calls would keep this from vectors.
            gain_p += state[2 * LANES + lane]
            new_p = p + gain_p
            part = new_p - p
            state[2 * LANES + lane] = (p - (new_p - part)) + (gain_p - part)
            state[lane] = new_p
            gain_f = gain_f * inverse + state[3 * LANES + lane]
            new_f = f + gain_f
            part = new_f - f
            state[3 * LANES + lane] = (f - (new_f - part)) + (gain_f - part)
            state[LANES + lane] = new_f
            was = (p > 0.0) | ((p == 0.0) & (f > 0.0))
            now = (new_p > 0.0) | ((new_p == 0.0) & (new_f > 0.0))
            state[4 * LANES + lane] += 1.0 if was != now else 0.0

    return step


_straight_3, _straight_5, _straight_8 = _straight_step(3), _straight_step(5), _straight_step(8)
_straight_12, _straight_22 = _straight_step(12), _straight_step(22)


@kernel
def straight(state, v, slope, mass, h, low, high):
    """Cross a cell of straight V and constant mass; False, and nothing done, if it is too long.

    `state` holds, LANES numbers each: psi, phi, their carries, zeros, energies. A majorant of the
    series decides how many terms, as in `_kernels._terms`: it starts from (1, zeta) and stops when
    three in a row (the reach of the recurrence) are below rounding of the first change.
    """
    scale = 2.0 * mass * h * h
    most = scale * max(abs(v - low), abs(v - high))
    s = scale * slope
    size = most + abs(s)
    if size > LARGEST:
        return False
    target = 0.03 * EPS * np.sqrt(size)
    before, a, b = 0.0, 1.0, np.sqrt(size)
    terms, quiet = 0, 0
    while quiet < 3 and terms < _MOST:
        before, a, b = a, b, (most * a + abs(s) * before) * _INVERSE[terms]
        terms += 1
        quiet = quiet + 1 if (terms + 1.0) * b <= target else 0
    if quiet < 3:
        return False
    terms -= quiet
    if terms <= 3:
        _straight_3(state, v, scale, s, mass * h)
    elif terms <= 5:
        _straight_5(state, v, scale, s, mass * h)
    elif terms <= 8:
        _straight_8(state, v, scale, s, mass * h)
    elif terms <= 12:
        _straight_12(state, v, scale, s, mass * h)
    else:
        _straight_22(state, v, scale, s, mass * h)
    return True
