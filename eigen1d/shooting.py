"""Shooting on the cells themselves: every level by counting nodes, to rounding, with no grid.

1. count   Levels below an energy = zeros of the solution from the left up to a meeting node, plus
           those of the solution from the right, plus one if their slopes there have crossed (Sturm
           oscillation; valid for any positive m and any jumps).
2. isolate Cut the energy axis by counts until each wanted level is alone.
3. refine  Root of the angle between the two solutions, kept inside the bracket. The nodes where
           they meet are chosen where the state lives: the product |psi_L psi_R| is the Green
           function on the diagonal, which near a level follows its psi^2. Sweeps then always run
           in the direction in which the solution grows.
4. verify  Count again a few rounding errors below and above each energy; that is the bracket.

References
----------
.. [1] E. A. Coddington, N. Levinson, Theory of Ordinary Differential Equations (1955), ch. 8.
.. [2] J. D. Pryce, Numerical Solution of Sturm-Liouville Problems (1993), ch. 5.
"""

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from . import _kernels, _plan, _search
from .errors import InputError
from .levels import MOST_LEVELS, Budget, Levels

EPS = np.finfo(float).eps
# Half width of a bracket relative to the level's height above the least V. Each cell's entries are
# rounded by an eps or so relative to the change that the cell makes in psi and phi (sums are
# compensated); first-order perturbation theory turns that into eps * (kinetic + |potential - E|)
# expectation values, together at most 3 heights. 16 leaves room for a handful of operations a cell;
# the worst error seen against the reference levels is quoted in tests/test_shooting.py.
ROUNDING = 16 * EPS
_SAMPLES = 4096  # nodes at which the place of a state is looked for
# Levels of a group differ by less than _SAME of their height, some dozen roundings. Their waves are
# computed _AWAY below: far against the group's width, near against other levels.
_SAME, _AWAY = 1e-14, 1e-12
# Where the earlier waves of a group leave room for the next: in another well they reach 1e-2.
_SMALL = 0.1
_MOST_LENGTHS = 1e7  # of a profile that is not flat; each takes a part of a cell and its memory
_FIRST_ROUNDS, _MORE_ROUNDS = 8, 12  # evaluations before the meeting node is chosen anew


def find(profile, request):
    """Find levels of a profile by shooting.

    Parameters
    ----------
    profile : Profile
    request : Request

    Returns
    -------
    Levels
    """
    search = Search(profile)
    first, last, notes = search.range(request)
    energy, bracket = search.levels(first, last)
    complete = bool(np.isfinite(energy).all())
    half_width = np.maximum(bracket[:, 1] - energy, energy - bracket[:, 0])
    if (np.diff(energy) <= half_width[1:]).any():
        notes += (
            "some levels agree to the last digit; each wave function of such a group may live in "
            "one well, and any orthonormal mixture of them is as good",
        )
    return Levels(
        profile=profile,
        n=np.arange(first, last),
        energy=energy,
        bracket=bracket,
        complete=complete,
        method="shooting",
        states=States(search, energy.copy()),
        budget=Budget(numeric=half_width),
        notes=notes,
    )


