"""Finite differences on a ladder of grids: a second opinion that shares only the profile.

Flux form, order 2, any grid, mass and jumps. Integrating the equation over the dual cell of node i
(from the middle of the interval on its left to the middle of the one on its right) gives

    -(phi[i+1/2] - phi[i-1/2]) / 2 + (integral of V) psi[i] = E (width) psi[i],
    phi[i+1/2] = (psi[i+1] - psi[i]) / (integral of m from x[i] to x[i+1]),

with all integrals exact. The matrix is symmetrised and given to LAPACK's bisection [1]_.

Numerov form, order 4, for a constant mass, no jumps and equal steps [2]_.

Ladder. Every interval of a base grid is halved again and again. Inside each interval V and m are
polynomials, so the error has an expansion in even powers of the step and Richardson's extrapolation
[3]_ removes them one by one; differences within its table estimate what is left. An open edge is a
box that reaches so far that the tail of anything bound by 1e-14 of the depth has died out.

References
----------
.. [1] W. Barth, R. S. Martin, J. H. Wilkinson, Numer. Math. 9 (1967) 386 (bisection).
.. [2] B. Numerov, Astron. Nachr. 230 (1927) 359.
.. [3] L. F. Richardson, J. A. Gaunt, Phil. Trans. R. Soc. A 226 (1927) 299.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.polynomial.legendre import leggauss
from scipy.linalg import eigh_tridiagonal

from .errors import InputError
from .levels import Budget, Levels

EPS = np.finfo(float).eps
# The base grid: steps up to _STEP / k, or up to _SPREAD of the distance from the nearest place where
# the highest level moves, since a tail exp(-kappa d) is resolved by steps that grow with d.
_STEP, _SPREAD = 0.7, 0.35
_BASE_INTERVALS = 1 << 14  # tables with more rows than this share intervals
_FINEST = 1 << 18
_RUNGS = 7  # grids in a ladder, at most
_WORK = 1 << 24  # levels times intervals on the finest grid, at most
_FALL = 256.0  # an error estimate falls by no more from grid to grid
_STATE_RUNGS, _STATE_VALUES = 5, 1 << 24  # grids tried for wave functions; values of psi kept, at most
_TARGET = 1e-10  # of a level's height: the ladder ends where its estimate is below
_LEAST_BINDING = 1e-14  # of the depth: the box holds the tails of levels bound by more
_TAIL = 20.0  # kappa times the length of the box: exp(-2 * 20) is far below rounding
_GROUP = 16  # wave functions found at a time, where they need not be orthogonal to all others


def find(profile, request):
    """Find levels of a profile by finite differences.

    Parameters
    ----------
    profile : Profile
    request : Request

    Returns
    -------
    Levels
        `bracket` is the energy plus and minus the error estimate. Levels bound by less than the
        estimate are left out, which a note says; `complete` is False where a level lies so close to
        an end of the window that it may be on the other side.
    """
    edge, count = profile.open_edge, request.count
    low, high = request.window or (-np.inf, np.inf)
    high = min(high, edge)
    if high <= profile.V_min:
        return _levels(profile, np.arange(0), np.empty(0), np.empty(0), None)
    if np.isinf(high):
        ladder = _Ladder.up_to_level(profile, count)
        return _levels(profile, np.arange(count), *ladder.estimates(0, count), ladder)
    ladder = _Ladder(profile, high)
    n, energy, error = ladder.between(low, high, count)
    notes = []
    listed = (low < energy) & (energy < high)
    if count is not None:
        listed &= n < count
    if high == edge:
        seen = edge - energy > error
        notes += [
            f"a level bound by less than {least:.2g} {profile.units.energy} cannot be told from none"
            for least in error[~seen & (n == listed.sum() - 1)]
        ]
        listed &= seen
    ends = [end for end in (low, high) if np.isfinite(end) and end != edge]
    near = [bool((np.abs(energy - end) <= error).any()) for end in ends]
    if any(near):
        notes.append("a level lies closer to an end of the window than its error")
    return _levels(
        profile, n[listed], energy[listed], error[listed], ladder, not any(near), tuple(notes)
    )


def _levels(profile, n, energy, error, ladder, complete=True, notes=()):
    return Levels(
        profile=profile,
        n=n,
        energy=energy,
        bracket=np.column_stack([energy - error, energy + error]),
        complete=complete,
        method="finite-difference",
        states=States(ladder, n),
        budget=Budget(numeric=error),
        notes=notes,
    )


def estimates(profile, first, last):
    """Energies of the levels first <= n < last, and the estimate of their errors.

    Parameters
    ----------
    profile : Profile
    first, last : int
        Between open edges, numbers beyond the last bound level give states of the box, at or above
        the edge.

    Returns
    -------
    energy, error : ndarray, shape (last - first,)
        In `profile.units.energy`.
    """
    return _Ladder.up_to_level(profile, last).estimates(first, last)


def on_grid(profile, x, first, last, form="flux"):
    """Energies of one finite-difference matrix, as they are: no extrapolation.

    Parameters
    ----------
    profile : Profile
    x : ndarray, shape (nodes,)
        Ascending; psi = 0 at its two ends. The flux form takes any; the Numerov form equal steps.
    first, last : int
        The levels first <= n < last.
    form : {"flux", "numerov"}

    Returns
    -------
    ndarray, shape (last - first,)
        In `profile.units.energy`.

    Raises
    ------
    InputError
        A grid with too few nodes, or one that the Numerov form cannot use, or a profile whose mass
        varies or that jumps, for which the Numerov form is not of order 4.

    Examples
    --------
    >>> from eigen1d import Profile, Units
    >>> box = Profile.from_layers([1.0], [0.0], left="wall", right="wall",
    ...                           units=Units("bohr", "hartree"))
    >>> import numpy as np
    >>> on_grid(box, np.linspace(0, 1, 101), 0, 2).round(4)     # pi^2 (n + 1)^2 / 2 = 4.9348, ...
    array([ 4.9344, 19.7327])
    """
    x = np.asarray(x, dtype=float)
    if x.ndim != 1 or x.size < last + 2 or not (np.diff(x) > 0).all():
        raise InputError(
            f"a grid needs ascending nodes, two more than the levels wanted ({last}); "
            f"found {x.size}"
        )
    if form == "numerov":
        return _numerov(profile, x, first, last)
    return FluxForm.on(profile, x).energies(first, last)


# One grid -----------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class FluxForm:
    """The finite-difference equations on one grid, psi = 0 at its ends.

    Attributes
    ----------
    profile : Profile
    x : ndarray, shape (nodes,)
    V : ndarray, shape (2, nodes - 1)
        Integral of V - min V over the left and right half of each interval.
    mass, mass_per_energy : ndarray, shape (nodes - 1,)
        Integral of m over each interval at energy E: mass + E * mass_per_energy.
    """

    profile: object
    x: np.ndarray
    V: np.ndarray
    mass: np.ndarray
    mass_per_energy: np.ndarray | None

    @classmethod
    def on(cls, profile, x):
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
        )

    @cached_property
    def width(self):
        """ndarray, shape (nodes - 2,): widths of the dual cells."""
        return 0.5 * (self.x[2:] - self.x[:-2])

    @cached_property
    def size(self):
        """float: the largest matrix element."""
        stiffness = 0.5 / self._mass(self.profile.V_min)
        return float(((stiffness[:-1] + stiffness[1:]) / self.width).max())

    def _mass(self, energy):
        if self.mass_per_energy is None:
            return self.mass
        return self.mass + energy * self.mass_per_energy

    def matrix(self, energy):
        """Diagonal and off-diagonal of the symmetrised matrix, energies from min V; mass at `energy`."""
        stiffness = 0.5 / self._mass(energy)
        V = self.V[1, :-1] + self.V[0, 1:]
        diagonal = (stiffness[:-1] + stiffness[1:] + V) / self.width
        root = np.sqrt(self.width)
        return diagonal, -stiffness[1:-1] / (root[:-1] * root[1:])

    def count(self, energy):
        """Number of levels of this grid below an energy.

        Also with an energy-dependent mass, taken at that energy: eigenvalue n falls as the mass
        grows, so it lies below the energy exactly where level n does.
        """
        height = energy - self.profile.V_min
        if not height > 0:
            return 0
        diagonal, off = self.matrix(energy)
        # A tolerance wider than the interval: LAPACK counts and refines nothing.
        return eigh_tridiagonal(
            diagonal, off, True, "v", (-height, height), False, tol=4 * height,
            lapack_driver="stebz",
        ).size  # fmt: skip

    def energies(self, first, last, guess=None):
        """Energies of the levels first <= n < last; `guess` helps with an energy-dependent mass."""
        if self.mass_per_energy is None:
            return self.profile.V_min + self._eigenvalues(first, last, 0.0)
        if guess is None:
            guess = np.full(last - first, self.profile.V_min)
        return np.array([self._own_energy(first + i, E) for i, E in enumerate(guess)])

    def _eigenvalues(self, first, last, energy):
        """Eigenvalues first <= n < last, from min V, with the mass at one energy."""
        diagonal, off = self.matrix(energy)
        return eigh_tridiagonal(
            diagonal, off, True, "i", (first, last - 1), False, tol=EPS**2 * self.size,
            lapack_driver="stebz",
        )  # fmt: skip

    def _own_energy(self, n, guess):
        """The energy of level n with the mass taken at that same energy, by the secant rule."""

        def excess(energy):
            return self.profile.V_min + self._eigenvalues(n, n + 1, energy)[0] - energy

        old, f_old = guess, excess(guess)
        new = old + f_old
        while abs(new - old) > EPS * self.size:
            f_new = excess(new)
            if f_new == f_old:
                break
            old, new, f_old = new, new - f_new * (new - old) / (f_new - f_old), f_new
        return new

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
        """psi and phi = psi'/m at all nodes, each (count, nodes), for an array n of levels."""
        psi = np.zeros((n.size, self.x.size))
        phi = np.zeros_like(psi)
        for group in [n] if self.mass_per_energy is None else n[:, None]:
            own = self.energies(group[0], group[-1] + 1)
            diagonal, off = self.matrix(own[0])
            vectors = eigh_tridiagonal(
                diagonal, off, False, "i", (group[0], group[-1]), False, lapack_driver="stebz"
            )[1]
            rows = slice(group[0] - n[0], group[-1] + 1 - n[0])
            psi[rows, 1:-1] = vectors.T / np.sqrt(self.width)
            # The equation of half a dual cell: phi at a node from phi in the middle before it.
            height = (own - self.profile.V_min)[:, None]
            flux = np.diff(psi[rows]) / self._mass(own[0])
            change = 2 * (self.V[1] - 0.5 * height * np.diff(self.x)) * psi[rows, 1:]
            phi[rows, 1:] = flux + change
            phi[rows, 0] = flux[:, 0]
        return psi, phi

    def halved(self):
        """Return the same on the grid with every interval halved."""
        x = np.empty(2 * self.x.size - 1)
        x[::2], x[1::2] = self.x, 0.5 * (self.x[:-1] + self.x[1:])
        return FluxForm.on(self.profile, x)


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


