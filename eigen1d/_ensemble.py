"""Compiled: the levels of many tables of rows that share their positions."""

import numpy as np
from numba import types

from ._compiled import INTEGERS, floats, given, grid, kernel
from ._search import find

_FLAGS = types.UniTuple(types.boolean, 3)
# Sizes of V and of masses that `_checks.check_range` allows without a doubt, however cells merge.
_LEAST_V, _LEAST_MASS, _MOST = 1e-240, 1e-99, 1e99


@kernel
def _edge(is_open, V, mass):
    edge = floats(4)
    edge[0], edge[1], edge[2], edge[3] = 1.0 if is_open else 0.0, V, mass, 0.0
    return edge


@kernel
def _usable(V, mass):
    """Whether one table's numbers are finite, of usual sizes, and its masses positive."""
    for value in V:
        if not abs(value) <= _MOST:
            return False
    for value in mass:
        if not _LEAST_MASS <= value <= _MOST:
            return False
    return True


@kernel
def _fill(row, V, mass, unit, steps, V_cells, m_cells):
    """Write the cells of one table: (least V, size of V, whether the mass is graded in any).

    The numbers are those that a profile has, so that all results have the same bits.
    """
    floor, size, graded = np.inf, 0.0, False
    last = mass.size - 1
    for cell in range(row.size):
        i = row[cell]
        V_cells[cell, 0], m_cells[cell, 0] = V[i], unit * mass[min(i, last)]
        V_cells[cell, 1], m_cells[cell, 1] = 0.0, 0.0
        if not steps:
            V_cells[cell, 1] = V[i + 1] - V[i]
            m_cells[cell, 1] = unit * (mass[min(i + 1, last)] - mass[min(i, last)])
        graded = graded or m_cells[cell, 1] != 0.0
        floor = min(floor, V_cells[cell, 0], V_cells[cell, 0] + V_cells[cell, 1])
        size = max(size, abs(V_cells[cell, 0]), abs(V_cells[cell, 1]))
    return floor, size, graded


@kernel(
    entry=True,
    signature=types.void(
        given(1), INTEGERS, given(2), given(2), types.float64, _FLAGS, types.float64,
        types.float64[:, ::1], types.float64[:, :, ::1], INTEGERS,
    ),
)  # fmt: skip
def find_many(width, row, V, mass, unit, flags, resolution, energy, bracket, found):
    """Find the lowest levels of each profile of a stack.

    Parameters
    ----------
    width : ndarray, shape (cells,)
    row : ndarray of int64, shape (cells,)
        The row at the left end of each cell; the next one is at its right end.
    V : ndarray, shape (profiles, rows)
    mass : ndarray, shape (1 or profiles, 1 or rows)
    unit : float
        Of the mass: positions and energies are not scaled.
    flags : (steps, left is open, right is open)
        steps: a row holds until the next; otherwise straight lines join them.
    resolution : float
        As for `find`.
    energy, bracket : ndarray, shapes (profiles, count) and (profiles, count, 2)
        Result, where so many levels were found; not touched elsewhere.
    found : ndarray of int64, shape (profiles,)
        Result: the number of levels found, or -1 if the profile needs a closer look.
    """
    steps, left_open, right_open = flags
    count, last, m_last = energy.shape[1], V.shape[1] - 1, mass.shape[1] - 1
    V_cells, m_cells, no_alpha = grid(row.size, 2), grid(row.size, 2), grid(row.size, 0)
    for p in range(V.shape[0]):
        found[p] = -1
        m = mass[p if mass.shape[0] > 1 else 0]
        if not _usable(V[p], m):
            continue
        floor, size, graded = _fill(row, V[p], m, unit, steps, V_cells, m_cells)
        if 0.0 < size < _LEAST_V:
            continue
        edge = np.inf
        if left_open:
            edge = min(edge, V[p, 0])
        if right_open:
            edge = min(edge, V[p, last])
        if not floor < edge:
            found[p] = 0
            continue
        below, sure, levels, brackets, state = find(
            # Cells of constant mass, one column, are crossed faster.
            width, V_cells, m_cells[:, : 2 if graded else 1], no_alpha,
            _edge(left_open, V[p, 0], unit * m[0]), _edge(right_open, V[p, last], unit * m[m_last]),
            floor, edge, 0, count, count, floor, np.nan, resolution,
        )  # fmt: skip
        settled = below >= 0 and sure
        for k in range(levels.size):
            settled = settled and state[k] > 0
        if settled:
            found[p] = levels.size
            for k in range(levels.size):
                energy[p, k] = levels[k]
                bracket[p, k, 0], bracket[p, k, 1] = brackets[k, 0], brackets[k, 1]
