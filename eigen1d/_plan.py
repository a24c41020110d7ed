"""What a sweep must know of each cell beforehand: cells cut short enough, and how each is crossed.

A cell is crossed by the power series of the solution, which needs 2 m |V - E| h^2 <= LARGEST: then
psi has at most one zero in it, and some 20 terms reach rounding. Only flat cells are crossed in
closed form, at any width. All this depends on the energies that will be tried; everything here is
done once, for the lowest and the highest of them, and not in the sweeps.
"""

import math

import numpy as np
from numba import types

from ._compiled import (
    CELLS,
    COUNTS,
    EDGE,
    EPS,
    FLAT,
    FLOATS,
    LARGEST,
    SERIES_TERMS,
    TOO_LONG,
    apart,
    counts,
    floats,
    given,
    grid,
    integers,
    kernel,
)
from ._propagators import filled, orders, tabulate
from ._straight import shape

_FINEST = 2.0**-26  # of a cell: halves of halves stay exact in the products of `_part`
# Terms are dropped below this part of what a cell changes psi and phi by. All that is lost in many
# cells is then the same part of all that changes.
_LOST = 0.25 * EPS
_MARGIN = 1.15  # by which sizes may grow from a cell to the next one that shares its terms
_RUN = 16  # neighbouring cells whose terms are looked for together, by their largest coefficients
_HEAD = 5  # of a row of `parts`: owner, offset, share, terms, width; then V, mass and per_energy
# Decay lengths from the outermost place that an energy reaches: what lies further out changes the
# solution there by exp(-2 * 20) = 4e-18 of itself.
_FAR = 20.0
# Energies that are looked at for this, each halfway from the one before to the highest; and cells,
# where that pays.
_TRIED, _FEW = 8, 4096
MOST_PARTS = 1 << 21  # of all cells together; their propagators fill 0.8 GB


@kernel
def _sum(c):
    total = 0.0
    for value in c:
        total += value
    return total


@kernel
def _series_terms(sizes, most, majorant):
    """Terms of psi' = (m + q) phi, phi' = w psi by a majorant of both series.

    Rows of `sizes` are those of the coefficients of w, m and q. It starts as (1, eta), with eta
    such that both equations have the same rate zeta. TOO_LONG if that is more than LARGEST
    allows, or the terms more than `most`.
    """
    w, m, q = sizes[0], sizes[1], sizes[2]
    w_total, m_total = _sum(w), _sum(m) + _sum(q)
    if not m_total * w_total <= LARGEST:
        return TOO_LONG
    zeta = np.sqrt(m_total * w_total)
    eta = np.sqrt(w_total / m_total) if w_total > 0.0 else 0.0
    majorant[0, 0], majorant[1, 0] = 1.0, eta
    w_size, m_size, q_size = filled(w), filled(m), filled(q)
    reach = max(w_size, m_size, q_size)
    quiet = 0
    for k in range(most + reach):
        psi, phi = 0.0, 0.0
        for j in range(min(k + 1, m_size)):
            psi += m[j] * majorant[1, k - j]
        for j in range(min(k + 1, q_size)):
            psi += q[j] * majorant[1, k - j]
        for j in range(min(k + 1, w_size)):
            phi += w[j] * majorant[0, k - j]
        majorant[0, k + 1], majorant[1, k + 1] = psi / (k + 1), phi / (k + 1)
        small = psi <= _LOST * zeta * (k + 1) and phi <= _LOST * zeta * eta * (k + 1)
        quiet = quiet + 1 if small else 0
        if quiet > reach:
            return min(max(k + 1 - quiet, 1), SERIES_TERMS)
    return TOO_LONG


@kernel
def _clear(sizes):
    for row in range(3):
        for j in range(sizes.shape[1]):
            sizes[row, j] = 0.0


