"""Short cells crossed by a matrix that is a polynomial of the energy, tabulated once.

On a short cell the solution at its end is T(E) times that at its start, and each entry of T is an
entire function of E. Over the energies that will be tried a dozen powers of u = (E - least) / scale
give it to rounding. So the power series in x, whatever the degrees of V and m, is summed once, with
a polynomial in u for each coefficient, and no sweep has to do it again.

The table of a cell with K powers holds T_11 - 1, T_12, T_21, T_22 - 1 for u^0, then for u^1, ...
Seen from the right, T_11 and T_22 change places: the determinant is 1, and phi changes its sign.
"""

from numba import types

from ._compiled import LANES, given, grid, integers, kernel

_GROUP = 8  # cells whose series are summed side by side: rows of both stay in the first cache
_ORDERS = (6, 8, 12)  # powers of u: three kinds of cells


@kernel(signature=types.int64(types.int64, types.boolean))
def orders(terms, with_alpha):
    """How many powers of u a series of so many terms reaches, rounded up to what is compiled.

    phi' = 2 (V - E) psi brings one power for every two terms, a mass that depends on E one more.
    """
    reached = terms + 1 if with_alpha else (terms + 1) // 2 + 1
    if reached <= _ORDERS[0]:
        return _ORDERS[0]
    return _ORDERS[1] if reached <= _ORDERS[1] else _ORDERS[2]


def _step(powers):
    """Make the kernel that crosses a cell with so many powers of u; unrolled, see `_straight`."""

    @kernel(fused=True)
    def step(state, table, shift, first, last):
        for lane in range(LANES):
            p, f, u = state[lane], state[LANES + lane], state[6 * LANES + lane] - shift
            pp, pf, fp, ff = 0.0, 0.0, 0.0, 0.0
            for k in range(powers):
                row = 4 * (powers - 1 - k)
                pp = pp * u + table[row + first]
                pf = pf * u + table[row + 1]
                fp = fp * u + table[row + 2]
                ff = ff * u + table[row + last]
            gain_p = pp * p + pf * f + state[2 * LANES + lane]
            new_p = p + gain_p
            part = new_p - p
            state[2 * LANES + lane] = (p - (new_p - part)) + (gain_p - part)
            state[lane] = new_p
            gain_f = fp * p + ff * f + state[3 * LANES + lane]
            new_f = f + gain_f
            part = new_f - f
            state[3 * LANES + lane] = (f - (new_f - part)) + (gain_f - part)
            state[LANES + lane] = new_f
            was = (p > 0.0) | ((p == 0.0) & (f > 0.0))
            now = (new_p > 0.0) | ((new_p == 0.0) & (new_f > 0.0))
            state[4 * LANES + lane] += 1.0 if was != now else 0.0

    return step


_few, _some, _many = _step(_ORDERS[0]), _step(_ORDERS[1]), _step(_ORDERS[2])


@kernel(inline=True)
def propagated(state, table, start, shift, backward, powers):
    """Cross a cell whose propagator begins at `start` and is one in u - shift.

    `state` as for `straight`, with u behind the energies.
    """
    first, last = (3, 0) if backward else (0, 3)
    cell = table[start : start + 4 * powers]
    if powers == _ORDERS[0]:
        _few(state, cell, shift, first, last)
    elif powers == _ORDERS[1]:
        _some(state, cell, shift, first, last)
    else:
        _many(state, cell, shift, first, last)


@kernel
def _zeros(rows, columns):
    out = grid(rows, columns)
    for i in range(rows):
        for j in range(columns):
            out[i, j] = 0.0
    return out


@kernel(fused=True, inline=True)
def _set(out, row, c, i, series, k):
    for lane in range(_GROUP):
        out[row, lane] = c[i, lane] * series[k, lane]


@kernel(fused=True, inline=True)
def _add(out, row, c, i, series, k):
    for lane in range(_GROUP):
        out[row, lane] += c[i, lane] * series[k, lane]


