"""Compiled search: from sweeps to angles and counts, from those to energies in verified brackets.

Like `_kernels`, these know arrays only, in units with hbar = 1.

All angles taken at one meeting node are samples of one function of E that rises by pi from level to
level. It is smooth where a state is large at that node, so each round asks inverse interpolation
through all samples so far where the wanted levels are, tries the energies there, and ends with two
counts around each. Where it is a staircase instead, as for a state in another well, interpolation
fails, brackets are cut evenly, and whoever calls chooses another node for what is left.
"""

import numpy as np
from numba import types

from ._angles import angles, homes
from ._compiled import (
    CELLS,
    EDGE,
    EPS,
    FLOATS,
    INTEGERS,
    LANES,
    apart,
    floats,
    given,
    grid,
    integers,
    kernel,
)
from ._plan import MOST_PARTS, prepare

_SPARE = 1.5  # levels that the first guess of the highest energy allows beyond those wanted
_SAMPLES = 64  # places at which V is looked at for a first guess
_STEPS = 16  # energies at which the phase is known for it
_NEAREST = 7  # samples that one interpolation uses at most
# A guess is sure enough for two counts around it if its error is below this part of their distance.
_SURE = 0.1
_ROUNDS, _MORE_ROUNDS = 7, 60  # before another node is tried, and then
_ROOM = types.Tuple((FLOATS, INTEGERS, FLOATS) * 2)  # samples, turn, angle; of a round, the same
_OFF_CENTRE = 3  # beside the values of `done`, see `_verified`
_FAILED, _RECENTRED = 1, 2  # what became of two counts around a level that did not settle it
_BESIDE = 1e-10  # of the height: so close to the edge only the tail changes


# First guesses ----------------------------------------------------------------------------------


