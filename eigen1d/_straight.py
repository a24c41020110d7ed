"""Cells of straight V and straight mass in vector lanes: what tables of many rows consist of.

With t in [0, 1] across the cell, psi = sum a_k t^k and phi = sum b_k t^k. Of constant mass,
psi'' = (z + s t) psi gives a_(k+2) = (z a_k + s a_(k-1)) / ((k+1) (k+2)), and nothing else. With a
mass that is a straight line (in t, and at each energy), psi' = (m_0 + m_1 t) phi and
phi' = (w_0 + w_1 t) psi give both series side by side.
"""

from ._compiled import LANES, SERIES_TERMS, kernel


@kernel
def shape(V, mass, per_energy):
    """0: all cells have straight V and constant mass; 1: V and mass are straight; 2: neither."""
    if V.shape[1] > 2 or mass.shape[1] > 2 or per_energy.shape[1] > 2:
        return 2
    return 0 if mass.shape[1] == 1 and per_energy.shape[1] == 0 else 1


def _straight_step(terms):
    """Make the kernel that crosses a short cell of straight V and constant mass with `terms` terms.

    A constant number of terms is unrolled, which leaves one loop over lanes for the vector unit;
    all its data in one array at constant offsets spares it checks for overlap. 1 ns a lane with 3
    terms, 2 ns with 8, against 26 ns with terms outside lanes in separate arrays.
    """

    @kernel(fused=True)
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
            # Compensated (two-sum of D. E. Knuth, TAOCP 2, sec. 4.2.2): a cell of a fine table
            # changes psi by little; adding that plainly would cost half an ulp of psi a cell, which
            # 10^7 rows turn into 1e-13 of the energy. Written out here, in `_graded_step` and in
            # `_propagators`: a loop over lanes with a call in it is no longer made of vectors.
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


_straight_3, _straight_6 = _straight_step(3), _straight_step(6)
_straight_10, _straight_15 = _straight_step(10), _straight_step(15)
_straight_22 = _straight_step(SERIES_TERMS)


@kernel(inline=True)
def straight(state, v, slope, mass, h, terms):
    """Cross a cell of straight V and constant mass.

    `state` holds, LANES numbers each: psi, phi, their carries, zeros, energies.
    """
    scale = 2.0 * mass * h * h
    s = scale * slope
    if terms <= 3:
        _straight_3(state, v, scale, s, mass * h)
    elif terms <= 6:
        _straight_6(state, v, scale, s, mass * h)
    elif terms <= 10:
        _straight_10(state, v, scale, s, mass * h)
    elif terms <= 15:
        _straight_15(state, v, scale, s, mass * h)
    else:
        _straight_22(state, v, scale, s, mass * h)


def _graded_step(terms):
    """Make the kernel that crosses a short cell of straight V and mass with `terms` terms."""

    @kernel(fused=True)
    def step(state, v, slope, mass, mass_slope, per_energy, per_energy_slope, h):
        for lane in range(LANES):
            p, f = state[lane], state[LANES + lane]
            energy = state[5 * LANES + lane]
            w = 2.0 * h * (v - energy)
            w_slope = 2.0 * h * slope
            m = h * (mass + energy * per_energy)
            m_slope = h * (mass_slope + energy * per_energy_slope)
            a, b, a_before, b_before = p, f, 0.0, 0.0
            gain_p, gain_f = 0.0, 0.0
            for k in range(terms):
                a_next = (m * b + m_slope * b_before) * (1.0 / (k + 1.0))
                b_next = (w * a + w_slope * a_before) * (1.0 / (k + 1.0))
                gain_p += a_next
                gain_f += b_next
                a_before, b_before, a, b = a, b, a_next, b_next
            gain_p += state[2 * LANES + lane]
            new_p = p + gain_p
            part = new_p - p
            state[2 * LANES + lane] = (p - (new_p - part)) + (gain_p - part)
            state[lane] = new_p
            gain_f += state[3 * LANES + lane]
            new_f = f + gain_f
            part = new_f - f
            state[3 * LANES + lane] = (f - (new_f - part)) + (gain_f - part)
            state[LANES + lane] = new_f
            was = (p > 0.0) | ((p == 0.0) & (f > 0.0))
            now = (new_p > 0.0) | ((new_p == 0.0) & (new_f > 0.0))
            state[4 * LANES + lane] += 1.0 if was != now else 0.0

    return step


_graded_6, _graded_12 = _graded_step(6), _graded_step(12)
_graded_22 = _graded_step(SERIES_TERMS)


@kernel(inline=True)
def graded(state, v, slope, mass, mass_slope, per_energy, per_energy_slope, h, terms):
    """Cross a cell of straight V and mass; `state` as for `straight`."""
    if terms <= 6:
        _graded_6(state, v, slope, mass, mass_slope, per_energy, per_energy_slope, h)
    elif terms <= 12:
        _graded_12(state, v, slope, mass, mass_slope, per_energy, per_energy_slope, h)
    else:
        _graded_22(state, v, slope, mass, mass_slope, per_energy, per_energy_slope, h)
