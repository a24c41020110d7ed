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

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from . import _first_start  # noqa: F401  before all kernels

# isort: split
from . import _angles, _kernels, _plan, _search
from .errors import InputError
from .levels import MOST_LEVELS, Budget, Levels

EPS = np.finfo(float).eps
# Half width of a bracket relative to the level's height above the least V. Each cell's entries are
# rounded by an eps or so relative to the change that the cell makes in psi and phi (sums are
# compensated); first-order perturbation theory turns that into eps * (kinetic + potential)
# expectation values, together at most a few heights. 16 leaves room for a handful of operations a
# cell; the worst error seen against the reference levels is quoted in tests/test_shooting.py.
ROUNDING = 16 * EPS
# Levels of a group differ by less than _SAME of their height, some dozen roundings. Their waves are
# computed _AWAY below: far against the group's width, near against other levels.
_SAME, _AWAY = 1e-14, 1e-12
# Where the earlier waves of a group leave room for the next: in another well they reach 1e-2.
_SMALL = 0.1
_ENDLESS = 1e8  # levels below a window: their count would be no longer exact
_NONE = np.empty(0), np.empty((0, 2))
_TOO_LONG = (
    "this profile is over a million wavelengths or decay lengths long, which is more than can be "
    "solved. Is the unit right?"
)


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
    first, energy, bracket = search.requested(request)
    half_width = np.maximum(bracket[:, 1] - energy, energy - bracket[:, 0])
    notes = search.notes
    if (energy[1:] - energy[:-1] <= half_width[1:]).any():
        notes += (
            "some levels agree to the last digit; each wave function of such a group may live in "
            "one well, and any orthonormal mixture of them is as good",
        )
    return Levels(
        profile=profile,
        n=np.arange(first, first + energy.size),
        energy=energy,
        bracket=bracket,
        complete=True,
        method="shooting",
        states=States(search, energy.copy()),
        budget=Budget(numeric=half_width),
        notes=notes,
    )


class Search:
    """One profile, with the questions that a search asks it."""

    def __init__(self, profile):
        natural = profile.natural()
        self.profile = profile
        self.cells = natural.width, natural.V, natural.mass, natural.mass_per_energy
        self.left, self.right = _edge(natural.left), _edge(natural.right)
        self.floor = profile.V_min
        self.edge = profile.open_edge
        self.resolution = ROUNDING + profile.tolerance
        self.notes = ()

    def requested(self, request):
        """Return (first, energy, bracket) of the levels that a `Request` asks for."""
        if request.window is not None:
            return self._in_window(*request.window)
        if not self.edge > self.floor:
            return 0, *_NONE
        last = MOST_LEVELS + 1 if request.count is None else request.count
        below, *found = self._find(0, last, self.floor, np.nan)
        if below > MOST_LEVELS and request.count is None:
            raise InputError(
                f"{below:,} levels are bound; ask for at most {MOST_LEVELS:,} of them"
            )
        return 0, *found

    def _in_window(self, low, high):
        low, high = max(low, self.floor), min(high, self.edge)
        if not low < high:
            return 0, *_NONE
        if self._most_below(high) > _ENDLESS:
            raise InputError(f"far too many levels lie below {high:g}; lower the window")
        first, last = self.count([low, high])
        if last - first > MOST_LEVELS:
            raise InputError(
                f"{last - first:,} levels lie in the window; ask for at most {MOST_LEVELS:,}"
            )
        if last <= first:
            return first, *_NONE
        return first, *self._find(first, last, low, high)[1:]

    def _most_below(self, energy):
        """What no number of levels exceeds: that of a flat bottom between walls, and one more."""
        width, _, mass, per_energy = self.cells
        heaviest = (mass[:, 0] + energy * per_energy[:, :1].sum(axis=1)).max()
        return width.sum() * np.sqrt(2 * heaviest * (energy - self.floor)) / np.pi + 1

    def _find(self, first, last, bottom, top):
        """Return (below, energies, brackets), see `_search.find`, with what it leaves open."""
        try:
            below, sure, energy, bracket, done = _search.found(
                *self.cells, self.left, self.right, self.floor, self.edge, first, last,
                MOST_LEVELS, bottom, top, self.resolution,
            )  # fmt: skip
        except SystemError as fault:  # so compiled code returns from an interruption
            if isinstance(fault.__cause__, KeyboardInterrupt):
                raise fault.__cause__ from None
            raise
        if below < 0:
            raise InputError(_TOO_LONG)
        if not sure and self.threshold < below:
            below = self.threshold
            keep = slice(max(below - first, 0))
            energy, bracket, done = energy[keep], bracket[keep], done[keep]
        if not done.all():
            self._widen(first, np.flatnonzero(done == 0), energy, bracket)
        return below, energy, bracket

    def _widen(self, first, failed, energy, bracket):
        """Widen brackets around energies that no method closes, until counts agree."""
        half = np.maximum(self.resolution * (energy - self.floor), 4 * np.spacing(np.abs(energy)))
        while failed.size:
            low = np.maximum(energy[failed] - half[failed], self.floor)
            high = np.minimum(energy[failed] + half[failed], self.edge)
            bracket[failed] = np.column_stack([low, high])
            n = first + failed
            failed = failed[(self.count(low) > n) | (self.count(high) <= n)]
            half[failed] *= 4

    # Counting -----------------------------------------------------------------------------------

    def count(self, energies):
        """Number of levels below each energy; energies at or above the open edge are cut to it."""
        energies = np.clip(np.atleast_1d(energies).astype(float), self.floor, self.edge)
        turn, angle = Ready(self, energies.max(), False).angles(energies)
        count = turn - (angle < 0)
        at_edge = energies == self.edge
        if at_edge.any():
            count[at_edge] = self.threshold
        count[energies <= self.floor] = 0
        return count

    @cached_property
    def threshold(self):
        """Number of levels below the open edge.

        At the edge itself kappa = 0, and a further level is bound if the solution there has already
        turned down. How far it has turned is compared with what rounding (and the tolerance of a
        profile made from a function) can do; within that it is not counted: a state bound by less
        would reach some 10^13 times further than the well. A note then says so.
        """
        whole, energy = Ready(self, self.edge, True), np.array([self.edge])
        (turn,), (angle,) = whole.angles(energy)
        (psi,), (phi,) = States(self, energy, whole.home).at_nodes()
        home = whole.home
        _, _, mass, per_energy = whole.cells[:4]
        m = mass[home, 0] + self.edge * per_energy[home, :1].sum()
        sigma = np.sqrt(2 * (self.edge - self.floor) / m)
        meet = sigma * psi[home] ** 2 + phi[home] ** 2 / sigma
        middle_psi = np.maximum(np.abs(psi[1:]), np.abs(psi[:-1]))
        middle_phi = np.maximum(np.abs(phi[1:]), np.abs(phi[:-1]))
        turned = np.abs(np.diff(phi)) * middle_psi + np.abs(np.diff(psi)) * middle_phi
        noise = self.resolution * turned.sum() / meet
        # A zero angle means a level exactly at the edge, which is not bound.
        if abs(angle) <= noise:
            self.notes += (
                "a further level may lie at the continuum's edge, bound by less than rounding "
                "can tell; it is not counted",
            )
            return int(turn) - 1
        return int(turn - (angle < 0))