@kernel(signature=FLOATS(given(1), given(2), given(2), given(2), types.float64, FLOATS))
def _phases(width, V, mass, per_energy, floor, energies):
    """Levels below each energy by the semiclassical phase, at a sample of places."""
    stride = -(-width.size // _SAMPLES)
    inside = max(1, _SAMPLES // width.size)
    phases = floats(energies.size)
    for k in range(energies.size):
        phases[k] = 0.0
    for start in range(0, width.size, stride):
        # Not at even distances: a table may have a period.
        cell = min(start + 13 * (start // stride) % stride, width.size - 1)
        m = mass[cell, 0]
        if per_energy.shape[1] > 0:
            m += floor * per_energy[cell, 0]
        size = np.sqrt(2.0 * m) * width[cell] * stride / (inside * np.pi)
        for place in range(inside):
            t, value = (place + 0.5) / inside, 0.0
            for j in range(V.shape[1] - 1, -1, -1):
                value = value * t + V[cell, j]
            for k in range(energies.size):
                phases[k] += size * np.sqrt(max(energies[k] - value, 0.0))
    return phases


@kernel
def _top_for(width, V, mass, per_energy, floor, edge, count):
    """Guess an energy, at most the edge, below which the phase allows `count` levels."""
    span, heaviest = 0.0, 0.0
    for cell in range(width.size):
        m = mass[cell, 0]
        if per_energy.shape[1] > 0:
            m += floor * per_energy[cell, 0]
        span, heaviest = span + width[cell], max(heaviest, m)
    # So high it lies if V is flat, between walls; no lower otherwise.
    low, high = 0.0, (np.pi * max(count - 1.0, 1.0) / span) ** 2 / (2.0 * heaviest)
    energy = floats(1)
    while floor + high < edge:
        energy[0] = floor + high
        if not _phases(width, V, mass, per_energy, floor, energy)[0] < count:
            break
        low, high = high, 4.0 * high
    if not floor + high < edge:
        return edge
    for _ in range(5):
        middle = 0.5 * (low + high)
        energy[0] = floor + middle
        if _phases(width, V, mass, per_energy, floor, energy)[0] < count:
            low = middle
        else:
            high = middle
    return floor + high


@kernel
def _spread(cells, bottom, top, most):
    """Energies above bottom, the last at top, evenly by phase: two a level, at least LANES."""
    width, V, mass, per_energy = cells[:4]
    energies = floats(_STEPS + 1)
    for k in range(_STEPS + 1):
        energies[k] = bottom + (top - bottom) * (k / _STEPS) ** 2
    phases = _phases(width, V, mass, per_energy, cells[7][0], energies)
    total = phases[_STEPS] - phases[0]
    size = LANES * int(np.ceil(max(min(2.0 * total, most), 1.0) / LANES))
    points = floats(size)
    k = 0
    for i in range(size):
        x = (i + 1.0) / size
        wanted = phases[0] + total * (0.5 * x + 0.25 * (1.0 - np.cos(np.pi * x)))
        while k < _STEPS - 1 and phases[k + 1] < wanted:
            k += 1
        rise = phases[k + 1] - phases[k]
        share = (wanted - phases[k]) / rise if rise > 0.0 else (i + 1.0) / size
        points[i] = bottom + (top - bottom) * ((k + min(max(share, 0.0), 1.0)) / _STEPS) ** 2
    points[size - 1] = top
    return points


# Rounds -----------------------------------------------------------------------------------------


@kernel
def _count(turn, angle):
    """Levels below an energy."""
    return turn - 1 if angle < 0.0 else turn


@kernel
def _above(turn, angle, n):
    """The angle beyond that of level n."""
    return (turn - n - 1) * np.pi + angle


@kernel
def _offset(energy, origin, edge):
    """How far an energy lies above another in u = -sqrt(edge - E), smooth up to the continuum."""
    if edge == np.inf:
        return energy - origin
    total = np.sqrt(max(edge - energy, 0.0)) + np.sqrt(max(edge - origin, 0.0))
    return (energy - origin) / total if total > 0.0 else 0.0


@kernel
def _energy(offset, origin, edge):
    """The energy at an `_offset`. It is moved, not computed from u: that rounds by the edge."""
    if edge == np.inf:
        return origin + offset
    return origin + offset * (2.0 * np.sqrt(max(edge - origin, 0.0)) - offset)


@kernel
def _guess(samples, turn, angle, used, i, n, edge):
    """Where the angle reaches level n between samples i and i + 1: (energy, error).

    Inverse interpolation by E. H. Neville's scheme, with the angle as abscissa and the nearest
    samples first. The error is the last correction; infinite where the angle is no help.
    """
    x, y = floats(_NEAREST), floats(_NEAREST)
    low, high = i, i + 1
    value, error = 0.0, np.inf
    for size in range(min(_NEAREST, used)):
        if low >= 0 and (size % 2 == 0 or high >= used):
            k = low
            low -= 1
        else:
            k = high
            high += 1
        x[size] = _above(turn[k], angle[k], n)
        y[size] = _offset(samples[k], samples[i], edge)
        for j in range(size - 1, -1, -1):
            gap = x[size] - x[j]
            y[j] = (x[size] * y[j] - x[j] * y[j + 1]) / gap if gap != 0.0 else np.nan
        correction = abs(y[0] - value)
        if size > 1 and not correction < error:
            break
        if size > 0:
            error = correction
        value = y[0]
    energy = _energy(value, samples[i], edge)
    if not samples[i] < energy < samples[i + 1]:
        return 0.5 * (samples[i] + samples[i + 1]), np.inf
    return energy, abs(_energy(value + error, samples[i], edge) - energy)


@kernel
def _bracket(turn, angle, used, n):
    """The sample below level n whose neighbour is above it."""
    low, high = 0, used - 1
    while high - low > 1:
        middle = (low + high) // 2
        if _count(turn[middle], angle[middle]) > n:
            high = middle
        else:
            low = middle
    return low


@kernel
def _half_width(energy, resolution, floor):
    """Of a bracket that rounding cannot deceive."""
    return resolution * max(energy - floor, 0.0) + 4.0 * EPS * abs(energy)


@kernel
def _cuts(points, low, high, guess, error, each):
    """Energies that cut a bracket: the guess, as many steps beside it as its error, even cuts."""
    size = 0
    if error < np.inf:
        points[0] = guess
        size = 1
        if each > 2:
            for step in (-3.0, 3.0):
                point = guess + step * error
                if low < point < high:
                    points[size] = point
                    size += 1
    even = max(each - size, 1 - size)
    for k in range(even):
        points[size] = low + (high - low) * (k + 1.0) / (even + 1.0)
        size += 1
    return size


@kernel
def _merge(samples, turn, angle, used, points, new_turn, new_angle, size):
    """Insert new samples in their order; points come nearly sorted."""
    for i in range(1, size):
        k = i
        while k > 0 and points[k - 1] > points[k]:
            points[k - 1], points[k] = points[k], points[k - 1]
            new_turn[k - 1], new_turn[k] = new_turn[k], new_turn[k - 1]
            new_angle[k - 1], new_angle[k] = new_angle[k], new_angle[k - 1]
            k -= 1
    old, new = used - 1, size - 1
    for place in range(used + size - 1, -1, -1):
        if new < 0:
            return
        if old >= 0 and samples[old] > points[new]:
            samples[place], turn[place], angle[place] = samples[old], turn[old], angle[old]
            old -= 1
        else:
            samples[place], turn[place] = points[new], new_turn[new]
            angle[place] = new_angle[new]
            new -= 1


@kernel
def _verified(turn, angle, points, k, n, target, energy, bracket, i):
    """Take two counts around a target, at points k and k + 1, as the bracket of level n.

    Returns whether that closes the matter: 1 for a level alone, 2 for one of several, 0 if not,
    _OFF_CENTRE if the level lies near an end.
    """
    below, above = _count(turn[k], angle[k]), _count(turn[k + 1], angle[k + 1])
    if below > n or above <= n:
        return 0
    low, high = points[k], points[k + 1]
    energy[i], bracket[i, 0], bracket[i, 1] = target, low, high
    if below < n or above > n + 1:
        return 2
    f, f_high = _above(turn[k], angle[k], n), _above(turn[k + 1], angle[k + 1], n)
    if f_high > f:
        energy[i] = low + (high - low) * (-f / (f_high - f))
    return 1 if abs(energy[i] - target) <= 0.15 * (high - low) else _OFF_CENTRE


@kernel(
    signature=types.void(
        CELLS, EDGE, EDGE, types.int64, types.float64, types.int64, types.float64, _ROOM,
        types.int64, FLOATS, types.float64[:, :], INTEGERS, types.int64,
    )
)  # fmt: skip
def _converge(
    cells, left, right, stop, edge, first, resolution, room, used, energy, bracket, done, rounds
):
    """Close the brackets of levels first, first + 1, ... from the samples in `room`."""
    samples, turn, angle, points, new_turn, new_angle = room
    floor, size = cells[7][0], energy.size
    target, place = floats(size), integers(size)
    width, before, missed = floats(size), floats(size), integers(size)
    for i in range(size):
        width[i], before[i], missed[i] = np.inf, np.inf, 0
    for _ in range(rounds):
        active = 0
        for i in range(size):
            if done[i] == 0:
                active += 1
        if active == 0:
            return
        each, new, previous = max(1, LANES // active), 0, -1
        for i in range(size):
            place[i] = -1
            if done[i] != 0:
                continue
            n = first + i
            k = _bracket(turn, angle, used, n)
            low, high = samples[k], samples[k + 1]
            guess, error = _guess(samples, turn, angle, used, k, n, edge)
            half = _half_width(guess, resolution, floor)
            if missed[i] == _RECENTRED:
                guess, error = energy[i], 0.0
            elif missed[i] == _FAILED:
                error = np.inf
            if missed[i] != _RECENTRED:
                missed[i] = 0
            if high - low <= half or error <= _SURE * half:
                target[i], place[i] = guess, new
                points[new] = max(guess - half, floor)
                points[new + 1] = min(guess + half, edge)
                new += 2
            elif k != previous:
                inside = _count(turn[k + 1], angle[k + 1]) - _count(turn[k], angle[k])
                several = each
                if inside > 1 or (high - low > 0.5 * width[i] and error > 0.1 * before[i]):
                    several = max(each, min(inside + 2, LANES - 1))
                new += _cuts(points[new:], low, high, guess, error, several)
            width[i], before[i], previous = high - low, error, k
        angles(cells, left, right, stop, points[:new], new_turn, new_angle)
        for i in range(size):
            if place[i] >= 0:
                done[i] = _verified(
                    new_turn, new_angle, points, place[i], first + i, target[i], energy, bracket, i
                )
                if done[i] == _OFF_CENTRE:
                    # Once more around the root of the two angles; they may be steep, not straight.
                    done[i] = 1 if missed[i] == _RECENTRED else 0
                    missed[i] = _RECENTRED
                else:
                    missed[i] = _FAILED
        _merge(samples, turn, angle, used, points, new_turn, new_angle, new)
        used += new
    for i in range(size):
        if done[i] == 0:
            k = _bracket(turn, angle, used, first + i)
            bracket[i, 0], bracket[i, 1] = samples[k], samples[k + 1]
            energy[i] = 0.5 * (samples[k] + samples[k + 1])


@kernel(signature=_ROOM(types.int64, types.int64, types.int64))
def _room(used, levels, rounds):
    """Arrays for all samples of some rounds, and for the points of one."""
    most = 6 * levels + 4 * LANES  # two counts each, or cuts of each bracket and its levels
    total = used + rounds * most
    return (
        floats(total), integers(total), floats(total),
        floats(most), integers(most), floats(most),
    )  # fmt: skip


@kernel
def _settle(cells, left, right, edge, first, resolution, energy, bracket, done):
    """Close brackets that are still wide, one by one, with solutions that meet where states live.

    A wide bracket may name the place of a neighbour. It is asked for again when it is narrower.
    """
    todo = floats(done.size)
    room = _room(LANES, 1, _MORE_ROUNDS)
    samples, turn, angle = room[:3]
    for rounds in (_ROUNDS, _ROUNDS, _MORE_ROUNDS):
        count = 0
        for i in range(done.size):
            if done[i] == 0:
                todo[count] = energy[i]
                count += 1
        if count == 0:
            return
        stops = homes(cells, left, right, todo[:count])
        count = 0
        for i in range(done.size):
            if done[i] != 0:
                continue
            for k in range(LANES):
                share = k / (LANES - 1.0)
                samples[k] = bracket[i, 0] + (bracket[i, 1] - bracket[i, 0]) * share
            samples[LANES - 1] = bracket[i, 1]
            angles(cells, left, right, stops[count], samples[:LANES], turn, angle)
            _converge(
                cells, left, right, stops[count], edge, first + i, resolution, room, LANES,
                energy[i : i + 1], bracket[i : i + 1], done[i : i + 1], rounds,
            )  # fmt: skip
            count += 1


@kernel
def _levels(cells, left, right, stop, bottom, top, edge, first, last, most, resolution):
    """As `find`, for cells that are ready."""
    floor = cells[7][0]
    points = _spread(cells, bottom, top, 4.0 * (last - first))
    size = points.size
    if top == edge:
        points[size - 2] = max(points[size - 3], edge - _BESIDE * (edge - floor))
    turn, angle = integers(size), floats(size)
    angles(cells, left, right, stop, points, turn, angle)
    below, sure = _count(turn[size - 1], angle[size - 1]), True
    if top == edge:
        moved = (turn[size - 1] - turn[size - 2]) * np.pi + angle[size - 1] - angle[size - 2]
        sure = below == _count(turn[size - 2], angle[size - 2])
        sure = sure and abs(angle[size - 1]) > 4.0 * moved
    count = max(min(last, below) - first, 0)
    if count > most:
        count = 0
    room = _room(size + 1, count, _ROUNDS)
    room[0][0], room[1][0], room[2][0] = bottom, 0, 0.0
    if bottom > floor:
        angles(cells, left, right, stop, room[0][:1], room[1], room[2])
    for i in range(size):
        room[0][i + 1], room[1][i + 1], room[2][i + 1] = points[i], turn[i], angle[i]
    energy, bracket = floats(count), grid(count, 2)
    done = integers(count)
    for i in range(count):
        done[i] = 0
    if count > 0:
        _converge(
            cells, left, right, stop, edge, first, resolution, room, size + 1, energy, bracket,
            done, _ROUNDS,
        )  # fmt: skip
        _settle(cells, left, right, edge, first, resolution, energy, bracket, done)
        # Of levels that doubles cannot part, rounding may put the upper one first.
        for i in range(1, count):
            energy[i] = min(max(energy[i], energy[i - 1]), max(bracket[i, 1], energy[i]))
    return below, sure, energy, bracket, done


_FIND = types.Tuple((types.int64, types.boolean, FLOATS, types.float64[:, ::1], INTEGERS))(
    given(1), given(2), given(2), given(2), EDGE, EDGE, types.float64, types.float64,
    types.int64, types.int64, types.int64, types.float64, types.float64, types.float64,
)  # fmt: skip


@apart(_FIND)
def find(
    width, V, mass, per_energy, left, right, floor, edge, first, last, most, bottom, top, resolution
):
    """Find the levels first <= n < last, as many as are bound.

    Parameters
    ----------
    width, V, mass, per_energy, left, right
        As for `_plan.prepare`.
    floor, edge : float
        The least V, and where the continuum begins: infinity between walls.
    first, last : int
    most : int
        If more levels are found, they are counted, but not sought.
    bottom, top : float
        Energies between which they lie: at most `first` levels below the one, `last` below the
        other. Not a number for top: some energy is guessed, and raised until that is so.
    resolution : float
        Half width of a bracket, relative to the height above the floor.

    Returns
    -------
    below : int
        Number of levels below `top`; -1 if the cells are too long, see `_plan.prepare`.
    sure : bool
        False if that depends on rounding, which happens at the edge only.
    energy : ndarray, shape (count,)
    bracket : ndarray, shape (count, 2)
    done : ndarray of int64, shape (count,)
        1: bracket and energy are final. 2: so is the bracket, which holds several levels. 0: the
        bracket is by counts, but it is wide.
    """
    if np.isnan(top):
        top = _top_for(width, V, mass, per_energy, floor, edge, last + _SPARE)
    while True:
        cells, parts, new_left, new_right, home = prepare(
            width, V, mass, per_energy, left, right, floor, top, False
        )
        if parts.shape[0] > MOST_PARTS:
            return -1, True, floats(0), grid(0, 2), integers(0)
        levels = _levels(
            cells, new_left, new_right, home, bottom, top, edge, first, last, most, resolution
        )
        if levels[0] >= last or top >= edge:
            return levels
        top = min(edge, floor + 2.0 * (top - floor))


@kernel(signature=_FIND, entry=True)
def found(
    width, V, mass, per_energy, left, right, floor, edge, first, last, most, bottom, top, resolution
):
    """`find`, to be called from Python."""
    return find(
        width, V, mass, per_energy, left, right, floor, edge, first, last, most, bottom, top,
        resolution,
    )  # fmt: skip
