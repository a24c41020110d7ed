"""An independent judge: levels counted in 50-digit arithmetic from the definition of a profile.

It takes the exact rational meaning of the doubles in a profile's cells, carries psi and phi across
each cell by power series in mpmath, and counts zeros. It shares no code with any solver; where the
count below E is n or less and the count below E' is n + 1 or more, level n lies between E and E'.
"""

import mpmath

TERMS_BELOW = mpmath.mpf(10) ** -60


def count_below(profile, energy, digits=50):
    """Number of levels of `profile` below `energy` (a float or mpf, in the profile's unit)."""
    with mpmath.workdps(digits):
        unit = mpmath.mpf(profile.units.electron_mass)
        E = mpmath.mpf(energy)
        psi, phi = _start(profile.left, E, unit)
        zeros = 0
        for i in range(profile.cells):
            h = mpmath.mpf(float(profile.x[i + 1])) - mpmath.mpf(float(profile.x[i]))
            V = [mpmath.mpf(float(c)) for c in profile.V_cells[i]]
            m = [unit * mpmath.mpf(float(c)) for c in profile.mass_cells[i]]
            if profile.alpha_cells is not None:
                alpha = [mpmath.mpf(float(c)) for c in profile.alpha_cells[i]]
                inner = _times(alpha, [E - V[0]] + [-c for c in V[1:]])
                m = _times(m, [1 + inner[0]] + inner[1:])
            psi, phi, crossed = _cross(V, m, h, E, psi, phi)
            zeros += crossed
        if profile.right.kind == "wall":
            # Zeros strictly inside: one at the wall itself means E is a level, not above it.
            return zeros
        _, kappa = _start(profile.right, E, unit)
        return zeros + int((phi + kappa * psi) * _sign(psi, phi) < 0)


def _start(edge, E, unit):
    if edge.kind == "wall":
        return mpmath.mpf(0), mpmath.mpf(1)
    V = mpmath.mpf(edge.V)
    m = unit * mpmath.mpf(edge.mass) * (1 + mpmath.mpf(edge.alpha) * (E - V))
    return mpmath.mpf(1), mpmath.sqrt(2 * max(V - E, mpmath.mpf(0)) / m)


def _sign(psi, phi):
    return mpmath.sign(psi) if psi != 0 else mpmath.sign(phi)


def _times(a, b):
    out = [mpmath.mpf(0)] * (len(a) + len(b) - 1)
    for i, x in enumerate(a):
        for j, y in enumerate(b):
            out[i + j] += x * y
    return out


def _cross(V, m, h, E, psi, phi):
    """Carry psi, phi over a cell in steps so short that each holds at most one zero."""
    reach = abs(V[0] - E) + sum(abs(c) for c in V[1:])
    steps = int(mpmath.ceil(mpmath.sqrt(2 * sum(abs(c) for c in m) * reach) * h)) or 1
    zeros = 0
    for k in range(steps):
        t, r = mpmath.mpf(k) / steps, mpmath.mpf(1) / steps
        w = _shifted([V[0] - E] + V[1:], t, r)
        mass = _shifted(m, t, r)
        a, b = [psi], [phi]
        step = h / steps
        while len(a) < 6 or max(abs(x) for x in a[-4:]) > TERMS_BELOW * abs(sum(a)) or max(
            abs(x) for x in b[-4:]
        ) > TERMS_BELOW * abs(sum(b)):
            n = len(a)
            a_next = sum(mass[j] * b[n - 1 - j] for j in range(min(n, len(mass)))) * step / n
            b_next = sum(2 * w[j] * a[n - 1 - j] for j in range(min(n, len(w)))) * step / n
            a.append(a_next)
            b.append(b_next)
            if n > 400:
                break
        before = _sign(psi, phi)
        psi, phi = sum(a), sum(b)
        zeros += int(_sign(psi, phi) != before)
        size = abs(psi) + abs(phi)
        psi, phi = psi / size, phi / size
    return psi, phi, zeros


def _shifted(c, t, r):
    """Coefficients of p(t + r s) in s."""
    out = list(c)
    for k in range(len(out) - 1):
        for j in range(len(out) - 2, k - 1, -1):
            out[j] += t * out[j + 1]
    return [x * r**k for k, x in enumerate(out)]
