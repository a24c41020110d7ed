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
    block,
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
_GROUP = 64  # levels that are settled together
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
def _half_width(energy, resolution, floor):
    """Of a bracket that rounding cannot deceive."""
    return resolution * max(energy - floor, 0.0) + 4.0 * EPS * abs(energy)


@kernel
def _guess(table, used, i, n, edge, resolution, floor):
    """Where the angle reaches level n between samples i and i + 1: (energy, error).

    Inverse interpolation by E. H. Neville's scheme, with the angle as abscissa and the nearest
    samples first. The error is the last correction; infinite where the angle is no help.
    """
    x, y = floats(_NEAREST), floats(_NEAREST)
    low, high, origin = i, i + 1, table[0, i]
    value, error = 0.0, np.inf
    for size in range(min(_NEAREST, used)):
        if low >= 0 and (size % 2 == 0 or high >= used):
            k = low
            low -= 1
        else:
            k = high
            high += 1
        x[size] = _above(table[1, k], table[2, k], n)
        y[size] = _offset(table[0, k], origin, edge)
        for j in range(size - 1, -1, -1):
            gap = x[size] - x[j]
            y[j] = (x[size] * y[j] - x[j] * y[j + 1]) / gap if gap != 0.0 else np.nan
        correction = abs(y[0] - value)
        if size > 1 and not correction < error:
            if correction > error:  # not where it is no number
                error = correction
            break
        if size > 0:
            error = correction
        value = y[0]
    energy = _energy(value, origin, edge)
    high, slack = table[0, i + 1], _half_width(energy, resolution, floor)
    if not origin - slack < energy < high + slack:
        return 0.5 * (origin + high), np.inf
    error = abs(_energy(value + error, origin, edge) - energy)
    return min(max(energy, origin), high), error


@kernel
def _bracket(table, used, n):
    """The sample below level n whose neighbour is above it."""
    low, high = 0, used - 1
    while high - low > 1:
        middle = (low + high) // 2
        if _count(table[1, middle], table[2, middle]) > n:
            high = middle
        else:
            low = middle
    return low


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
def _merge(table, used, points, turn, angle, first, last):
    """Insert the points first <= i < last in their order; they come nearly sorted."""
    for i in range(first + 1, last):
        k = i
        while k > first and points[k - 1] > points[k]:
            points[k - 1], points[k] = points[k], points[k - 1]
            turn[k - 1], turn[k] = turn[k], turn[k - 1]
            angle[k - 1], angle[k] = angle[k], angle[k - 1]
            k -= 1
    old, new = used - 1, last - 1
    for place in range(used + last - first - 1, -1, -1):
        if new < first:
            return
        if old >= 0 and table[0, old] > points[new]:
            for row in range(3):
                table[row, place] = table[row, old]
            old -= 1
        else:
            table[0, place], table[1, place], table[2, place] = points[new], turn[new], angle[new]
            new -= 1


@kernel
def _verified(turn, angle, points, k, n, target, near, energy, bracket, i):
    """Take two counts around a target, at points k and k + 1, as the bracket of level n.

    Returns whether that closes the matter: 1 for a level alone, 2 for one of several, 0 if not,
    _OFF_CENTRE if the level is too close to an end, where `energy` has it. `near`: it is known to
    be close to the target.
    """
    below, above = _count(turn[k], angle[k]), _count(turn[k + 1], angle[k + 1])
    if below > n or above <= n:
        return 0
    low, high = points[k], points[k + 1]
    energy[i], bracket[i, 0], bracket[i, 1] = target, low, high
    if below < n or above > n + 1:
        # Each of them may lie at an end, as far as rounding of the counts is concerned.
        bracket[i, 0], bracket[i, 1] = low - 0.25 * (high - low), high + 0.25 * (high - low)
        return 2
    f, f_high = _above(turn[k], angle[k], n), _above(turn[k + 1], angle[k + 1], n)
    if max(-f, f_high) < 1.0 and f_high > f:  # else a staircase: it rises here, but not straight
        root = low + (high - low) * (-f / (f_high - f))
        if abs(root - target) <= 0.15 * (high - low):
            near, energy[i] = True, root
        elif not near:
            energy[i] = root
            return _OFF_CENTRE
    return 1 if near else 0