def _numerov(profile, x, first, last):
    """Energies of the Numerov form: y = (1 - h^2 g / 12) psi, g = 2 m (V - E), obeys

        -(y[i+1] - 2 y[i] + y[i-1]) / h^2 + G_i(E) y[i] = 0,   G = g / (1 - h^2 g / 12).

    G falls with E, so the n-th eigenvalue of this matrix passes zero once, at level n; Newton's
    method finds where, from the matrix linearised in E.
    """
    step = np.diff(x)
    h = (x[-1] - x[0]) / step.size
    if np.abs(step - h).max() > 1e-9 * h:
        raise InputError("the Numerov form needs equal steps; use the flux form")
    inside = x[1:-1]
    mass = profile.m(inside) * profile.units.electron_mass
    if np.ptp(mass) > 0 or profile.alpha_cells is not None:
        raise InputError("the Numerov form needs one constant mass; use the flux form")
    V = profile.V(inside)

    def linearised(energy):
        g = 2 * mass * (V - energy)
        if (g >= 12 / h**2).any():
            raise InputError(
                f"the Numerov form needs a finer grid here: V rises so high that its weight turns "
                f"negative; use steps below {h * np.sqrt(12 / (g.max() * h**2)):.3g}"
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


# The ladder ---------------------------------------------------------------------------------------


class _Ladder:
    """Grids of a profile, each with half the steps of the one before, fit for energies up to `top`."""

    def __init__(self, profile, top):
        self.profile, self.top = profile, top
        self._box = _box(profile, top)
        self._rungs = [FluxForm.on(profile, _base_grid(profile, top, self._box))]

    @classmethod
    def up_to_level(cls, profile, last):
        """Return a ladder fit for the levels n < last."""
        if np.isfinite(profile.open_edge):
            return cls(profile, profile.open_edge)
        top = profile.V_min
        form = FluxForm.on(profile, np.linspace(profile.x[0], profile.x[-1], 1000 + 16 * last))
        while True:
            # The energy of a coarse grid is too low by a few percent.
            highest = form.energies(last - 1, last)[0]
            if highest <= top:
                return ladder
            top = profile.V_min + 1.1 * (highest - profile.V_min)
            ladder = cls(profile, top)
            form = ladder.rung(2)

    def rung(self, i):
        """The equations on grid i, made when first asked for."""
        while len(self._rungs) <= i:
            self._rungs.append(self._rungs[-1].halved())
        return self._rungs[i]

    def between(self, low, high, count):
        """n, energy and error of all levels between two energies, and of one more on each side."""
        form = self.rung(2)
        first = max(form.count(low) - 1, 0)
        last = form.count(high) + 1
        if count is not None:
            last = min(last, count)
        while True:
            energy, error = self.estimates(first, last)
            more_below = first > 0 and energy[0] >= low
            more_above = energy[-1] < high and (count is None or last < count)
            if not (more_below or more_above):
                return np.arange(first, last), energy, error
            first, last = first - more_below, last + more_above

    def estimates(self, first, last):
        """Extrapolated energies of the levels first <= n < last, and estimates of their errors.

        Of the entries in the last row of Richardson's table the one is taken that differs least from
        its neighbours, and that difference, which is nearer to the error of the worse of the two,
        is its estimate. An estimate may not fall faster from rung to rung than even a smooth
        profile explains: a coincidence in a rough one must not pass for convergence.
        """
        previous = [self.rung(0).energies(first, last)]
        energy, error = previous[0].copy(), np.full(last - first, np.inf)
        todo, spread = np.arange(last - first), np.zeros(last - first)
        height = energy - self.profile.V_min
        rounding = 4 * EPS * (self.rung(0).curvature(first, last) + height)
        for k in range(1, _RUNGS):
            form = self.rung(k)
            row = [form.energies(first + todo[0], first + todo[-1] + 1, energy[todo])]
            for j, before in enumerate(previous, start=1):
                row.append(row[-1] + (row[-1] - before) / (4**j - 1))
            value, width = _least_spread(row, previous)
            spread[todo] = width = np.maximum(width, spread[todo] / _FALL)
            rounding *= 4  # the stiffness of half an interval is twice as large, on both sides
            total = 2 * width + rounding[todo] + self._box_error(value)
            moved = np.abs(value - energy[todo])
            refuted = moved > error[todo]
            total[refuted] = np.maximum(total, moved)[refuted]
            taken = refuted | (total < error[todo])
            energy[todo[taken]], error[todo[taken]] = value[taken], total[taken]
            if k > 1:
                target = _TARGET * (energy[todo] - self.profile.V_min)
                unfinished = np.flatnonzero(error[todo] > np.maximum(target, 4 * rounding[todo]))
                nodes = 2 * form.x.size
                if not unfinished.size or nodes > _FINEST or nodes * unfinished.size > _WORK:
                    break
                keep = slice(unfinished[0], unfinished[-1] + 1)
                todo, row = todo[keep], [entry[keep] for entry in row]
            previous = row
        return energy, error

    def _box_error(self, energy):
        """What the walls of the box can do to an energy: the square of the tail that they cut off."""
        total = np.zeros_like(energy)
        for edge, length in zip((self.profile.left, self.profile.right), self._box, strict=True):
            if edge.kind == "open":
                mass = edge.mass * (1 + edge.alpha * (self.top - edge.V))
                mass *= self.profile.units.electron_mass
                kappa = np.sqrt(2 * mass * np.maximum(edge.V - energy, 0))
                total += 5 / (mass * length**2) * np.exp(-2 * kappa * length)
        return total


def _least_spread(row, previous):
    """Of a row of Richardson's table, the entry nearest to its neighbours; and how near it is."""
    spread = np.array(
        [
            np.maximum(abs(row[j] - row[j - 1]), abs(row[j] - previous[min(j, len(previous) - 1)]))
            for j in range(1, len(row))
        ]
    )
    best = spread.argmin(axis=0)
    level = np.arange(best.size)
    return np.array(row)[1 + best, level], spread[best, level]


def _box(profile, top):
    """How far the box reaches beyond each end of the cells: (left, right), 0 at a wall."""
    lengths = []
    for edge in (profile.left, profile.right):
        if edge.kind == "wall":
            lengths.append(0.0)
            continue
        binding = max(edge.V - top, _LEAST_BINDING * (edge.V - profile.V_min))
        mass = edge.mass * (1 + edge.alpha * (top - edge.V)) * profile.units.electron_mass
        lengths.append(_TAIL / np.sqrt(2 * mass * binding))
    return tuple(lengths)


def _base_grid(profile, top, box):
    """Nodes of the coarsest grid, the profile's breakpoints among them.

    Intervals are halved until each is short against the wavelength or decay length in it, or, where
    no level moves, against its distance from where one does.
    """
    x = profile.x
    if profile.cells > _BASE_INTERVALS:
        x = _thinned(profile, top)
    x = np.unique(np.concatenate([[x[0] - box[0]], x, [x[-1] + box[1]]]))
    while x.size <= 4 * _BASE_INTERVALS:
        width = np.diff(x)
        k, forbidden = _wave_numbers(profile, x, top)
        last_open = np.maximum.accumulate(np.where(forbidden, -np.inf, x[1:]))
        next_open = np.minimum.accumulate(np.where(forbidden, np.inf, x[:-1])[::-1])[::-1]
        distance = np.minimum(x[:-1] - last_open, next_open - x[1:])
        long = width > np.maximum(_STEP / k, np.where(forbidden, _SPREAD * distance, 0.0))
        if not long.any():
            break
        x = np.sort(np.concatenate([x, x[:-1][long] + 0.5 * width[long]]))
    return x


def _wave_numbers(profile, x, top):
    """The largest k or kappa at energies from min V to `top` in each interval; whether V >= top."""
    samples = x[:-1] + np.array([[0.01], [0.5], [0.99]]) * np.diff(x)
    V = profile.V(samples)
    mass = profile.m(samples).max(axis=0) * profile.units.electron_mass
    low, high = V.min(axis=0), V.max(axis=0)
    reach = np.maximum(top - low, high - profile.V_min)
    if profile.alpha_cells is not None:
        mass = mass * (1 + profile.alpha(samples).max(axis=0) * np.maximum(top - low, 0))
    return np.sqrt(2 * mass * reach), low >= top


def _thinned(profile, top):
    """Some of the breakpoints of a profile with too many: evenly in number and in wavelengths."""
    k, _ = _wave_numbers(profile, profile.x, top)
    phase = k * np.diff(profile.x)
    share = np.cumsum(phase / phase.sum() + 1 / phase.size) * (_BASE_INTERVALS / 2)
    kept = np.flatnonzero(np.diff(np.floor(share)) > 0) + 1
    return profile.x[np.concatenate([[0], kept, [profile.cells]])]


@dataclass(eq=False)
class States:
    """Wave functions on the finest grid of the ladder that is worth its memory."""

    ladder: _Ladder
    n: np.ndarray

    @cached_property
    def _nodes(self):
        """The grid, and psi and phi at its nodes."""
        form = self.ladder.rung(0)
        for k in range(1, _STATE_RUNGS):
            finer = self.ladder.rung(k)
            if finer.x.size * self.n.size > _STATE_VALUES:
                break
            form = finer
        return form, *form.states(self.n)

    def sample(self, x):
        """psi and phi at x inside the cells, each of shape (count, points); not normalised."""
        form, psi, phi = self._nodes
        i = np.clip(np.searchsorted(form.x, x, side="right") - 1, 0, form.x.size - 2)
        t = (x - form.x[i]) / np.diff(form.x)[i]
        # Cubic through psi and psi' at both ends; psi' = m phi.
        mass = form.mass[i] if form.mass_per_energy is None else form.mass[i]
        a, b = psi[:, i], psi[:, i + 1]
        slope_a, slope_b = phi[:, i] * mass, phi[:, i + 1] * mass
        cubic = (1 - t) * (slope_a - b + a) - t * (slope_b - b + a)
        return (1 - t) * a + t * b + t * (1 - t) * cubic, (1 - t) * phi[:, i] + t * phi[:, i + 1]