@kernel
def _series(psi, phi, w, m, q, sizes, terms, powers, with_alpha):
    """Continue both series from order 0, in rows: power i of u at order k is row k powers + i.

    m phi = psi' and w psi = phi', all in units of the cell, and q what m gains with u; w ends with
    what it gains itself.
    """
    w_size, m_size, q_size = sizes
    for k in range(terms):
        share = 1.0 / (k + 1.0)
        reach = k + 2 if with_alpha else (k + 2) // 2 + 1
        for i in range(min(reach, powers)):
            row, before = (k + 1) * powers + i, k * powers + i
            _set(psi, row, m, 0, phi, before)
            for j in range(1, min(k + 1, m_size)):
                _add(psi, row, m, j, phi, before - j * powers)
            _set(phi, row, w, 0, psi, before)
            for j in range(1, min(k + 1, w_size)):
                _add(phi, row, w, j, psi, before - j * powers)
            if i > 0:
                for j in range(min(k + 1, q_size)):
                    _add(psi, row, q, j, phi, before - j * powers - 1)
                _add(phi, row, w, w_size, psi, before - 1)
            for lane in range(_GROUP):
                psi[row, lane] *= share
                phi[row, lane] *= share


@kernel(signature=types.int64(given(1)))
def filled(c):
    """How many numbers come before the zeros at the end."""
    size = c.size
    while size > 0 and c[size - 1] == 0.0:
        size -= 1
    return size


@kernel
def tabulate(width, V, mass, per_energy, terms, at, least, floor, scale, table):
    """Write the propagators of all cells that have a place in `table`.

    Parameters
    ----------
    width, V, mass, per_energy, terms
        As for `_kernels.sweep`.
    at : ndarray of int64, shape (cells,)
        Where each begins, or -1.
    least : ndarray, shape (cells,) or (0,)
        The energy at which each propagator begins; none: at the floor.
    floor, scale : float
        u is (E - least) / scale.
    table : ndarray
        Result.
    """
    count, columns = width.size, per_energy.shape[1]
    most = 1
    for cell in range(count):
        if at[cell] >= 0:
            most = max(most, terms[cell])
    powers = orders(most, columns > 0)
    psi = _zeros((most + 1) * powers, _GROUP)
    phi = _zeros((most + 1) * powers, _GROUP)
    w = grid(V.shape[1] + 1, _GROUP)
    m = grid(max(mass.shape[1], columns), _GROUP)
    q = grid(columns, _GROUP)
    members = integers(_GROUP)
    cell = 0
    while cell < count:
        size, longest = 0, 1
        w_size, m_size, q_size = 1, 1, 0
        while cell < count and size < _GROUP:
            if at[cell] >= 0:
                members[size] = cell
                size += 1
                longest = max(longest, terms[cell])
                w_size, m_size = max(w_size, filled(V[cell])), max(m_size, filled(mass[cell]))
                q_size = max(q_size, filled(per_energy[cell]))
            cell += 1
        if size == 0:
            return
        m_size = max(m_size, q_size)
        for lane in range(_GROUP):
            one = members[min(lane, size - 1)]
            h, low = width[one], least[one] if least.size > 0 else floor
            w[w_size, lane] = -2.0 * h * scale
            for j in range(w_size):
                w[j, lane] = 2.0 * h * (V[one, j] - (low if j == 0 else 0.0))
            for j in range(m_size):
                m[j, lane] = h * mass[one, j] if j < mass.shape[1] else 0.0
            for j in range(q_size):
                m[j, lane] += h * low * per_energy[one, j]
                q[j, lane] = h * scale * per_energy[one, j]
        for solution in range(2):
            for lane in range(_GROUP):
                psi[0, lane], phi[0, lane] = 1.0 - solution, 1.0 * solution
            _series(psi, phi, w, m, q, (w_size, m_size, q_size), longest, powers, columns > 0)
            for lane in range(size):
                one = members[lane]
                wide = orders(terms[one], columns > 0)
                for i in range(wide):
                    p, f = 0.0, 0.0
                    for k in range(longest, 0, -1):
                        p += psi[k * powers + i, lane]
                        f += phi[k * powers + i, lane]
                    table[at[one] + 4 * i + solution] = p
                    table[at[one] + 4 * i + 2 + solution] = f