@kernel(
    signature=types.void(
        CELLS, EDGE, EDGE, INTEGERS, types.float64, INTEGERS, types.float64,
        types.float64[:, :, ::1], INTEGERS, FLOATS, types.float64[:, ::1], INTEGERS, types.int64,
    )
)  # fmt: skip
def _converge(
    cells, left, right, stop, edge, level, resolution, tables, used, energy, bracket, done, rounds
):
    """Close the brackets of levels, ascending, from samples: `used` ones in each of `tables`.

    One table for all levels, with solutions that meet at one node, or one table and one `stop` for
    each level. Rows of a table: energies, ascending; turn; angle. What is not done in the end keeps
    the bracket between two samples.
    """
    floor, size = cells[7][0], energy.size
    most = (6 if stop.size == 1 else LANES) * size + 4 * LANES  # points of a round
    points, turn, angle, stops = floats(most), integers(most), floats(most), integers(most)
    target, place, begin = floats(size), integers(size), integers(size + 1)
    width, before, missed = floats(size), floats(size), integers(size)
    for i in range(size):
        width[i], before[i], missed[i] = np.inf, np.inf, 0
    active = 0
    for count in range(rounds + 1):
        still = 0
        for i in range(size):
            still += 1 if done[i] == 0 else 0
        # With one node for all, levels that do not follow the others are better met elsewhere.
        if still == 0 or count == rounds or (stop.size < size and count > 2 and still == active):
            break
        active = still
        each, new, previous = max(1, LANES // active), 0, -1
        for i in range(size):
            place[i], begin[i] = -1, new
            if done[i] != 0:
                continue
            t = 0 if stop.size == 1 else i
            k = _bracket(tables[t], used[t], level[i])
            low, high = tables[t, 0, k], tables[t, 0, k + 1]
            guess, error = _guess(
                tables[t], used[t], k, level[i], edge, resolution, floor
            )
            half = _half_width(guess, resolution, floor)
            if missed[i] == _RECENTRED:
                guess, error = energy[i], 0.0
            elif missed[i] == _FAILED:
                error, missed[i] = np.inf, 0
            if high - low <= 0.3 * half or error <= _SURE * half:
                target[i], place[i] = guess, new
                points[new] = max(guess - half, floor)
                points[new + 1] = min(guess + half, edge)
                new += 2
            elif k != previous or stop.size > 1:
                inside = _count(tables[t, 1, k + 1], tables[t, 2, k + 1])
                inside -= _count(tables[t, 1, k], tables[t, 2, k])
                several = each
                if inside > 1 or (high - low > 0.5 * width[i] and error > 0.1 * before[i]):
                    several = max(each, min(int(inside) + 2, LANES - 1))
                new += _cuts(points[new:], low, high, guess, error, several)
            width[i], before[i], previous = high - low, error, k
            for k in range(begin[i], new):
                stops[k] = stop[t]
        begin[size] = new
        angles(cells, left, right, stops[:new], points[:new], turn, angle)
        for i in range(size):
            if place[i] >= 0:
                near = width[i] <= 0.3 * _half_width(target[i], resolution, floor)
                done[i] = _verified(
                    turn, angle, points, place[i], level[i], target[i], near, energy, bracket, i
                )
                recentred, missed[i] = missed[i] == _RECENTRED, _FAILED
                if done[i] == _OFF_CENTRE:
                    done[i] = 0
                    if not recentred:
                        missed[i] = _RECENTRED
        for t in range(stop.size):
            first, last = (0, new) if stop.size == 1 else (begin[t], begin[t + 1])
            _merge(tables[t], used[t], points, turn, angle, first, last)
            used[t] += last - first
    for i in range(size):
        if done[i] == 0:
            t = 0 if stop.size == 1 else i
            k = _bracket(tables[t], used[t], level[i])
            bracket[i, 0], bracket[i, 1] = tables[t, 0, k], tables[t, 0, k + 1]
            energy[i] = 0.5 * (bracket[i, 0] + bracket[i, 1])


@kernel
def _settle(cells, left, right, edge, level, resolution, energy, bracket, done):
    """Close brackets that are still wide, with solutions that meet where each state lives.

    A wide bracket may name the place of a neighbour. It is asked for again when it is narrower.
    """
    part, size = integers(_GROUP), 0
    for rounds in (_ROUNDS, _ROUNDS, _MORE_ROUNDS):
        for i in range(done.size + 1):
            if i < done.size and done[i] == 0:
                part[size] = i
                size += 1
            if size == _GROUP or (i == done.size and size > 0):
                _settle_part(
                    cells, left, right, edge, level, resolution, energy, bracket, done,
                    part[:size], rounds,
                )  # fmt: skip
                size = 0


@kernel
def _settle_part(
    cells, left, right, edge, level, resolution, energy, bracket, done, part, rounds
):
    """Close brackets of some levels, each with a table of its own."""
    size, each = part.size, max(4, LANES // part.size)
    levels, middles = integers(size), floats(size)
    for i in range(size):
        levels[i], middles[i] = level[part[i]], energy[part[i]]
    stop = homes(cells, left, right, middles)
    tables = block(size, 3, each + rounds * LANES)
    points, stops = floats(size * each), integers(size * each)
    turn, angle, used = integers(size * each), floats(size * each), integers(size)
    for i in range(size):
        low, high = bracket[part[i], 0], bracket[part[i], 1]
        for k in range(each):
            points[i * each + k] = low + (high - low) * (k / (each - 1.0)) if k < each - 1 else high
            stops[i * each + k] = stop[i]
    angles(cells, left, right, stops, points, turn, angle)
    for i in range(size):
        used[i] = 0
        _merge(tables[i], 0, points, turn, angle, i * each, (i + 1) * each)
        used[i] = each
    new_energy, new_bracket, new_done = floats(size), grid(size, 2), integers(size)
    for i in range(size):
        new_done[i] = 0
    _converge(
        cells, left, right, stop, edge, levels, resolution, tables, used, new_energy, new_bracket,
        new_done, rounds,
    )  # fmt: skip
    for i in range(size):
        energy[part[i]], done[part[i]] = new_energy[i], new_done[i]
        bracket[part[i], 0], bracket[part[i], 1] = new_bracket[i, 0], new_bracket[i, 1]


@kernel
def _levels(cells, left, right, stop, bottom, top, edge, first, last, most, resolution):
    """As `find`, for cells that are ready."""
    floor = cells[7][0]
    points = _spread(cells, bottom, top, 4.0 * (last - first))
    size = points.size
    if top == edge:
        points[size - 2] = max(points[size - 3], edge - _BESIDE * (edge - floor))
    turn, angle, stops = integers(size), floats(size), integers(size)
    for i in range(size):
        stops[i] = stop
    angles(cells, left, right, stops, points, turn, angle)
    below, sure = _count(turn[size - 1], angle[size - 1]), True
    if top == edge:
        moved = (turn[size - 1] - turn[size - 2]) * np.pi + angle[size - 1] - angle[size - 2]
        sure = below == _count(turn[size - 2], angle[size - 2])
        sure = sure and abs(angle[size - 1]) > 4.0 * moved
    count = max(min(last, below) - first, 0)
    if count > most:
        count = 0
    energy, bracket = floats(count), grid(count, 2)
    level, done = integers(count), integers(count)
    for i in range(count):
        level[i], done[i] = first + i, 0
    if count > 0:
        tables, used = block(1, 3, size + 1 + _ROUNDS * (6 * count + 4 * LANES)), integers(1)
        tables[0, 0, 0], tables[0, 1, 0], tables[0, 2, 0] = bottom, 0.0, 0.0
        used[0] = 1
        if bottom > floor:
            low, low_turn, low_angle = floats(1), integers(1), floats(1)
            low[0] = bottom
            angles(cells, left, right, stops[:1], low, low_turn, low_angle)
            tables[0, 1, 0], tables[0, 2, 0] = low_turn[0], low_angle[0]
        _merge(tables[0], 1, points, turn, angle, 0, size)
        used[0] += size
        _converge(
            cells, left, right, stops[:1], edge, level, resolution, tables, used, energy, bracket,
            done, _ROUNDS,
        )  # fmt: skip
        _settle(cells, left, right, edge, level, resolution, energy, bracket, done)
        # Of levels that doubles cannot part, rounding may put the upper one first.
        for i in range(1, count):
            energy[i] = min(max(energy[i], energy[i - 1]), max(bracket[i, 1], energy[i]))
        for i in range(count):
            bracket[i, 0], bracket[i, 1] = max(bracket[i, 0], floor), min(bracket[i, 1], edge)
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
