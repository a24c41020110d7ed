"""Finite differences on a ladder of grids: a second opinion that shares only the profile.

Every interval of a base grid is halved again and again. Inside each interval V and m are
polynomials, so the error has an expansion in even powers of the step and Richardson's extrapolation
[1]_ removes them one by one; differences within its table estimate what is left. An open edge is a
box that reaches so far that the tail of anything bound by 1e-14 of the depth has died out; how many
levels are bound is asked of free ends (phi = 0) instead, where a level passes the edge smoothly.

References
----------
.. [1] L. F. Richardson, J. A. Gaunt, Phil. Trans. R. Soc. A 226 (1927) 299.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ._checks import choice, numbers
from ._difference_forms import FluxForm, numerov
from .errors import InputError
from .levels import Budget, Levels

EPS = np.finfo(float).eps
# The base grid: steps up to _STEP / k, or up to _SPREAD of the distance d from the nearest place
# where the highest level moves: a tail exp(-kappa d) is resolved by steps that grow with d.
_STEP, _SPREAD = 0.7, 0.35
_LEAST_NODES = 17
_BASE_INTERVALS = 1 << 14  # tables with more rows than this share intervals
_FINEST = 1 << 18
_RUNGS = 9  # grids in a ladder, at most
_WORK = 1 << 24  # levels times intervals on the finest grid, at most
_STATE_RUNGS, _STATE_VALUES = 5, 1 << 24  # for wave functions: grids; values of psi, at most
_TARGET = 1e-9  # of a level's height: the ladder ends where its estimate is below
_LEAST_BINDING = 1e-14  # of the depth: the box holds the tails of levels bound by more
_LEAST_WORTH_A_NOTE = 1e-12  # of the depth: errors below are mere rounding
_TAIL = 20.0  # kappa times the length of the box: exp(-2 * 20) is far below rounding


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
        estimate are left out, which a note says if that is more than 1e-12 of the depth; `complete`
        is False where a level lies so close to an end of the window that it may be on the other
        side.
    """
    edge, count = profile.open_edge, request.count
    low, high = request.window or (-np.inf, np.inf)
    high = min(high, edge)
    if high <= max(low, profile.V_min):
        return _levels(profile, np.arange(0), np.empty(0), np.empty(0), None)
    if np.isinf(high):
        ladder = _Ladder.up_to_level(profile, count)
        return _levels(profile, np.arange(count), *ladder.estimates(0, count), ladder)
    ladder = _Ladder(profile, high)
    n, energy, error = ladder.between(low, high, count)
    listed, notes = (low < energy) & (energy < high), []
    if high == edge:
        unseen = edge - energy <= error
        if unseen.any() and not unseen.all():
            # Fewer levels at once are worth finer grids.
            top = slice(unseen.argmax(), None)
            energy[top], error[top] = ladder.estimates(n[top][0], n[-1] + 1)
            unseen = edge - energy <= error
        listed &= ~unseen
        least = max(error[unseen].max(initial=0.0), ladder.bound[1] if count is None else 0.0)
        if least > _LEAST_WORTH_A_NOTE * (edge - profile.V_min):
            notes.append(
                f"a level bound by less than {least:.2g} {profile.units.energy} would not be seen"
            )
    ends = np.array([end for end in (low, high) if np.isfinite(end) and end != edge])
    complete = not (np.abs(energy[:, None] - ends) <= error[:, None]).any()
    if not complete:
        notes.append("a level lies closer to an end of the window than its error")
    found = n[listed], energy[listed], error[listed]
    return _levels(profile, *found, ladder, complete, tuple(notes))


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

    Raises
    ------
    InputError
        Numbers of levels that do not ascend, or far beyond what the profile binds.
    """
    if not 0 <= first < last:
        raise InputError(f"first and last must be 0 <= first < last; found {first}, {last}")
    if profile.open_edge <= profile.V_min:
        return np.full(last - first, profile.open_edge), np.zeros(last - first)
    ladder = _Ladder.up_to_level(profile, last)
    room = ladder.rung(0).x.size - 2
    if last > room:
        raise InputError(f"no more than {room} states of the box can be told; found last = {last}")
    return ladder.estimates(first, last)


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
        A grid that has too few nodes, does not ascend or reaches beyond a wall, or one that the
        Numerov form cannot use, or a profile whose mass varies or that jumps, for which the Numerov
        form is not of order 4.

    Examples
    --------
    >>> from eigen1d import Profile, Units
    >>> box = Profile.from_layers([1.0], [0.0], left="wall", right="wall",
    ...                           units=Units("bohr", "hartree"))
    >>> import numpy as np
    >>> on_grid(box, np.linspace(0, 1, 101), 0, 2).round(4)     # pi^2 (n + 1)^2 / 2 = 4.9348, ...
    array([ 4.9344, 19.7327])
    """
    x = numbers("x", x)
    choice("form", form, ("flux", "numerov"))
    if not 0 <= first < last:
        raise InputError(f"first and last must be 0 <= first < last; found {first}, {last}")
    if x.size < last + 2 or not (np.diff(x) > 0).all():
        raise InputError(
            f"a grid needs ascending nodes, two more than the levels wanted ({last}); "
            f"found {x.size}"
        )
    for edge, end, beyond in (
        (profile.left, profile.x[0], x[0] < profile.x[0]),
        (profile.right, profile.x[-1], x[-1] > profile.x[-1]),
    ):
        if edge.kind == "wall" and beyond:
            raise InputError(
                f"the grid, {x[0]:.12g} to {x[-1]:.12g}, reaches beyond the wall at x = {end:.12g}"
            )
    if form == "numerov":
        return numerov(profile, x, first, last)
    return FluxForm.on(profile, x).energies(first, last)


