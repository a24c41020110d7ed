"""Compiled: the levels of many tables of rows that share their positions."""

import numpy as np
from numba import types

from ._compiled import INTEGERS, floats, given, grid, kernel
from ._search import find

_FLAGS = types.UniTuple(types.boolean, 3)


@kernel
def _edge(is_open, V, mass):
    edge = floats(4)
    edge[0], edge[1], edge[2], edge[3] = 1.0 if is_open else 0.0, V, mass, 0.0
    return edge


@kernel(
    entry=True,
    signature=types.void(
        given(1), INTEGERS, given(2), given(2), _FLAGS, types.float64, types.float64[:, ::1],
        types.float64[:, :, ::1], INTEGERS,
    ),
)  # fmt: skip
def find_many(width, row, V, mass, flags, resolution, energy, bracket, done):
    """Find the lowest levels of each profile of a stack.

    Parameters
    ----------
    width : ndarray, shape (cells,)
    row : ndarray of int64, shape (cells,)
        The row at the left end of each cell; the next one is at its right end.
    V : ndarray, shape (profiles, rows)
    mass : ndarray, shape (1 or profiles, 1 or rows)
    flags : (steps, left is open, right is open)
        steps: a row holds until the next; otherwise straight lines join them.
    resolution : float
        As for `find`.
    energy, bracket : ndarray, shapes (profiles, count) and (profiles, count, 2)
        Result, where there are so many levels; not touched elsewhere.
    done : ndarray of int64, shape (profiles,)
        Result: the number of levels found, or -1 if the profile needs a closer look.
    """
    steps, left_open, right_open = flags
    cells, count = width.size, energy.shape[1]
    last_row = V.shape[1] - 1
    columns = 1 if steps else 2
    m_columns = 1 if steps or mass.shape[1] == 1 else 2
    V_cells, m_cells = grid(cells, columns), grid(cells, m_columns)
    no_alpha = grid(cells, 0)
    for p in range(V.shape[0]):
        q = p if mass.shape[0] > 1 else 0
        m_last = mass.shape[1] - 1
        floor = np.inf
        for c in range(cells):
            i = row[c]
            V_cells[c, 0], m_cells[c, 0] = V[p, i], mass[q, min(i, m_last)]
            floor = min(floor, V[p, i])
            if not steps:
                V_cells[c, 1] = V[p, i + 1] - V[p, i]
                floor = min(floor, V[p, i + 1])
            if m_columns > 1:
                m_cells[c, 1] = mass[q, i + 1] - mass[q, i]
        edge = np.inf
        if left_open:
            edge = min(edge, V[p, 0])
        if right_open:
            edge = min(edge, V[p, last_row])
        done[p] = 0
        if not floor < edge:
            continue
        below, sure, levels, brackets, state = find(
            width, V_cells, m_cells, no_alpha, _edge(left_open, V[p, 0], mass[q, 0]),
            _edge(right_open, V[p, last_row], mass[q, m_last]), floor, edge, 0, count, count,
            floor, np.nan, resolution,
        )  # fmt: skip
        done[p] = levels.size if below >= 0 and sure else -1
        for k in range(levels.size):
            if state[k] == 0:
                done[p] = -1
            energy[p, k] = levels[k]
            bracket[p, k, 0], bracket[p, k, 1] = brackets[k, 0], brackets[k, 1]