class Search:
    """One profile made ready for the kernels, with the questions that a search asks it."""

    def __init__(self, profile):
        self.profile = profile
        self.natural = profile.natural()
        self.edges = _edge(self.natural.left), _edge(self.natural.right)
        self.floor = float(profile.V_min)
        self.edge = profile.open_edge
        self.resolution = (ROUNDING + profile.tolerance, self.floor)
        self.top = -np.inf
        if self.edge < np.inf:
            self._reach(self.edge)
        else:
            self._reach(self.floor + self._box_height(1))

    def _reach(self, top):
        """Make the cells ready for energies up to `top`."""
        self.top = top
        self.cells, self.parts, self.left, self.right = self._prepared(top, False)
        # The deepest cell: where all levels of a single well live.
        V, mass, per_energy = self.cells[1:4]
        self.home = int(np.argmin(V[:, 0] + V.sum(axis=1)))
        self.home_mass = float(mass[self.home, 0] + self.floor * per_energy[self.home, :1].sum())

    def _prepared(self, top, whole):
        natural = self.natural
        _check_length(natural, self.floor, top)
        span = top - self.floor
        scale = 2.0 ** math.ceil(math.log2(span)) if span > 0 else 1.0
        return _plan.prepare(
            natural.width, natural.V, natural.mass, natural.mass_per_energy, *self.edges,
            self.floor, top, scale, whole,
        )  # fmt: skip

    def make_whole(self):
        """Make the cells ready once more, with all that lies deep in barriers, for wave functions.

        """
        self.cells, self.parts, self.left, self.right = self._prepared(self.top, True)
        V, mass, per_energy = self.cells[1:4]
        self.home = int(np.argmin(V[:, 0] + V.sum(axis=1)))

    @property
    def x(self):
        """The nodes between the cells, shape (cells + 1,)."""
        if not self.parts.size:
            return self.profile.x
        owner = self.parts[:, 0].astype(int)
        start = self.profile.x[owner] + self.parts[:, 1] * self.natural.width[owner]
        last = self.profile.x[owner[-1]] + (self.parts[-1, 1] + self.parts[-1,2]) * self.natural.width[owner[-1]]
        return np.append(start, last)

    def _box_height(self, count):
        """Height of the energy that so many levels would reach if V were flat, between the ends."""
        per_energy = self.natural.mass_per_energy[:, :1].sum(axis=1)
        mass = (self.natural.mass[:, 0] + self.floor * per_energy).max()
        span = self.profile.x[-1] - self.profile.x[0]
        return (np.pi * count / span) ** 2 / (2 * mass)

    # Counting -----------------------------------------------------------------------------------

    def count(self, energies):
        """Number of levels below each energy; energies at or above the open edge are cut to it."""
        energies = np.clip(np.atleast_1d(energies).astype(float), self.floor, self.edge)
        if energies.max() > self.top:
            self._reach(self.floor + 1.01 * (energies.max() - self.floor))
        stop = np.full(energies.size, self.home)
        turn, angle = self._angles(energies, stop, self._sigma(energies))
        count = turn - (angle < 0)
        at_edge = energies == self.edge
        if at_edge.any():
            count[at_edge] = self.threshold[0]
        count[energies <= self.floor] = 0
        return count

    def _angles(self, energies, stop, sigma):
        turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
        _search.angles(self.cells, self.left, self.right, energies, stop, sigma, turn, angle)
        return turn, angle

    def _sigma(self, energies):
        """A scale of phi / psi for the angles at each energy."""
        height = np.maximum(energies - self.floor, np.finfo(float).tiny)
        return np.sqrt(2 * height / self.home_mass)

    @cached_property
    def threshold(self):
        """(count, doubtful): levels below the open edge, and whether one more may just be bound.

        At the edge itself kappa = 0, and a further level is bound if the solution there has already
        turned down. How far it has turned is compared with what rounding (and the tolerance of a
        profile made from a function) can do; within that it is not counted: a state bound by less
        would reach some 10^13 times further than the well.
        """
        energy = np.array([self.edge])
        stop, sigma = np.array([self.home]), self._sigma(energy)
        turn, angle = self._angles(energy, stop, sigma)
        below = int(turn[0] - (angle[0] < 0))
        states = States(self, energy, stop)
        psi, phi = states.psi[0], states.phi[0]
        meet = sigma[0] * psi[self.home] ** 2 + phi[self.home] ** 2 / sigma[0]
        middle_psi = np.maximum(np.abs(psi[1:]), np.abs(psi[:-1]))
        middle_phi = np.maximum(np.abs(phi[1:]), np.abs(phi[:-1]))
        turned = np.abs(np.diff(phi)) * middle_psi + np.abs(np.diff(psi)) * middle_phi
        noise = self.resolution[0] * turned.sum() / meet
        # A zero angle means a level exactly at the edge, which is not bound.
        if abs(angle[0]) <= noise:
            return int(turn[0]) - 1, True
        return below, False

    def range(self, request):
        """Return (first, last, notes): the request in level numbers, first <= n < last."""
        notes = []
        if request.window is not None:
            low, high = request.window
            if min(high, self.edge) - self.floor > 1e16 * self._box_height(1):
                raise InputError(f"far too many levels lie below {high:g}; lower the window")
            first = int(self.count(low)[0]) if low > self.floor else 0
            last = int(self.count(high)[0]) if high > self.floor else 0
            if last - first > MOST_LEVELS:
                raise InputError(
                    f"{last - first:,} levels lie in the window; ask for at most {MOST_LEVELS:,}"
                )
            return first, max(first, last), tuple(notes)
        if np.isinf(self.edge):
            return 0, request.count, tuple(notes)
        bound = 0
        if self.edge > self.floor:
            bound, doubtful = self.threshold
            if request.count is None and bound > MOST_LEVELS:
                raise InputError(
                    f"{bound:,} levels are bound; ask for at most {MOST_LEVELS:,} of them"
                )
            if doubtful:
                notes.append(
                    "a further level may lie at the continuum's edge, bound by less than rounding "
                    "can tell; it is not counted"
                )
        return 0, bound if request.count is None else min(bound, request.count), tuple(notes)

    # Finding ------------------------------------------------------------------------------------

    def levels(self, first, last):
        """Return energies, shape (count,), and brackets, shape (count, 2), of first <= n < last."""
        size = last - first
        if size == 0:
            return np.empty(0), np.empty((0, 2))
        bracket, counts = np.empty((size, 2)), np.empty((size, 2), np.int64)
        low, high, below = self._interval(last)
        sigma = float(self._sigma(np.array([high]))[0])
        _search.isolate(
            self.cells, self.left, self.right, self.home, sigma, self.resolution,
            first, last, (float(low), float(high), 0, below), bracket, counts,
        )  # fmt: skip
        energy = bracket.mean(axis=1)
        alone = counts[:, 1] == counts[:, 0] + 1
        self._refine(np.arange(first, last), energy, bracket, np.flatnonzero(alone))
        return energy, self._verified(np.arange(first, last), energy, bracket, alone)

    def _interval(self, last):
        """An energy interval (low, high) with no level below it, and the count `below` high."""
        if self.edge < np.inf:
            return self.floor, self.edge, self.threshold[0]
        step = self._box_height(last + 1)
        while True:
            below = int(self.count(self.floor + step)[0])
            if below >= last:
                return self.floor, self.floor + step, below
            step *= 2

    def _refine(self, n, energy, bracket, todo):
        """Close the brackets of the levels `todo`; choose meeting nodes anew where that stalls."""
        stop = np.full(todo.size, self.home)
        rounds = _FIRST_ROUNDS
        while todo.size:
            part = bracket[todo]
            best = np.empty(todo.size)
            sigma = self._sigma(part[:, 1])
            done = _search.refine(
                self.cells, self.left, self.right, self.edge, stop, sigma, self.resolution,
                n[todo], part, best, rounds,
            )  # fmt: skip
            energy[todo], bracket[todo] = best, part
            todo = todo[~done]
            rounds = _MORE_ROUNDS
            if todo.size:
                stop = self._homes(bracket[todo].mean(axis=1))

    def _homes(self, energies):
        """The node where the state nearest to each energy is largest."""
        nodes = self.cells[0].size + 1
        stride = max(1, -(-nodes // _SAMPLES))
        out = np.empty(energies.size, np.int64)
        for low in range(0, energies.size, _kernels.LANES):
            part = energies[low : low + _kernels.LANES]
            size = sum(self._size(part, backward, stride) for backward in (False, True))
            out[low : low + part.size] = stride * np.argmax(size, axis=0)
        return out

    def _size(self, energies, backward, stride):
        """Log of the amplitude of one solution at every `stride`-th node: (samples, lanes)."""
        trail = self.trail(energies, backward, stride)
        sigma = self._sigma(energies)
        return np.log(np.hypot(sigma * trail[:, 0], trail[:, 1])) + trail[:, 2]

    def trail(self, energies, backward, stride=1):
        """psi, phi and the log of their factor at every `stride`-th node: (samples, 3, lanes)."""
        lanes, cells = energies.size, self.cells[0].size
        trail = np.empty((cells // stride + 1, 3, lanes))
        stop = np.full(lanes, 0 if backward else cells)
        psi, phi, zeros = np.empty(lanes), np.empty(lanes), np.empty(lanes, np.int64)
        edge = self.right if backward else self.left
        _kernels.sweep(self.cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride)
        return trail

    def _verified(self, n, energy, bracket, alone):
        """Brackets a few rounding errors wide, counted again at both ends; wider where that fails.

        Levels that counting could not part keep the interval that holds all of them.
        """
        height = np.maximum(energy - self.floor, 0.0)
        half = self.resolution[0] * height + 4 * np.spacing(np.abs(energy))
        half = np.where(alone, half, half + 0.5 * (bracket[:, 1] - bracket[:, 0]))
        out = np.empty((energy.size, 2))
        todo = np.arange(energy.size)
        while todo.size:
            low = np.maximum(energy[todo] - half[todo], self.floor)
            high = np.minimum(energy[todo] + half[todo], self.edge)
            out[todo] = np.column_stack([low, high])
            good = (self.count(low) <= n[todo]) & (self.count(high) > n[todo])
            todo = todo[~good]
            half[todo] *= 4
        return out


@dataclass(eq=False)
class States:
    """Wave functions of the levels of a search, kept at the nodes and continued between them."""

    search: Search
    energy: np.ndarray
    stop: np.ndarray | None = None

    @cached_property
    def _nodes(self):
        """At all nodes psi, phi and the log of their factor, (count, nodes) each; where sides join.

        The logarithm is kept apart: behind a barrier of a thousand decay lengths psi is no double,
        but grows into one inside the next cell.
        """
        search, count = self.search, self.energy.size
        search.make_whole()
        nodes = search.x.size
        wave = np.empty((3, count, nodes))
        stop = (search._homes(self._at) if self.stop is None else self.stop).copy()
        lanes = max(1, min(_kernels.LANES, (1 << 22) // nodes))  # bounds the memory of the trails
        for low in range(0, count, lanes):
            part = slice(low, min(low + lanes, count))
            left = search.trail(self._at[part], False)
            right = search.trail(self._at[part], True)
            right[:, 1] *= -1  # the mirror image's phi
            for i, level in enumerate(range(part.start, part.stop)):
                halves = left[:, :, i], right[:, :, i]
                first = self._first[level]
                if first < level:
                    stop[level] = _elsewhere(halves, wave[:, first:level])
                wave[:, level] = _glued(*halves, stop[level])
        return *wave, stop

    @cached_property
    def _first(self):
        """The first level of the group that each level belongs to: equal but for rounding."""
        height = np.maximum(self.energy - self.search.floor, 0.0)
        apart = np.diff(self.energy) > _SAME * height[1:]
        starts = np.flatnonzero(np.concatenate([[True], apart]))
        return np.repeat(starts, np.diff(np.append(starts, self.energy.size)))

    @cached_property
    def _at(self):
        """The energies at which waves are computed.

        Joined at x0, the two solutions at E are the Green function, a sum of psi_n(x) psi_n(x0) /
        (E_n - E). For a level alone its own energy picks its state. In a group that would pick one
        by chance; somewhat below the group all weigh alike, and the wave joined in a well is what
        the group can make of that well alone.
        """
        at = self.energy.copy()
        for first in np.unique(self._first):
            group = self._first == first
            if group.sum() > 1:
                low, high = self.energy[group][[0, -1]]
                away = max(_AWAY * (high - self.search.floor), 10 * (high - low))
                at[group] = max(low - away, self.search.floor)
        return at

    @property
    def psi(self):
        """psi at the nodes, shape (count, nodes)."""
        return self._nodes[0] * np.exp(self._nodes[2])

    @property
    def phi(self):
        """phi = psi'/m at the nodes, shape (count, nodes)."""
        return self._nodes[1] * np.exp(self._nodes[2])

    def sample(self, x):
        """psi and phi at x inside the cells, each of shape (count, points); not normalised."""
        mesh = self.search.x
        cell = np.clip(np.searchsorted(mesh, x, side="right") - 1, 0, mesh.size - 2)
        fraction = np.clip((x - mesh[cell]) / (mesh[cell + 1] - mesh[cell]), 0.0, 1.0)
        psi, phi = np.empty((self.energy.size, x.size)), np.empty((self.energy.size, x.size))
        *start, stop = self._nodes
        _kernels.along(self.search.cells, self._at, *start, cell, fraction, stop, psi, phi)
        return psi, phi


def _elsewhere(halves, before):
    """The node where the Green function is largest among those where the waves `before` are small.

    The Green function on the diagonal is the product of both solutions, here as a logarithm.
    """
    size = sum(half[:, 2] + np.log(np.hypot(half[:, 0], half[:, 1])) for half in halves)
    others = np.hypot(before[0], before[1]) * np.exp(before[2])
    taken = (others > _SMALL * others.max(axis=1)[:, None]).any(axis=0)
    return int(np.argmax(np.where(taken, -np.inf, size)))


def _glued(left, right, stop):
    """One wave (psi, phi, log) from its two halves, (nodes, 3) each, about 1 at `stop`."""
    a, b = _balanced(left[stop], left[stop]), _balanced(right[stop], left[stop])
    factor = (a[0] * b[0] + a[1] * b[1]) / (b[0] ** 2 + b[1] ** 2)
    norm = np.hypot(left[stop, 0], left[stop, 1])
    wave = np.empty((3, left.shape[0]))
    for part, half, size in (
        (slice(0, stop + 1), left, 1.0),
        (slice(stop + 1, None), right, factor),
    ):
        wave[:2, part] = half[part, :2].T * (size / norm)
        wave[2, part] = np.minimum(half[part, 2] - half[stop, 2], 700.0)
    return wave


def _balanced(state, like):
    """(psi, phi) with phi scaled so that both count alike in the joint."""
    size = abs(like[0]) + abs(like[1])
    return state[0] / size, state[1] / size


def _edge(edge):
    """An Edge as the kernels read it: is open, V, and the mass as mass + E * mass_per_energy."""
    per_energy = edge.mass * edge.alpha
    return np.array([edge.kind == "open", edge.V, edge.mass - per_energy * edge.V, per_energy])


def _check_length(natural, low, high):
    """Refuse profiles of so many wavelengths that the parts of their cells would fill memory."""
    curved = (natural.V[:, 1:] != 0).any(axis=1)
    reach = np.abs(natural.V[:, 0] - low) + np.abs(natural.V[:, 1:]).sum(axis=1)
    reach = reach + max(high - low, 0.0)  # an open edge may lie below all cells
    mass = natural.mass[:, 0] + low * natural.mass_per_energy[:, :1].sum(axis=1)
    lengths = (np.sqrt(2 * np.abs(mass) * reach) * natural.width)[curved].sum()
    if lengths > _MOST_LENGTHS:
        raise InputError(
            f"this profile is some {lengths:.0e} wavelengths or decay lengths long; at most "
            f"{_MOST_LENGTHS:.0e} can be solved. Is the unit right?"
        )
