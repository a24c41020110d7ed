"""The equation on one grid: the flux form and the Numerov form, as symmetric tridiagonal matrices.

Flux form, order 2, any grid, mass and jumps. Integrating the equation over the dual cell of node i
(from the middle of the interval on its left to the middle of the one on its right) gives

    -(phi[i+1/2] - phi[i-1/2]) / 2 + (integral of V) psi[i] = E (width) psi[i],
    phi[i+1/2] = (psi[i+1] - psi[i]) / (integral of m from x[i] to x[i+1]),

with all integrals exact. Symmetrised, the matrix goes to LAPACK's bisection [1]_.

Numerov form, order 4, for a constant mass, no jumps and equal steps [2]_.

References
----------
.. [1] W. Barth, R. S. Martin, J. H. Wilkinson, Numer. Math. 9 (1967) 386.
.. [2] B. Numerov, Astron. Nachr. 230 (1927) 359.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss
from scipy.linalg import eigh_tridiagonal

from .errors import InputError

EPS = np.finfo(float).eps
_GROUP = 16  # wave functions found at a time, where they need not be orthogonal to all others


@dataclass(frozen=True, eq=False)
class FluxForm:
    """The finite-difference equations on one grid, psi = 0 or phi = 0 at its ends.

    Attributes
    ----------
    profile : Profile
    x : ndarray, shape (nodes,)
    V : ndarray, shape (2, nodes - 1)
        Integral of V - min V over the left and right half of each interval.
    mass, mass_per_energy : ndarray, shape (nodes - 1,)
        Integral of m over each interval at energy E: mass + E * mass_per_energy.
    free : (bool, bool)
        Whether phi = 0, instead of psi = 0, at the left and the right end.
    """

    profile: object
    x: np.ndarray
    V: np.ndarray
    mass: np.ndarray
    mass_per_energy: np.ndarray | None
    free: tuple[bool, bool] = (False, False)

    @classmethod
    def on(cls, profile, x, free=(False, False)):
        """Integrate V and m of a profile over the intervals of a grid."""
        halves = np.empty(2 * x.size - 1)
        halves[::2], halves[1::2] = x, 0.5 * (x[:-1] + x[1:])
        V, mass, per_energy = _integrals(profile, halves)
        return cls(
            profile,
            x,
            V.reshape(-1, 2).T,
            mass.reshape(-1, 2).sum(axis=1),
            None if per_energy is None else per_energy.reshape(-1, 2).sum(axis=1),
            free,
        )

    @property
    def unknown(self):
        """slice: the nodes where psi is unknown, all but the ends where it is 0."""
        left, right = self.free
        return slice(0 if left else 1, self.x.size if right else self.x.size - 1)

    @cached_property
    def width(self):
        """ndarray, shape (unknowns,): widths of the dual cells."""
        return _sums_at_nodes(0.5 * np.diff(self.x))[self.unknown]

    def _mass(self, energy):
        if self.mass_per_energy is None:
            return self.mass
        return self.mass + energy * self.mass_per_energy

    def matrix(self, energy):
        """Diagonal and off-diagonal, symmetrised: energies from min V, the mass at `energy`."""
        stiffness = 0.5 / self._mass(energy)
        own = _sums_at_nodes(stiffness) + _sums_at_nodes(self.V[1], self.V[0])
        root = np.sqrt(self.width)
        left, right = self.free
        between = stiffness[0 if left else 1 : stiffness.size - (not right)]
        return own[self.unknown] / self.width, -between / (root[:-1] * root[1:])

    def count(self, energy):
        """Number of levels of this grid below an energy.

        Also with an energy-dependent mass, taken at that energy: eigenvalue n falls as the mass
        grows, so it lies below the energy exactly where level n does.
        """
        height = energy - self.profile.V_min
        if not height > 0:
            return 0
        return _below(*self.matrix(energy), height)

    def energies(self, first, last):
        """Energies of the levels first <= n < last."""
        if self.mass_per_energy is None:
            return self.profile.V_min + self._eigenvalues(first, last, self.profile.V_min)
        return self.profile.V_min + np.array([self._own_height(n) for n in range(first, last)])

    def _eigenvalues(self, first, last, energy):
        """Eigenvalues first <= n < last, from min V, with the mass at one energy."""
        diagonal, off = self.matrix(energy)
        # LAPACK's own tolerance is relative to the largest element, which one short interval makes
        # huge; with none at all bisection ends at the last digits of the eigenvalue itself.
        return eigh_tridiagonal(
            diagonal, off, True, "i", (first, last - 1), False, tol=np.finfo(float).tiny,
            lapack_driver="stebz",
        )  # fmt: skip

    def _own_height(self, n):
        """The height of level n above min V, with the mass taken at that same energy."""
        from scipy.optimize import brentq  # 0.15 s, for alpha alone

        def excess(height):
            return self._eigenvalues(n, n + 1, self.profile.V_min + height)[0] - height

        # The mass grows with the energy and makes the eigenvalue fall: that with the least mass is
        # an upper limit, and the root is the only one. A little above, rounding has no say in that.
        limit = excess(0.0) * (1 + 1e-6)
        return brentq(excess, 0.0, limit, xtol=np.finfo(float).tiny, rtol=4 * EPS)

    def curvature(self, first, last):
        """Sum of stiffness times psi^2 for each level: what rounding of the matrix multiplies.

        Several times an energy's own size where steps are short, since large terms cancel in it.
        """
        out = []
        for low in range(first, last, _GROUP):
            n = np.arange(low, min(low + _GROUP, last))
            psi = self.states(n)[0]
            mass = self._mass(self.profile.V_min)
            out.append((psi[:, 1:] ** 2 + psi[:, :-1] ** 2) @ (0.5 / mass))
        return np.concatenate(out)

    def states(self, n):
        """Wave functions of an array n of consecutive levels, positive in the leftmost lobe.

        Returns
        -------
        psi, phi : ndarray, shape (count, nodes)
            phi = psi'/m, which has no jumps.
        mass : ndarray, shape (count, nodes - 1)
            Integral of m over each interval, at the energy of each level.
        """
        psi = np.zeros((n.size, self.x.size))
        own = self.energies(n[0], n[-1] + 1)
        # Energies that share a matrix go to LAPACK together: it makes their vectors orthogonal.
        groups = [slice(0, n.size)]
        if self.mass_per_energy is not None:
            groups = [slice(i, i + 1) for i in range(n.size)]
        for rows in groups:
            diagonal, off = self.matrix(own[rows][0])
            vectors = eigh_tridiagonal(
                diagonal, off, False, "i", (n[rows][0], n[rows][-1]), False, lapack_driver="stebz"
            )[1]
            for vector, height in zip(vectors.T, own[rows] - self.profile.V_min, strict=True):
                # Where psi is largest its sign tells how many zeros lie on the left.
                top = np.abs(vector).argmax()
                zeros = _below(diagonal[:top], off[: max(top - 1, 0)], height)
                if (vector[top] > 0) == zeros % 2:
                    vector *= -1
            psi[rows, self.unknown] = vectors.T / np.sqrt(self.width)
        own = own[:, None]
        mass = np.broadcast_to(self._mass(own), (n.size, self.mass.size))
        # The equation of half a dual cell: phi at a node from phi in the middle before it.
        phi = np.empty_like(psi)
        flux = np.diff(psi) / mass
        height = own - self.profile.V_min
        phi[:, 1:] = flux + 2 * (self.V[1] - 0.5 * height * np.diff(self.x)) * psi[:, 1:]
        phi[:, 0] = flux[:, 0]
        return psi, phi, mass

    def halved(self):
        """Return the same on the grid with every interval halved."""
        x = np.empty(2 * self.x.size - 1)
        x[::2], x[1::2] = self.x, 0.5 * (self.x[:-1] + self.x[1:])
        return FluxForm.on(self.profile, x, self.free)


def _sums_at_nodes(before, after=None):
    """What the intervals before and after each node add up to, shape (nodes,)."""
    total = np.zeros(before.size + 1)
    total[1:] += before
    total[:-1] += before if after is None else after
    return total


def _below(diagonal, off, height):
    """Number of eigenvalues below `height`, none of them being below -`height`."""
    if not diagonal.size:
        return 0
    # A tolerance wider than the interval: LAPACK counts and refines nothing.
    return eigh_tridiagonal(
        diagonal, off, True, "v", (-height, height), False, tol=4 * height, lapack_driver="stebz"
    ).size


def _integrals(profile, x):
    """Exact integrals of V - min V and m over the intervals of x, m as mass + E * mass_per_energy.

    Gauss's rule on every stretch of a single polynomial; profiles of millions of rows have many
    stretches in an interval.
    """
    inner = profile.x[np.searchsorted(profile.x, x[0], "right") : np.searchsorted(profile.x, x[-1])]
    ends = np.union1d(x, inner)
    degree = profile.V_cells.shape[1] + profile.mass_cells.shape[1]
    if profile.alpha_cells is not None:
        degree += profile.alpha_cells.shape[1]
    node, weight = leggauss(degree // 2 + 1)
    first = np.searchsorted(ends, x[:-1])
    sums = np.zeros((4 if profile.alpha_cells is not None else 2, x.size - 1))
    width = np.diff(ends)
    for t, w in zip(0.5 * (node + 1), 0.5 * weight, strict=True):
        at = ends[:-1] + t * width
        V, mass = profile.V(at), profile.m(at) * profile.units.electron_mass
        fields = [V - profile.V_min, mass]
        if profile.alpha_cells is not None:
            per_energy = mass * profile.alpha(at)
            fields[1] = mass - per_energy * V
            fields.append(per_energy)
        for total, values in zip(sums, fields, strict=False):
            total += np.add.reduceat(w * width * values, first)
    return sums[0], sums[1], sums[2] if profile.alpha_cells is not None else None


def numerov(profile, x, first, last):
    """Energies of the levels first <= n < last by the Numerov form.

    y = (1 - h^2 g / 12) psi, g = 2 m (V - E), obeys

        -(y[i+1] - 2 y[i] + y[i-1]) / h^2 + G_i(E) y[i] = 0,   G = g / (1 - h^2 g / 12).

    G falls with E, so the n-th eigenvalue of this matrix passes zero once, at level n; Newton's
    method finds where, from the matrix linearised in E. A kink of V leaves the form at order 2.

    Raises
    ------
    InputError
        Steps that differ, a mass that varies, a jump of V, or steps too long where V is high.
    """
    _check_numerov(profile, x)
    h = (x[-1] - x[0]) / (x.size - 1)
    mass = profile.units.electron_mass * profile.mass_cells[0, 0]
    V = profile.V(x[1:-1])

    def linearised(energy):
        g = 2 * mass * (V - energy)
        if (g >= 12 / h**2).any():
            # A finer grid also meets V that lies between the nodes of this one and its ends.
            highest = 2 * mass * (profile.V(x).max() - profile.V_min)
            raise InputError(
                "the Numerov form turns negative where V is high; use steps below "
                f"{np.sqrt(12 / highest):.3g}, found {h:.3g}"
            )
        G = g / (1 - h**2 * g / 12)
        slope = 2 * mass / (1 - h**2 * g / 12) ** 2
        return (2 / h**2 + G) / slope, -1 / h**2 / np.sqrt(slope[:-1] * slope[1:])

    out = np.empty(last - first)
    for i, n in enumerate(range(first, last)):
        energy = V.min()
        for _ in range(100):
            diagonal, off = linearised(energy)
            change = eigh_tridiagonal(
                diagonal, off, True, "i", (n, n), False, lapack_driver="stebz"
            )[0]
            energy += change
            if abs(change) <= 4 * EPS * np.abs(diagonal).max():
                break
        out[i] = energy
    return out


def _check_numerov(profile, x):
    """Refuse what the Numerov form cannot do to order 4."""
    step = np.diff(x)
    if np.ptp(step) > 1e-9 * step.mean():
        raise InputError("the Numerov form needs equal steps; use the flux form")
    open_mass = [edge.mass for edge in (profile.left, profile.right) if edge.kind == "open"]
    if (
        np.ptp(np.append(profile.mass_cells[:, 0], open_mass))
        or profile.mass_cells[:, 1:].any()
        or (profile.alpha_cells is not None and profile.alpha_cells.any())
    ):
        raise InputError("the Numerov form needs one constant mass; use the flux form")
    V = profile.V_cells
    before = np.append(profile.left.V, V.sum(axis=1))
    jump = np.abs(np.append(V[:, 0], profile.right.V) - before)
    jump[(profile.x <= x[0]) | (profile.x >= x[-1])] = 0.0  # not on the grid
    if jump.max() > 1e-10 * max(np.ptp(before), np.abs(V[:, 1:]).max(initial=0.0)):
        raise InputError(
            f"the Numerov form needs a V without jumps; it jumps at x = "
            f"{profile.x[jump.argmax()]:.12g}; use the flux form"
        )