@kernel(
    signature=types.void(
        given(1), given(1), given(1), types.float64, types.float64, types.float64,
        types.float64[:, ::1],
    )
)
def _sizes(V, mass, per_energy, h, low, high, sizes):
    """Raise sizes to those of a cell's coefficients, for energies from low to high."""
    w, m, q = sizes[0], sizes[1], sizes[2]
    far = max(abs(low), abs(high))
    w[0] = max(w[0], 2.0 * h * max(abs(V[0] - low), abs(V[0] - high)))
    for j in range(1, V.size):
        w[j] = max(w[j], 2.0 * h * abs(V[j]))
    for j in range(mass.size):
        m[j] = max(m[j], h * abs(mass[j]))
    for j in range(per_energy.size):
        q[j] = max(q[j], h * far * abs(per_energy[j]))


@kernel(signature=types.boolean(given(1)))
def _is_flat(c):
    for j in range(1, c.size):
        if c[j] != 0.0:
            return False
    return True


@kernel
def _terms(V, mass, per_energy, h, low, high, most, sizes, known, majorant):
    """How many terms one cell needs; FLAT: closed form; TOO_LONG: to be cut.

    Neighbours differ little: `known` keeps sizes somewhat above the last ones, and their number.
    """
    _clear(sizes)
    _sizes(V, mass, per_energy, h, low, high, sizes)
    if _covers(known, sizes):
        return int(known[3, 0])
    needed = _series_terms(sizes, most, majorant)
    if needed == TOO_LONG:
        if _is_flat(V) and _is_flat(mass) and _is_flat(per_energy):
            return FLAT
        return TOO_LONG
    for row in range(3):
        for j in range(sizes.shape[1]):
            known[row, j] = _MARGIN * sizes[row, j]
    more = _series_terms(known, most, majorant)
    known[3, 0] = more
    return needed if more == TOO_LONG else more


@kernel
def _covers(known, sizes):
    """Whether sizes lie below those of `known`, and not far below, which would cost terms."""
    if known[3, 0] == TOO_LONG:
        return False
    for row in range(3):
        for j in range(sizes.shape[1]):
            if sizes[row, j] > known[row, j]:
                return False
    return _sum(sizes[0]) * _sum(sizes[1]) > 0.5 * _sum(known[0]) * _sum(known[1])


@kernel
def _first_share(V, mass, per_energy, h, low, high):
    """The part of a cell that its parts surely do not exceed, a power of two.

    max(|V - low|, |V - high|) is at least half of high - low, wherever V lies.
    """
    share = 1.0
    if not (_is_flat(V) and _is_flat(mass) and _is_flat(per_energy)):
        m = 2.0 * mass[0]
        for c in mass:
            m -= abs(c)
        while share > _FINEST and m * (h * share) ** 2 * (high - low) > LARGEST:
            share *= 0.5
    return share


@kernel
def _work(V, mass, per_energy):
    """Room for sizes, for those of another cell with its terms below, and for a majorant."""
    columns = max(V.shape[1], mass.shape[1], per_energy.shape[1])
    known = grid(4, columns)
    known[3, 0] = TOO_LONG
    return grid(3, columns), known, grid(2, SERIES_TERMS + columns + 2)


@kernel
def _most(V, mass, per_energy):
    """Terms for which a propagator has powers enough, see `_propagators.orders`."""
    fits = per_energy.shape[1] == 0 or shape(V, mass, per_energy) < 2
    return SERIES_TERMS if fits else SERIES_TERMS // 2


@kernel
def _plan(width, V, mass, per_energy, low, high, terms):
    """Write the terms of cells that all are short, and whether they are.

    Cells of a table differ little: a run of them shares its number.
    """
    sizes, _, majorant = _work(V, mass, per_energy)
    for first in range(0, width.size, _RUN):
        last = min(first + _RUN, width.size)
        _clear(sizes)
        for cell in range(first, last):
            _sizes(V[cell], mass[cell], per_energy[cell], width[cell], low, high, sizes)
        shared = _series_terms(sizes, _most(V, mass, per_energy), majorant)
        if shared == TOO_LONG:
            return False
        for cell in range(first, last):
            terms[cell] = shared
    return True