class Ready:
    """The cells of a search, short enough for energies up to `top`.

    `whole`: with all that lies so deep in barriers that only wave functions ask for it.
    """

    def __init__(self, search, top, whole):
        self.search = search
        self.cells, self.parts, self.left, self.right, self.home = _plan.prepared(
            *search.cells, search.left, search.right, search.floor, top, whole
        )
        if self.parts.shape[0] > _plan.MOST_PARTS:
            raise InputError(_TOO_LONG)

    @cached_property
    def x(self):
        """The nodes between the cells, shape (cells + 1,)."""
        if not self.parts.size:
            return self.search.profile.x
        owner = self.parts[:, 0].astype(int)
        start, width = self.search.profile.x[owner], self.search.cells[0][owner]
        nodes = start + self.parts[:, 1] * width
        return np.append(nodes, start[-1] + (self.parts[-1, 1] + self.parts[-1, 2]) * width[-1])

    def angles(self, energies):
        """turn and angle of `_angles.angles` for some energies, at `home`."""
        turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
        stop = np.full(energies.size, self.home)
        _angles.angles(self.cells, self.left, self.right, stop, energies, turn, angle)
        return turn, angle

    def trail(self, energies, backward, stride=1):
        """psi, phi and the log of their factor at every `stride`-th node: (samples, 3, lanes)."""
        lanes, cells = energies.size, self.cells[0].size
        trail = np.empty((cells // stride + 1, 3, lanes))
        psi, phi, zeros = np.empty(lanes), np.empty(lanes), np.empty(lanes, np.int64)
        edge = self.right if backward else self.left
        stop = np.full(lanes, 0 if backward else cells)
        _kernels.swept(self.cells, edge, backward, energies, stop, psi, phi, zeros, trail, stride)
        return trail


@dataclass(eq=False)
class States:
    """Wave functions of the levels of a search, kept at the nodes and continued between them."""

    search: Search
    energy: np.ndarray
    stop: int | None = None

    @cached_property
    def ready(self):
        """All cells, for the energies of these states."""
        return Ready(self.search, self.energy.max(initial=self.search.floor), True)

    @cached_property
    def _nodes(self):
        """At all nodes psi, phi and the log of their factor, (count, nodes) each; where sides join.

        The logarithm is kept apart: behind a barrier of a thousand decay lengths psi is no double,
        but grows into one inside the next cell.
        """
        ready, count = self.ready, self.energy.size
        nodes = ready.x.size
        wave = np.empty((3, count, nodes))
        if self.stop is None:
            stop = _angles.homes(ready.cells, ready.left, ready.right, self._at)
        else:
            stop = np.full(count, self.stop)
        lanes = max(1, min(_kernels.LANES, (1 << 22) // nodes))  # bounds the memory of the trails
        for low in range(0, count, lanes):
            part = slice(low, min(low + lanes, count))
            left = ready.trail(self._at[part], False)
            right = ready.trail(self._at[part], True)
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

    def at_nodes(self):
        """psi and phi = psi'/m at the nodes, shape (count, nodes) each."""
        psi, phi, log, _ = self._nodes
        return psi * np.exp(log), phi * np.exp(log)

    def sample(self, x):
        """psi and phi at x inside the cells, each of shape (count, points); not normalised."""
        mesh = self.ready.x
        cell = np.clip(np.searchsorted(mesh, x, side="right") - 1, 0, mesh.size - 2)
        fraction = np.clip((x - mesh[cell]) / (mesh[cell + 1] - mesh[cell]), 0.0, 1.0)
        psi, phi = np.empty((self.energy.size, x.size)), np.empty((self.energy.size, x.size))
        *start, stop = self._nodes
        _kernels.along(self.ready.cells, self._at, *start, cell, fraction, stop, psi, phi)
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