# The ladder ---------------------------------------------------------------------------------------


class _Ladder:
    """Grids of a profile, each with half the steps of the one before, for energies up to `top`."""

    def __init__(self, profile, top, free=(False, False)):
        self.profile, self.top = profile, top
        self._edge = np.inf if any(free) else profile.open_edge  # where levels cease to be bound
        self._box = _box(profile, top, free)
        self._rungs = [FluxForm.on(profile, _base_grid(profile, top, self._box), free)]

    @classmethod
    def up_to_level(cls, profile, last):
        """Return a ladder fit for the levels n < last."""
        if np.isfinite(profile.open_edge):
            return cls(profile, profile.open_edge)
        grid = np.linspace(profile.x[0], profile.x[-1], 1000 + 16 * last)
        highest = FluxForm.on(profile, grid).energies(last - 1, last)[0]
        while True:
            # The energy of a coarse grid is too low, by a few percent.
            top = profile.V_min + 1.1 * (highest - profile.V_min)
            ladder = cls(profile, top)
            highest = ladder.rung(2).energies(last - 1, last)[0]
            if highest <= top:
                return ladder

    def rung(self, i):
        """The equations on grid i, made when first asked for."""
        while len(self._rungs) <= i:
            self._rungs.append(self._rungs[-1].halved())
        return self._rungs[i]

    def between(self, low, high, count=None):
        """n, energy and error of all levels between two energies, and of one more on each side.

        As far as there are such: no more than are bound, and no more than `count`.
        """
        form = self.rung(2)
        most = self.bound[0] if count is None else min(count, self.bound[0])
        last = min(form.count(high) + 1, most)
        first = min(max(form.count(low) - 1, 0), last)
        while first < last:
            energy, error = self.estimates(first, last)
            more_below = first > 0 and energy[0] >= low
            more_above = last < most and energy[-1] < high
            if not (more_below or more_above):
                return np.arange(first, last), energy, error
            first, last = first - more_below, last + more_above
        return np.arange(0), np.empty(0), np.empty(0)

    def estimates(self, first, last):
        """Energies of the levels first <= n < last, and estimates of their errors."""
        bound, doubt = self.bound
        energy = np.full(last - first, self._edge)
        error = np.where(np.arange(first, last) == bound, doubt, 0.0)
        error += 4 * EPS * (self.top - self.profile.V_min)
        # With a neighbour on each side, whose distance tells whether extrapolation can be trusted.
        low, high = max(first - 1, 0), min(last + 1, self.rung(0).width.size, bound)
        if first < high:
            found, own = self._ascending(low, high)
            seen = min(last, high) - first
            energy[:seen], error[:seen] = found[first - low :][:seen], own[first - low :][:seen]
        return energy, error

    def _ascending(self, first, last):
        """The same for bound levels, with the edge taken into account, and in order."""
        energy, error, blind = self._extrapolated(first, last)
        if blind.any():
            least, most = self._binding(first, last)
            told = self._edge - least[blind]
            error[blind] += np.abs(told - energy[blind]) + (most - least)[blind]
            energy[blind] = told
        # Where errors exceed what parts two levels their energies may come out in either order.
        ascending = np.sort(energy)
        return ascending, error + np.abs(ascending - energy)

    def _extrapolated(self, first, last):
        """Energies, estimates of their errors, and whether they rest on a grid that is blind.

        Of the last row of Richardson's table the entry is taken that differs least from its
        neighbours; the difference, which is nearer to the error of the worse of the two, is its
        estimate. No estimate may fall faster from rung k - 1 to rung k than by 4^(k + 1), as in the
        smoothest of profiles: a coincidence must not pass for convergence.

        A grid is blind to a level that it does not bind: the energy there is that of the box.
        """
        # Intervals that hold several rows each have errors without an expansion to rely on.
        columns, safety = (1, 6) if self.profile.cells > _BASE_INTERVALS else (_RUNGS, 3)
        previous = [self.rung(0).energies(first, last)]
        energy, error = previous[0].copy(), np.full(last - first, np.inf)
        todo, spread = np.arange(last - first), np.zeros(last - first)
        height = energy - self.profile.V_min
        rounding = 4 * EPS * (self.rung(0).curvature(first, last) + height)
        last_blind = np.where(energy >= self._edge - rounding, 0, -1)
        blind = last_blind == 0
        for k in range(1, _RUNGS):
            form = self.rung(k)
            row = [form.energies(first + todo[0], first + todo[-1] + 1)]
            for j, before in enumerate(previous[:columns], start=1):
                row.append(row[-1] + (row[-1] - before) / (4**j - 1))
            value, width, column = _least_spread(row, previous)
            spread[todo] = width = np.maximum(width, spread[todo] / 4.0 ** (k + 1))
            rounding *= 4  # the stiffness of half an interval is twice as large, on both sides
            last_blind[todo[row[0] >= self._edge - rounding[todo]]] = k
            total = safety * width + rounding[todo]
            total += self._box_error(value) + _mixing(row[0], value)
            moved = np.abs(value - energy[todo])
            refuted = moved > error[todo]
            total[refuted] = np.maximum(total, moved)[refuted]
            taken = refuted | (total < error[todo])
            energy[todo[taken]], error[todo[taken]] = value[taken], total[taken]
            blind[todo[taken]] = (last_blind[todo] >= k - column)[taken]
            if k > 1:
                target = _TARGET * (energy[todo] - self.profile.V_min)
                target = np.maximum(target, 4 * rounding[todo])
                unfinished = np.flatnonzero((error[todo] > target) | blind[todo])
                nodes = 2 * form.x.size
                if not unfinished.size or nodes > _FINEST or nodes * unfinished.size > _WORK:
                    break
                keep = slice(unfinished[0], unfinished[-1] + 1)
                todo, row = todo[keep], [entry[keep] for entry in row]
            previous = row
        return energy, error, blind

    @cached_property
    def _free(self):
        """A ladder with phi = 0, instead of tails, at the open ends as high as the edge.

        A level then stays smooth where it ceases to be bound, and it is bound if it lies below the
        edge there. It is never above its true place (minimax).
        """
        edge = self.profile.open_edge
        near = edge + _LEAST_BINDING * (edge - self.profile.V_min)
        free = (e.kind == "open" and e.V <= near for e in (self.profile.left, self.profile.right))
        return _Ladder(self.profile, edge, tuple(free))

    @cached_property
    def bound(self):
        """How many levels are bound, and by how much one more might be, which errors hide."""
        if np.isinf(self._edge):
            return np.iinfo(int).max, 0.0
        n, energy, error = self._free.between(self._edge, self._edge)
        below = np.count_nonzero(energy < self._edge)
        number = int(n[0] + below)
        if energy[below] - error[below] >= self._edge:
            return number, 0.0
        return number, float(self._binding(number, number + 1)[1][0])

    def _binding(self, first, last):
        """Binding of levels next to the edge, to first order in kappa: (least, most).

        What tails of kappa = sqrt(2 m B) take away from the distance of a free level to the edge is
        the sum of kappa psi^2 / (2 m) over the free ends.
        """
        level, error = self._free.estimates(first, last)
        form = self._free.rung(2)
        psi = form.states(np.arange(first, last))[0]
        tails = sum(
            psi[:, end] ** 2 / np.sqrt(edge.mass * self.profile.units.electron_mass)
            for edge, end, free in zip(
                (self.profile.left, self.profile.right), (0, -1), form.free, strict=True
            )
            if free
        )
        distance = np.maximum(self._edge - level + np.array([[0.0], [1.0]]) * error, 0.0)
        return np.minimum(2 * (distance / tails) ** 2, distance)

    def _box_error(self, energy):
        """What the walls of the box can do to an energy, by the square of the tail cut off."""
        total = np.zeros_like(energy)
        for edge, length in zip((self.profile.left, self.profile.right), self._box, strict=True):
            if length > 0:
                mass = edge.mass * (1 + edge.alpha * (self.top - edge.V))
                mass *= self.profile.units.electron_mass
                kappa = np.sqrt(2 * mass * np.maximum(edge.V - energy, 0))
                total += 5 / (mass * length**2) * np.exp(-2 * kappa * length)
        return total