@kernel
def _part(c, offset, ratio, pairs, out):
    """Write the coefficients of p(offset + ratio t) into `out`.

    Horner's scheme for a Taylor shift, with sums in pairs of doubles. Where power coefficients are
    large and V is small, as at the bottoms of a double well in one cell, plain ones round by more
    than a bracket is wide (test_shooting.py, "sextic-corner").
    """
    size = c.size
    if ratio == 1.0:
        for j in range(size):
            out[j] = c[j]
        return
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
    are so short that its highest powers vanish, and no series should pay for them."""
    for j in range(c.size - 1, 0, -1):
        if abs(c[j]) > 2.0**-8 * EPS * size:
            return
        c[j] = 0.0


@kernel
def _longer(rows):
    out = grid(2 * rows.shape[0], rows.shape[1])
    for i in range(rows.shape[0]):
        for j in range(rows.shape[1]):
            out[i, j] = rows[i, j]
    return out


@kernel
def _least_energies(width, V, mass, floor, top, home):
    """The least energy that matters in each cell, of a few tried: in tails, the higher ones alone.

    What has decayed over _FAR lengths since it left the outermost place that it reaches, does not
    matter. Cells of a long tail may so be longer than its lowest energies would allow.
    """
    count = width.size
    least = floats(count)
    for cell in range(count):
        least[cell] = floor
    if count > _FEW:
        return least
    for k in range(_TRIED):
        energy = top - (top - floor) * 0.5 ** (k + 1.0)
        first = last = home
        for cell in range(count):
            if _decay(width, V, mass, cell, energy) == 0.0:
                first, last = min(first, cell), max(last, cell)
        far = 0.0
        for cell in range(last + 1, count):
            if far > _FAR:
                least[cell] = energy
            far += _decay(width, V, mass, cell, energy)
        far = 0.0
        for cell in range(first - 1, -1, -1):
            if far > _FAR:
                least[cell] = energy
            far += _decay(width, V, mass, cell, energy)
    return least


@kernel
def _cut(width, V, mass, per_energy, least, floor, high):
    """Halve cells, and halves again, until each part is short: rows as _HEAD says.

    Halves of halves have exact widths and places. From differences of positions the widths of a
    profile far from x = 0 would lose digits (test_shooting.py, "far-away-curved").
    """
    sizes, known, majorant = _work(V, mass, per_energy)
    V_end, m_end = _HEAD + V.shape[1], _HEAD + V.shape[1] + mass.shape[1]
    columns = m_end + per_energy.shape[1]
    pairs = grid(2, columns)
    parts = grid(2 * width.size + 64, columns)
    starts, shares = floats(64), floats(64)
    count = 0
    most = _most(V, mass, per_energy)
    for cell in range(width.size):
        low = least[cell]
        largest = _first_share(V[cell], mass[cell], per_energy[cell], width[cell], low, high)
        begin, waiting = 0.0, 0
        while waiting > 0 or begin < 1.0:
            if waiting == 0:
                starts[0], shares[0] = begin, largest
                begin, waiting = begin + largest, 1
            waiting -= 1
            start, share = starts[waiting], shares[waiting]
            if count == parts.shape[0]:
                if count > MOST_PARTS:
                    return parts
                parts = _longer(parts)
            row = parts[count]
            v, m, q = row[_HEAD:V_end], row[V_end:m_end], row[m_end:]
            _part(V[cell], start, share, pairs, v)
            _part(mass[cell], start, share, pairs, m)
            _part(per_energy[cell], start, share, pairs, q)
            _trim(v, abs(v[0] - floor))
            _trim(m, m[0])
            needed = _terms(
                v, m, q, width[cell] * share, low, high, most, sizes, known, majorant
            )
            if needed == TOO_LONG and share > _FINEST:
                starts[waiting], shares[waiting] = start + 0.5 * share, 0.5 * share
                starts[waiting + 1], shares[waiting + 1] = start, 0.5 * share
                waiting += 2
                continue
            row[0], row[1], row[2] = cell, start, share
            row[3], row[4] = needed, width[cell] * share
            count += 1
    return parts[:count]


@kernel(signature=types.float64(given(1), given(2), given(2), types.int64, types.float64))
def _decay(width, V, mass, cell, top):
    """Decay lengths at least of energies up to `top` in a cell; 0 if one may reach it."""
    V_low, m_low = V[cell, 0], mass[cell, 0]
    for j in range(1, V.shape[1]):
        V_low -= abs(V[cell, j])
    for j in range(1, mass.shape[1]):
        m_low -= abs(mass[cell, j])
    if V_low <= top:
        return 0.0
    return np.sqrt(2.0 * max(m_low, 0.0) * (V_low - top)) * width[cell]


@kernel(signature=types.boolean(given(2), given(2), given(2), types.int64, EDGE))
def _continues(V, mass, per_energy, cell, edge):
    """Whether a cell is as flat as the open edge beside it, at the same V and mass."""
    q = per_energy[cell, 0] if per_energy.shape[1] > 0 else 0.0
    same = V[cell, 0] == edge[1] and mass[cell, 0] == edge[2] and q == edge[3]
    flat = _is_flat(V[cell]) and _is_flat(mass[cell]) and _is_flat(per_energy[cell])
    return edge[0] != 0.0 and same and flat


@kernel(signature=EDGE(given(2), given(2), types.int64, types.boolean))
def _edge_inside(V, mass, cell, at_end):
    """An open edge at one end of a cell, where the barrier beyond is cut off."""
    edge = floats(4)
    edge[0], edge[1], edge[2], edge[3] = 1.0, 0.0, 0.0, 0.0
    for j in range(V.shape[1] if at_end else 1):
        edge[1] += V[cell, j]
    for j in range(mass.shape[1] if at_end else 1):
        edge[2] += mass[cell, j]
    return edge


@kernel(
    signature=types.Tuple((types.int64, types.int64, EDGE, EDGE))(
        given(1), given(2), given(2), given(2), EDGE, EDGE, types.float64, types.boolean
    )
)
def _kept(width, V, mass, per_energy, left, right, top, whole):
    """(first, last, left, right): the cells without which an energy up to `top` would change.

    Cells that go on like the open edge beside them say nothing new. Any solution that does not fall
    outwards is, _FAR decay lengths further in, the one that is right at the edge.
    """
    first, last = 0, width.size
    if whole:
        return first, last, left, right
    while first < last - 1 and _continues(V, mass, per_energy, first, left):
        first += 1
    while last - 1 > first and _continues(V, mass, per_energy, last - 1, right):
        last -= 1
    if per_energy.shape[1] > 0:
        return first, last, left, right
    begin, end = first, last
    while first < last and _decay(width, V, mass, first, top) > 0.0:
        first += 1
    if first == last:
        return begin, end, left, right
    far = 0.0
    while first > begin and far < _FAR:
        first -= 1
        far += _decay(width, V, mass, first, top)
    if first > begin:
        left = _edge_inside(V, mass, first, False)
    while _decay(width, V, mass, last - 1, top) > 0.0:
        last -= 1
    far = 0.0
    while last < end and far < _FAR:
        far += _decay(width, V, mass, last, top)
        last += 1
    if last < end:
        right = _edge_inside(V, mass, last - 1, True)
    return first, last, left, right


@kernel(signature=types.int64(given(2)))
def _deepest(V):
    """The cell where V is lowest, on average of both ends."""
    home, least = 0, np.inf
    for cell in range(V.shape[0]):
        value = V[cell, 0]
        for j in range(V.shape[1]):
            value += V[cell, j]
        if value < least:
            home, least = cell, value
    return home


@kernel(
    signature=CELLS(
        given(1), given(2), given(2), given(2), COUNTS, FLOATS, types.float64, types.float64
    )
)
def _ready(width, V, mass, per_energy, terms, least, floor, scale):
    """Return short cells as `CELLS` says. Straight ones are crossed as fast without propagators."""
    curved, total = shape(V, mass, per_energy) == 2, 0
    at = integers(terms.size if curved else 0)
    for cell in range(at.size):
        at[cell] = total if terms[cell] != FLAT else -1
        if terms[cell] != FLAT:
            total += 4 * orders(terms[cell], per_energy.shape[1] > 0)
    table = floats(total)
    if curved:
        tabulate(width, V, mass, per_energy, terms, at, least, floor, scale, table)
    span = floats(2)
    span[0], span[1] = floor, scale
    return width, V, mass, per_energy, terms, at, table, span, least


_PREPARE = types.Tuple((CELLS, types.float64[:, ::1], EDGE, EDGE, types.int64))(
    given(1), given(2), given(2), given(2), EDGE, EDGE, types.float64, types.float64, types.boolean
)


@apart(_PREPARE)
def prepare(width, V, mass, per_energy, left, right, floor, top, whole):
    """Make cells ready for sweeps at energies from floor to top.

    Parameters
    ----------
    width, V, mass, per_energy : ndarray
        Shapes (cells,) and (cells, degree + 1).
    left, right : ndarray, shape (4,)
        The edges, see `_kernels._start`.
    floor, top : float
    whole : bool
        Keep also what lies too deep in a barrier to matter for the energies.

    Returns
    -------
    cells : tuple
        As `CELLS` says; a table of short straight cells keeps its own arrays.
    parts : ndarray, shape (parts, columns)
        Rows of owner, offset, share, terms, width and polynomials; none if no cell was cut, and
        more than MOST_PARTS if the end was not reached: then nothing else is of use.
    left, right : ndarray, shape (4,)
        The edges of what was kept.
    home : int
        The deepest cell.
    """
    # A power of two: energies in its units round nothing.
    scale = math.ldexp(1.0, math.frexp(top - floor)[1])
    first, last, left, right = _kept(width, V, mass, per_energy, left, right, top, whole)
    width, V = width[first:last], V[first:last]
    mass, per_energy = mass[first:last], per_energy[first:last]
    terms = counts(width.size)
    if shape(V, mass, per_energy) < 2 and _plan(width, V, mass, per_energy, floor, top, terms):
        cells = _ready(width, V, mass, per_energy, terms, floats(0), floor, scale)
        return cells, grid(0, _HEAD), left, right, _deepest(V)
    least = floats(width.size)
    for cell in range(width.size):
        least[cell] = floor
    if not whole and per_energy.shape[1] == 0:
        least = _least_energies(width, V, mass, floor, top, _deepest(V))
    parts = _cut(width, V, mass, per_energy, least, floor, top)
    if parts.shape[0] > MOST_PARTS:
        nothing = counts(0)
        cells = _ready(
            width[:0], V[:0], mass[:0], per_energy[:0], nothing, floats(0), floor, scale
        )
        return cells, parts, left, right, 0
    V_end, m_end = _HEAD + V.shape[1], _HEAD + V.shape[1] + mass.shape[1]
    first, last, left, right = _kept(
        parts[:, 4], parts[:, _HEAD:V_end], parts[:, V_end:m_end], parts[:, m_end:], left, right,
        top, whole,
    )  # fmt: skip
    parts = parts[first:last]
    terms, of_parts = counts(parts.shape[0]), floats(parts.shape[0])
    for i in range(terms.size):
        terms[i], of_parts[i] = int(parts[i, 3]), least[int(parts[i, 0])]
    cells = _ready(
        parts[:, 4], parts[:, _HEAD:V_end], parts[:, V_end:m_end], parts[:, m_end:],
        terms, of_parts, floor, scale,
    )  # fmt: skip
    return cells, parts, left, right, _deepest(cells[1])


@kernel(signature=_PREPARE, entry=True)
def prepared(width, V, mass, per_energy, left, right, floor, top, whole):
    """`prepare`, to be called from Python."""
    return prepare(width, V, mass, per_energy, left, right, floor, top, whole)
