"""Many profiles at once: parameter sweeps, noise drawn many times, designs to choose from."""

import os
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from . import _checks, _ensemble
from .errors import InputError
from .levels import Request
from .profile import NM_EV, Profile
from .shooting import ROUNDING, Search
from .units import Units

_PARTS = 8  # of a stack for each thread: the last to end keeps the others waiting for less
_WORTH = 4096  # rows of all members of a part: what takes a thread longer than to be woken
_MOST_WORKERS = 1024  # more threads than any machine has cores gain nothing
_BY_KERNEL = ("linear", "step")  # interpolations whose cells need no more than two rows


@dataclass(frozen=True, eq=False)
class Ensemble:
    """The lowest levels of many profiles.

    Attributes
    ----------
    energy : ndarray, shape (profiles, count)
        Ascending in each row, in the unit of the profile; not a number beyond the last bound level.
    bracket : ndarray, shape (profiles, count, 2)
        As that of `Levels`: by counts of nodes, level n lies between its two ends.
    found : ndarray of int, shape (profiles,)
        How many levels each profile has of those asked for; 0 where it failed too.
    failures : dict of int to str
        What was wrong with the members that could not be solved, by their number from 0.
    notes : dict of int to tuple of str
        What the user should know about a member, in words, where there is something.
    units : Units or None
        Of all members; None where profiles of a list differ in them, or there are none.
    """

    energy: np.ndarray
    bracket: np.ndarray
    found: np.ndarray
    failures: dict[int, str] = field(default_factory=dict)
    notes: dict[int, tuple[str, ...]] = field(default_factory=dict)
    units: Units | None = None

    def __post_init__(self):
        for array in (self.energy, self.bracket, self.found):
            array.flags.writeable = False

    def __len__(self):
        return self.found.size

    def __repr__(self):
        failed = f", {len(self.failures)} failed" if self.failures else ""
        unit = f", in {self.units.energy}" if self.units else ""
        most = self.found.max(initial=0)
        profiles = "1 profile" if len(self) == 1 else f"{len(self):,} profiles"
        levels = "1 level" if most == 1 else f"{most:,} levels"
        return f"<Ensemble: {profiles}, at most {levels} each{unit}{failed}>"


def solve_many(
    profiles=None,
    *,
    count,
    x=None,
    V=None,
    mass=1.0,
    interpolation="linear",
    left="open",
    right="open",
    units=NM_EV,
    workers=None,
):
    """Find the lowest levels of many profiles, on all cores.

    Either a list of profiles of any kind, or a stack of tables that share their positions: V and,
    if need be, the mass differ from member to member. A stack is solved in one compiled call, at a
    small part of the cost of a list.

    Parameters
    ----------
    profiles : sequence of Profile, optional
    count : int
        How many levels, lowest first; fewer are found where fewer are bound.
    x : array_like, shape (rows,), optional
        Positions, as for `Profile.from_rows`.
    V : array_like, shape (profiles, rows), optional
    mass : float or array_like, shape (rows,), (profiles, 1) or (profiles, rows), optional
        In electron masses: of all, of each row, of each profile, of each row of each profile.
    interpolation, left, right, units
        Of a stack, as for `Profile.from_rows`; profiles bring their own. Rows that are joined by
        "smooth" or "monotone" curves cost as much as a list.
    workers : int, optional
        Threads; default: one for each core that may be used.

    Returns
    -------
    Ensemble
        The same energies and brackets that `solve` finds one by one. A member that cannot be solved
        is listed in `failures` and stops no other.

    Raises
    ------
    InputError
        What concerns all members: neither or both of profiles and a stack, arrays whose shapes do
        not fit, positions or a mass shared by all that cannot be used, an unknown word.

    Examples
    --------
    Wells of 8 nm and three depths, in eV:

    >>> import numpy as np
    >>> from eigen1d import solve_many
    >>> x = [0, 6, 6, 14, 14, 20]
    >>> shape = np.array([1, 1, 0, 0, 1, 1])
    >>> wells = solve_many(x=x, V=np.outer([0.1, 0.2, 0.3], shape), mass=0.067, count=3)
    >>> wells
    <Ensemble: 3 profiles, at most 2 levels each, in eV>
    >>> wells.energy.round(4)
    array([[0.0328, 0.099 ,    nan],
           [0.0424, 0.1532,    nan],
           [0.0478, 0.1805,    nan]])
    """
    request, workers = Request.lowest(count), _workers(workers)
    rows = {"x": x, "V": V, "mass": mass, "interpolation": interpolation, "left": left}
    rows |= {"right": right, "units": units}
    if profiles is None:
        members = _Stack.checked(**rows)
    else:
        defaults = solve_many.__kwdefaults__
        members = _listed(profiles, [k for k, value in rows.items() if value is not defaults[k]])
        kinds = {profile.units for profile in members}
        units = kinds.pop() if len(kinds) == 1 else None
    size, count = len(members), request.count
    energy, bracket = np.full((size, count), np.nan), np.full((size, count, 2), np.nan)
    found = np.full(size, -1, np.int64)
    if profiles is None and interpolation in _BY_KERNEL:
        _by_kernel(members, energy, bracket, found, workers)
    failures, notes = _one_by_one(members, request, energy, bracket, found, workers)
    return Ensemble(energy, bracket, found, failures, notes, units)