def _least_spread(row, previous):
    """Of a row of Richardson's table, the entry nearest to its neighbours; how near; its column."""
    spread = np.array(
        [
            np.maximum(abs(row[j] - row[j - 1]), abs(row[j] - previous[min(j, len(previous) - 1)]))
            for j in range(1, len(row))
        ]
    )
    best = spread.argmin(axis=0)
    level = np.arange(best.size)
    return np.array(row)[1 + best, level], spread[best, level], 1 + best


def _mixing(raw, value):
    """What levels may be off by that lie as close together on a grid as its errors are large.

    Where wells differ more by the errors of the grid than by what couples them, levels follow those
    errors, smoothly, and the coupling shows only on finer grids: extrapolation sees none of it.
    """
    shift = np.abs(np.diff(value - raw))
    mixed = shift > 0.25 * np.diff(raw)
    run = np.concatenate([[0], np.cumsum(~mixed)])
    return np.bincount(run[1:], np.where(mixed, shift, 0.0), minlength=run[-1] + 1)[run]


def _box(profile, top, free):
    """How far the box reaches beyond each end of the cells: (left, right), 0 at a wall."""
    lengths = []
    for edge, is_free in zip((profile.left, profile.right), free, strict=True):
        if edge.kind == "wall" or is_free:
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
    # Halvings that a tail needs in any case, down to the length of the cells.
    span = x[-1] - x[0]
    left, right = (
        length * 0.5 ** np.arange(1 + max(0, np.log2(length / span))) if length else np.empty(0)
        for length in box
    )
    x = np.unique(np.concatenate([x[0] - left, x, x[-1] + right]))
    while x.size <= 4 * _BASE_INTERVALS:
        width = np.diff(x)
        k, forbidden = _wave_numbers(profile, x, top)
        last_open = np.maximum.accumulate(np.where(forbidden, -np.inf, x[1:]))
        next_open = np.minimum.accumulate(np.where(forbidden, np.inf, x[:-1])[::-1])[::-1]
        distance = np.minimum(x[:-1] - last_open, next_open - x[1:])
        long = width > np.maximum(_STEP / k, np.where(forbidden, _SPREAD * distance, 0.0))
        if x.size < _LEAST_NODES:
            long[:] = True
        if not long.any():
            break
        x = np.sort(np.concatenate([x, x[:-1][long] + 0.5 * width[long]]))
    return x


