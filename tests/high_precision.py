"""An independent judge: levels counted in 50-digit arithmetic from the definition of a profile.

It takes the exact rational meaning of the doubles in a profile's cells, carries psi and phi across
each cell in mpmath, by power series or, if flat, in closed form, and counts zeros. It shares no
code with any solver; where the count below E is n or less and the count below E' is n + 1 or
more, level n lies between E and E'.
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
    """Carry psi, phi over a cell, halved until each part holds at most one zero."""
    w = [V[0] - E] + V[1:]
    if not any(V[1:]) and not any(m[1:]):
        return _cross_flat(2 * w[0], m[0], h, psi, phi)
    if 2 * sum(abs(c) for c in m) * sum(abs(c) for c in w) * h**2 > 4:  # < pi^2
        zeros, half = 0, mpmath.mpf(1) / 2
        for t in (mpmath.mpf(0), half):
            part = _shifted(V, t, half), _shifted(m, t, half), h / 2
            psi, phi, crossed = _cross(*part, E, psi, phi)
            zeros += crossed
        return psi, phi, zeros
    a, b = [psi], [phi]
    far_psi, far_phi = psi, phi
    for n in range(1, 400):
        a.append(sum(m[j] * b[n - 1 - j] for j in range(min(n, len(m)))) * h / n)
        b.append(sum(2 * w[j] * a[n - 1 - j] for j in range(min(n, len(w)))) * h / n)
        far_psi += a[n]
        far_phi += b[n]
        if (
            n > 5
            and max(abs(c) for c in a[-4:]) <= TERMS_BELOW * abs(far_psi)
            and max(abs(c) for c in b[-4:]) <= TERMS_BELOW * abs(far_phi)
        ):
            break
    return _counted(psi, phi, far_psi, far_phi)


def _cross_flat(pull, m, h, psi, phi):
    """The same where m and V - E = pull / 2 are constant: steps of cos and sin, or one of cosh."""
    k = mpmath.sqrt(abs(m * pull))
    steps = 1 if pull >= 0 else int(mpmath.ceil(k * h / 2)) or 1
    c, s = (mpmath.cosh, mpmath.sinh) if pull > 0 else (mpmath.cos, mpmath.sin)
    c, s = c(k * h / steps), s(k * h / steps) / k if k else h
    zeros = 0
    for _ in range(steps):
        psi, phi, crossed = _counted(psi, phi, c * psi + s * m * phi, c * phi + s * pull * psi)
        zeros += crossed
    return psi, phi, zeros


def _counted(psi, phi, far_psi, far_phi):
    """The far state, brought to size 1, and whether psi has changed its sign on the way."""
    size = abs(far_psi) + abs(far_phi)
    crossed = int(_sign(far_psi, far_phi) != _sign(psi, phi))
    return far_psi / size, far_phi / size, crossed


def _shifted(c, t, r):
    """Coefficients of p(t + r s) in s."""
    out = list(c)
    for k in range(len(out) - 1):
        for j in range(len(out) - 2, k - 1, -1):
            out[j] += t * out[j + 1]
    return [x * r**k for k, x in enumerate(out)]
