"""Cells for tests of the kernels: made at random, made ready, and crossed in 50 digits."""

import mpmath
import numpy as np

from eigen1d import _compiled, _kernels, _plan

EPS = np.finfo(float).eps
OPEN, WALL = np.array([1.0, 9.0, 0.7, 0.0]), np.array([0.0, 0.0, 1.0, 0.0])
KINDS = ["straight", "flat", "graded", "alpha", "cubic", "cubic-alpha"]
ENERGIES = np.linspace(0.3, 9.0, 16)
# Ways across a short cell, and how many columns of V and of the mass send it there.
WAYS = {"straight": (2, 1), "graded": (2, 2), "propagated": (3, 1)}


def table(width, V, mass, per_energy=None):
    """Arrays as the kernels want them, from lists of coefficients."""
    V, mass = (np.array(rows, dtype=float, ndmin=2) for rows in (V, mass))
    empty = np.empty((len(width), 0))
    per_energy = empty if per_energy is None else np.array(per_energy, dtype=float, ndmin=2)
    return np.array(width, dtype=float), V, mass, per_energy


def rough_cells(seed, kind, count=12, longest=1.5):
    """Random cells of one of KINDS: V and mass flat, straight or cubic, alpha or none."""
    random = np.random.default_rng(seed)
    width = random.uniform(0.05, longest, count)
    degree = {"straight": 1, "flat": 0, "graded": 1, "alpha": 1, "cubic": 3, "cubic-alpha": 3}[kind]
    V = random.uniform(-4, 4, (count, degree + 1))
    V[:, 0] += 5
    mass = random.uniform(0.3, 2.0, (count, 1))
    per_energy = None
    if kind not in ("straight", "flat"):
        mass = np.column_stack([mass, random.uniform(-0.2, 0.5, count)])
    if kind.endswith("alpha"):
        per_energy = random.uniform(0.0, 0.3, (count, 2))
    return table(width, V, mass, per_energy)


def padded(given, way):
    """The same cells with columns of zeros: more columns are crossed by a more general kernel."""
    width, V, mass, per_energy = given
    V, mass = (
        np.column_stack([rows, np.zeros((width.size, max(columns - rows.shape[1], 0)))])
        for rows, columns in zip((V, mass), WAYS[way], strict=True)
    )
    return width, V, mass, per_energy


def ready(given, low, high):
    """Cells as a sweep wants them, for energies from low to high."""
    return _plan.prepared(*given, WALL, WALL, float(low), float(high), True)[0]


def sweep(cells, energies, *, edge=WALL, backward=False, stop=None, stride=1, run=_kernels.swept):
    """Results of the kernel: psi, phi, zeros, trail."""
    energies = np.array(energies, dtype=float, ndmin=1)
    count = cells[0].size
    if stop is None:
        stop = 0 if backward else count
    stop = np.broadcast_to(stop, energies.shape).astype(np.int64)
    psi, phi = np.empty(energies.size), np.empty(energies.size)
    zeros = np.empty(energies.size, np.int64)
    trail = np.full((count // stride + 1, 3, energies.size), np.nan)
    run(cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride)
    return psi, phi, zeros, trail


def crossed(given, energies, **keywords):
    """The same for cells that are not ready."""
    return sweep(ready(given, np.min(energies), np.max(energies)), energies, **keywords)


def direction(psi, phi):
    """psi and phi without their common factor, which no kernel promises."""
    size = np.hypot(psi, phi)
    return psi / size, phi / size


def exact_matrix(cells, cell, energy, t=1):
    """T - 1 of a short cell up to t, and a bound for it, in 50 digits: 2 by 2 lists each.

    psi' = m phi, phi' = 2 (V - E) psi, as one power series in t; the bound is the series of the
    sizes of all coefficients, which is what rounding is to be compared with.
    """
    width, V, mass, per_energy = cells[:4]
    h, E, t = (mpmath.mpf(float(x)) for x in (width[cell], energy, t))
    w = [2 * h * mpmath.mpf(float(c)) for c in V[cell]]
    w[0] -= 2 * h * E
    m = [h * mpmath.mpf(float(c)) for c in mass[cell]]
    q = [h * E * mpmath.mpf(float(c)) for c in per_energy[cell]]
    m += [mpmath.mpf(0)] * (len(q) - len(m))
    m = [c + (q[j] if j < len(q) else 0) for j, c in enumerate(m)]

    def total(w, m, psi, phi):
        a, b, power = [mpmath.mpf(psi)], [mpmath.mpf(phi)], mpmath.mpf(1)
        gain_a, gain_b = mpmath.mpf(0), mpmath.mpf(0)
        for k in range(200):
            a.append(sum(m[j] * b[k - j] for j in range(min(k + 1, len(m)))) / (k + 1))
            b.append(sum(w[j] * a[k - j] for j in range(min(k + 1, len(w)))) / (k + 1))
            power *= t
            gain_a, gain_b = gain_a + a[-1] * power, gain_b + b[-1] * power
            if k > 20 and all(abs(c) < mpmath.mpf(10) ** -55 for c in a[-9:] + b[-9:]):
                break
        return gain_a, gain_b

    def both(w, m):
        return np.array([total(w, m, 1, 0), total(w, m, 0, 1)]).T

    return both(w, m), both([abs(c) for c in w], [abs(c) for c in m])


def propagator(cells, cell, energy):
    """T - 1 of a cell from its table, in doubles, by the powers that a sweep would use."""
    at, table, (floor, scale), _ = cells[5:]
    ends = np.append(np.sort(at[at >= 0]), table.size)
    rows = table[at[cell] : ends[np.searchsorted(ends, at[cell], "right")]].reshape(-1, 2, 2)
    return np.polynomial.polynomial.polyval((energy - floor) / scale, rows)


LANES = _compiled.LANES