def _workers(workers):
    if workers is None:
        if hasattr(os, "sched_getaffinity"):
            return len(os.sched_getaffinity(0))
        return os.cpu_count() or 1
    if isinstance(workers, bool) or not hasattr(workers, "__index__") or workers < 1:
        raise InputError(f"workers must be a whole number from 1; found {workers!r}")
    return min(int(workers), _MOST_WORKERS)


def _listed(profiles, stray):
    """The profiles of a list; `InputError` if it holds others, or with arguments of a stack."""
    if isinstance(profiles, Profile):
        raise InputError("profiles must be a list of them; solve(profile, count) takes one")
    try:
        profiles = list(profiles)
    except TypeError:
        raise InputError(f"profiles must be a list of Profiles; found {profiles!r:.60}") from None
    for i, profile in enumerate(profiles):
        if not isinstance(profile, Profile):
            raise InputError(
                f"profiles must be a list of Profiles; number {i} is {profile!r:.60}. Arrays go "
                "by name: solve_many(x=..., V=..., count=...)"
            )
    if stray:
        raise InputError(
            f"give profiles or a stack of tables, not both; found profiles and {', '.join(stray)}"
        )
    return profiles


@dataclass(frozen=True, eq=False)
class _Stack:
    """Tables of rows that share their positions; a sequence of profiles.

    V has the shape (profiles, rows), mass one that is broadcast to it; `shared` are keywords of
    `Profile.from_rows`.
    """

    x: np.ndarray
    V: np.ndarray
    mass: np.ndarray
    shared: dict

    @classmethod
    def checked(cls, x, V, mass, **shared):
        """Return the stack; `InputError` if something is wrong with all of its members."""
        if x is None and V is None:
            raise InputError("give a list of profiles, or x and V of a stack of tables")
        if x is None or V is None:
            raise InputError("a stack needs both x, shape (rows,), and V, shape (profiles, rows)")
        x, V, mass = _checks.numbers("x", x), _numbers("V", V), _numbers("mass", mass)
        if V.ndim != 2 or V.shape[1] != x.size:
            raise InputError(
                f"V must have the shape (profiles, rows), with {x.size} rows as in x; found "
                f"{V.shape}"
            )
        profiles, rows = V.shape
        if mass.shape not in ((), (1,), (rows,), (1, rows), (profiles, 1), (profiles, rows)):
            raise InputError(
                f"mass must be a number, or have the shape ({rows},), ({profiles}, 1) or "
                f"({profiles}, {rows}); found {mass.shape}"
            )
        # One profile finds what is wrong with x, a mass of all, and the words. A zigzag is the
        # cheapest: no cells are to be joined.
        Profile.from_rows(x, np.arange(rows) % 2, mass if mass.ndim < 2 else 1.0, **shared)
        return cls(x, V, mass, shared)

    def __len__(self):
        return self.V.shape[0]

    def __getitem__(self, i):
        mass = np.broadcast_to(self.mass, self.V.shape)[i]
        return Profile.from_rows(self.x, self.V[i], mass, **self.shared)


def _numbers(name, values):
    """An array of real numbers, of any shape."""
    try:
        array = np.asanyarray(values)
        if array.dtype.kind == "c":
            raise TypeError("a cast to float would drop the imaginary part")
        array = array.astype(float, copy=False)
        # What is masked is no number: the member it belongs to fails, and says so.
        return np.ma.filled(array, np.nan) if np.ma.is_masked(values) else array
    except (TypeError, ValueError):
        raise InputError(
            f"{name} must be numbers, as many in each profile; found {values!r:.80}"
        ) from None


def _by_kernel(stack, energy, bracket, found, workers):
    """Solve a stack by the kernel, in parts, each in a thread of its own.

    Where `found` is -1 in the end, something may be wrong, or a level lies at the very edge.
    """
    row = np.flatnonzero(np.diff(stack.x) > 0)
    width, mass = np.diff(stack.x)[row], np.atleast_2d(stack.mass)
    unit = stack.shared["units"].electron_mass
    shared = stack.shared
    flags = shared["interpolation"] == "step", shared["left"] == "open", shared["right"] == "open"

    def solve_part(ends):
        part = slice(*ends)
        _ensemble.find_many(
            width, row, stack.V[part], mass if mass.shape[0] == 1 else mass[part], unit, flags,
            ROUNDING, energy[part], bracket[part], found[part],
        )  # fmt: skip

    parts = max(1, min(_PARTS * workers, len(stack), stack.V.size // _WORTH))
    ends = [len(stack) * k // parts for k in range(parts + 1)]
    _each(solve_part, list(pairwise(ends)), workers)


def _one_by_one(members, request, energy, bracket, found, workers):
    """Solve members whose `found` is -1 as `solve` does; return failures and notes."""

    def solve_one(i):
        found[i] = 0
        try:
            search = Search(members[i])
            _, levels, ends = search.requested(request)
        except InputError as fault:
            return str(fault), ()
        found[i] = levels.size
        energy[i, : levels.size], bracket[i, : levels.size] = levels, ends
        return "", search.notes

    todo = np.flatnonzero(found < 0).tolist()
    told = list(zip(todo, _each(solve_one, todo, workers), strict=True))
    failures = {i: fault for i, (fault, _) in told if fault}
    return failures, {i: words for i, (_, words) in told if words}


def _each(work, items, workers):
    """What `work` makes of each item, in their order."""
    if workers == 1 or len(items) < 2:
        return [work(item) for item in items]
    with ThreadPoolExecutor(workers) as pool:
        return list(pool.map(work, items))
