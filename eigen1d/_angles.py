"""Where two solutions meet: the angle between them, how many levels lie below, where states live.

Like `_kernels`, these know arrays only, in units with hbar = 1.
"""

import numpy as np
from numba import types

from ._compiled import CELLS, EDGE, FLOATS, INTEGERS, LANES, block, floats, integers, kernel
from ._kernels import is_positive, sweep

_NODES = 4096  # at which the place of a state is looked for
_ALIKE = 1e-9  # of two wells that rounding alone tells apart, the left one is taken
_TINY = 1e-300


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


@kernel
def _scale(cells, stop, energy):
    """A scale of phi / psi at a node: any positive one is right, the local wave number smooth."""
    _, V, mass, per_energy, _, _, _, span, _ = cells
    cell = min(stop, V.shape[0] - 1)
    m = mass[cell, 0]
    if per_energy.shape[1] > 0:
        m += energy * per_energy[cell, 0]
    height = energy - span[0]
    return np.sqrt(2.0 * max(energy - V[cell, 0], 0.01 * height, _TINY) / m)


@kernel(
    entry=True,
    signature=types.void(CELLS, EDGE, EDGE, INTEGERS, FLOATS, INTEGERS, FLOATS),
)
def angles(cells, left, right, stop, energies, turn, angle):
    """Shoot from both edges and compare the two solutions where they meet.

    With psi_L = A sin(theta) / sigma, phi_L = A cos(theta), and the same for the mirror image of
    the right solution, the sum of both Pruefer angles D grows steadily with E and is (n + 1) pi at
    the level with n nodes.

    Parameters
    ----------
    stop : ndarray of int64, shape (k,)
        Node where they meet.
    energies : ndarray, shape (k,), any number
    turn : ndarray of int64, shape (k,)
        Result.
    angle : ndarray, shape (k,)
        Result: D = turn pi + angle, with angle in (-pi/2, pi/2], precise near zero.

    References
    ----------
    .. [1] J. D. Pryce, Numerical Solution of Sturm-Liouville Problems (1993), ch. 5.
    """
    trail = block(0, 3, 0)
    psi, phi, psi_r, phi_r = floats(LANES), floats(LANES), floats(LANES), floats(LANES)
    zeros, zeros_r = integers(LANES), integers(LANES)
    for low in range(0, energies.size, LANES):
        lanes = min(LANES, energies.size - low)
        part = energies[low : low + lanes]
        stops = stop[low : low + lanes]
        sweep(cells, left, False, part, stops, psi, phi, zeros, trail, 1)
        sweep(cells, right, True, part, stops, psi_r, phi_r, zeros_r, trail, 1)
        for lane in range(lanes):
            turn[low + lane], angle[low + lane] = _joined(
                psi[lane], phi[lane], psi_r[lane], phi_r[lane], zeros[lane] + zeros_r[lane],
                _scale(cells, stops[lane], part[lane]),
            )  # fmt: skip


@kernel(entry=True, signature=INTEGERS(CELLS, EDGE, EDGE, FLOATS))
def homes(cells, left, right, energies):
    """The node where the state nearest to each energy is largest.

    The product of both solutions is the Green function on the diagonal, which near a level follows
    its psi^2. Joined there, both run in the direction in which they grow.
    """
    count = cells[0].size
    stride, least = -(-(count + 1) // _NODES), cells[8]
    out, starts, ends = integers(energies.size), integers(LANES), integers(LANES)
    psi, phi, zeros = floats(LANES), floats(LANES), integers(LANES)
    for first in range(0, energies.size, LANES):
        lanes = min(LANES, energies.size - first)
        part = energies[first : first + lanes]
        trail = block(count // stride + 1, 3, lanes)
        trail_r = block(count // stride + 1, 3, lanes)
        for lane in range(lanes):
            ends[lane], starts[lane] = count, 0
        sweep(cells, left, False, part, ends[:lanes], psi, phi, zeros, trail, stride)
        sweep(cells, right, True, part, starts[:lanes], psi, phi, zeros, trail_r, stride)
        for lane in range(lanes):
            sigma = np.sqrt(2.0 * max(part[lane] - cells[7][0], _TINY) / cells[2][0, 0])
            largest = -np.inf
            for i in range(trail.shape[0]):
                if least.size > 0:
                    here = least[min(i * stride, count - 1)]
                    if part[lane] < max(here, least[max(i * stride - 1, 0)]):
                        continue  # not reached
                size = np.log(np.hypot(sigma * trail[i, 0, lane], trail[i, 1, lane]))
                size += np.log(np.hypot(sigma * trail_r[i, 0, lane], trail_r[i, 1, lane]))
                size += trail[i, 2, lane] + trail_r[i, 2, lane]
                if size > largest + _ALIKE:
                    largest, out[first + lane] = size, i * stride
    return out