def _wave_numbers(profile, x, top):
    """The largest k or kappa at energies from min V to `top` in each interval; whether V >= top."""
    ends = np.union1d(x, profile.x)  # more than x where intervals hold several rows
    width = np.diff(ends)
    cell, _ = profile.cell_of(ends[:-1] + 0.5 * width)
    at = np.array([ends[:-1], ends[:-1] + 0.5 * width, np.nextafter(ends[1:], -np.inf)])
    V, mass = profile.V(at), profile.m(at).max(axis=0) * profile.units.electron_mass
    # Between its ends V bends away from the chord by no more than (width)^2 max |V''| / 8.
    order = np.arange(profile.V_cells.shape[1])
    bend = (np.abs(profile.V_cells) @ (order * (order - 1)))[cell] / 8
    bend *= (width / np.diff(profile.x)[cell]) ** 2
    bend[(ends[1:] <= profile.x[0]) | (ends[:-1] >= profile.x[-1])] = 0.0
    low, high = V.min(axis=0) - bend, V.max(axis=0) + bend
    reach = np.maximum(top - low, high - profile.V_min)
    if profile.alpha_cells is not None:
        mass = mass * (1 + profile.alpha(at).max(axis=0) * np.maximum(top - low, 0))
    first = np.searchsorted(ends, x[:-1])
    k = np.maximum.reduceat(np.sqrt(2 * mass * reach), first)
    return k, np.logical_and.reduceat(low >= top, first)


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
        """Nodes of the grid, psi and phi at them, and the mass of the intervals."""
        form = self.ladder.rung(0)
        for k in range(1, _STATE_RUNGS):
            finer = self.ladder.rung(k)
            if finer.x.size * self.n.size > _STATE_VALUES:
                break
            form = finer
        return form.x, *form.states(self.n)

    def sample(self, x):
        """psi and phi at x inside the cells, each of shape (count, points); not normalised."""
        if not self.n.size:
            return np.empty((0, x.size)), np.empty((0, x.size))
        nodes, psi, phi, mass = self._nodes
        i = np.clip(np.searchsorted(nodes, x, side="right") - 1, 0, nodes.size - 2)
        t = (x - nodes[i]) / np.diff(nodes)[i]
        # Cubic through psi and psi' at both ends; psi' = m phi.
        a, b = psi[:, i], psi[:, i + 1]
        slope_a, slope_b = phi[:, i] * mass[:, i], phi[:, i + 1] * mass[:, i]
        cubic = (1 - t) * (slope_a - b + a) - t * (slope_b - b + a)
        return (1 - t) * a + t * b + t * (1 - t) * cubic, (1 - t) * phi[:, i] + t * phi[:, i + 1]
