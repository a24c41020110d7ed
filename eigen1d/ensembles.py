"""Many profiles at once: parameter sweeps, noise drawn many times, designs to choose from."""

import os
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from . import _checks, _ensemble
from ._parts import EDGES
from .errors import InputError
from .levels import Request
from .profile import NM_EV, Profile
from .shooting import ROUNDING, find

_PARTS = 8  # of a stack for each thread: the last to end keeps the others waiting for less
_INTERPOLATIONS = ("linear", "step")  # those whose cells need no more than two rows


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
    """

    energy: np.ndarray
    bracket: np.ndarray
    found: np.ndarray
    failures: dict

    def __len__(self):
        return self.found.size

    def __repr__(self):
        failed = f", {len(self.failures)} failed" if self.failures else ""
        return f"<Ensemble: {len(self)} profiles, up to {self.energy.shape[1]} levels{failed}>"


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
    mass : float or array_like, shape (rows,) or (profiles, rows), optional
        In electron masses.
    interpolation : {"linear", "step"}, optional
    left, right : {"open", "wall"}, optional
    units : Units, optional
        `interpolation` to `units`: of a stack; profiles bring their own.
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
        not fit, positions that do not ascend, an unknown word.

    Examples
    --------
    Wells of 8 nm and three depths, in eV:

    >>> import numpy as np
    >>> from eigen1d import solve_many
    >>> x = [0, 6, 6, 14, 14, 20]
    >>> shape = np.array([1, 1, 0, 0, 1, 1])
    >>> wells = solve_many(x=x, V=np.outer([0.1, 0.2, 0.3], shape), mass=0.067, count=2)
    >>> wells.energy.round(4)
    array([[0.0344, 0.0979],
           [0.0428, 0.158 ],
           [0.0475, 0.1814]])
    """
    request = Request.lowest(count)
    workers = _workers(workers)
    if (profiles is None) == (V is None):
        raise InputError("give profiles, or x and V of a stack, and not both")
    if profiles is None:
        return _stack(request, x, V, mass, interpolation, left, right, units, workers)
    profiles = list(profiles)
    for i, profile in enumerate(profiles):
        if not isinstance(profile, Profile):
            raise InputError(f"profiles must hold Profiles only; number {i} is {profile!r:.60}")
    out = _empty(len(profiles), request.count)
    _one_by_one(out, range(len(profiles)), profiles.__getitem__, request, workers)
    return out


def _workers(workers):
    if workers is None:
        return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count()
    if isinstance(workers, bool) or not hasattr(workers, "__index__") or workers < 1:
        raise InputError(f"workers must be a whole number from 1; found {workers!r}")
    return int(workers)


def _empty(size, count):
    return Ensemble(
        energy=np.full((size, count), np.nan),
        bracket=np.full((size, count, 2), np.nan),
        found=np.zeros(size, np.int64),
        failures={},
    )


def _one_by_one(out, members, profile_of, request, workers):
    """Solve members as `solve` does and write what comes of each into `out`."""

    def solved(i):
        try:
            levels = find(profile_of(i), request)
        except InputError as fault:
            return i, None, str(fault)
        return i, levels, ""

    with ThreadPoolExecutor(workers) as pool:
        for i, levels, fault in pool.map(solved, members):
            out.found[i] = 0 if levels is None else len(levels)
            out.energy[i], out.bracket[i] = np.nan, np.nan
            if levels is None:
                out.failures[i] = fault
            else:
                out.energy[i, : len(levels)] = levels.energy
                out.bracket[i, : len(levels)] = levels.bracket


def _stack(request, x, V, mass, interpolation, left, right, units, workers):
    """Solve tables that share their positions."""
    if x is None:
        raise InputError("a stack needs x, one position for each row of V")
    x = _checks.numbers("x", x)
    _checks.check_rows(x)
    _checks.choice("left edge", left, EDGES)
    _checks.choice("right edge", right, EDGES)
    if interpolation not in _INTERPOLATIONS:
        raise InputError(
            f"a stack is joined by one of: {', '.join(_INTERPOLATIONS)}; found {interpolation!r}. "
            "Make profiles of the rows and give those"
        )
    V, mass = _stacked("V", V), _stacked("mass", mass)
    if V.ndim != 2 or V.shape[1] != x.size:
        raise InputError(
            f"V must have the shape (profiles, rows), with {x.size} rows as in x; found {V.shape}"
        )
    if mass.shape not in ((), x.shape, V.shape):
        raise InputError(
            f"mass must be a number, or have the shape {x.shape} or {V.shape}; found {mass.shape}"
        )
    out = _empty(V.shape[0], request.count)
    usable = _usable(x, V, mass)
    out.found[~usable] = -1
    flags = interpolation == "step", left == "open", right == "open"
    _compiled(out, np.flatnonzero(usable), x, V, mass * units.electron_mass, flags, workers)

    def profile_of(i):
        return Profile.from_rows(
            x, V[i], mass[i] if mass.ndim == 2 else mass, interpolation=interpolation,
            left=left, right=right, units=units,
        )  # fmt: skip

    _one_by_one(out, np.flatnonzero(out.found < 0), profile_of, request, workers)
    return out


def _stacked(name, values):
    try:
        return np.asarray(values, dtype=float)
    except (TypeError, ValueError):
        raise InputError(f"{name} must be numbers, as many in each profile") from None


def _usable(x, V, mass):
    """Which members are beyond doubt; the others are made into profiles, which say what is wrong.

    A positive mass, and all sizes as `_checks.check_range` wants them.
    """
    size = np.abs(V).max(axis=1)
    least, most = np.atleast_2d(mass).min(axis=1), np.atleast_2d(mass).max(axis=1)
    step = np.diff(x)
    good = (size <= _checks.MOST) & ((size >= 1e-250) | (size == 0))
    good &= (least >= 1e-100) & (most <= _checks.MOST)
    return good & (step[step > 0].min() >= 1e-100) & (np.abs(x).max() <= _checks.MOST)


def _compiled(out, members, x, V, mass, flags, workers):
    """Solve members of a stack by the kernel, in parts, each in a thread of its own."""
    row = np.flatnonzero(np.diff(x) > 0)
    width = np.diff(x)[row]
    mass = np.atleast_2d(mass)
    if mass.shape[1] > 1 and (mass == mass[:, :1]).all():
        mass = mass[:, :1]

    def solve_part(part):
        energy = np.full((part.size, out.energy.shape[1]), np.nan)
        bracket, found = np.full((*energy.shape, 2), np.nan), np.empty(part.size, np.int64)
        _ensemble.find_many(
            width, row, V[part], mass if mass.shape[0] == 1 else mass[part], flags, ROUNDING,
            energy, bracket, found,
        )  # fmt: skip
        out.energy[part], out.bracket[part], out.found[part] = energy, bracket, found

    with ThreadPoolExecutor(workers) as pool:
        list(pool.map(solve_part, np.array_split(members, _PARTS * workers)))
