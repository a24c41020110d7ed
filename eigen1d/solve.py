"""The front door: which method, the second opinion, the error budget. No solver here."""

import functools
import importlib
from dataclasses import replace

import numpy as np

from .errors import CheckError, InputError
from .levels import Request

# Each module has find(profile, request) -> Levels, with its own error in budget.numeric. They are
# imported when asked for: the kernels of the first take a while to load.
METHODS = {"shooting": "shooting", "finite-difference": "finite_difference"}


def solve(profile, count=None, window=None, method="shooting", cross_check=False):
    """Find the bound levels of a profile, none missed.

    Parameters
    ----------
    profile : Profile
        V(x) and m(x) on cells, with an edge on each side.
    count : int, optional
        How many levels, lowest first; fewer are returned where fewer exist. Default: all bound
        ones; between two walls, the lowest 10.
    window : (low, high) pair of float, optional
        All levels in this energy interval, in `profile.units.energy`. Excludes `count`.
    method : {"shooting", "finite-difference"}, optional
        Which solver finds them.
    cross_check : bool, optional
        Solve by the other method too; the difference fills the budget's `method` term.

    Returns
    -------
    Levels
        `energy`, shape (k,), ascending, and `bracket`, shape (k, 2), in `profile.units.energy`.
        A profile that binds nothing gives k = 0: an answer, not an error. Rows with sigma_V fill
        the budget's `noise` term.

    Raises
    ------
    InputError
        `count` and `window` together, `count` < 1, a window that does not ascend, or an unknown
        `method`.
    CheckError
        With `cross_check`: the methods disagree by more than the error estimate of the
        finite differences and the bracket allow, in an energy or in which levels exist.

    References
    ----------
    .. [1] E. A. Coddington, N. Levinson, Theory of Ordinary Differential Equations (1955), ch. 8:
       the n-th state has n nodes, which is why counting zeros cannot miss a level.

    Examples
    --------
    >>> from eigen1d import Profile, Units, solve
    >>> well = Profile.from_layers([10.0], [0.0], left="wall", right="wall",
    ...                            units=Units("nm", "meV"))
    >>> solve(well, count=2).energy.round(4)     # hbar^2 pi^2 (n+1)^2 / (2 m L^2)
    array([ 3.7603, 15.0412])
    """
    if method not in METHODS:
        raise InputError(f"unknown method {method!r}; write one of: {', '.join(METHODS)}")
    request = Request.checked(profile, count, window)
    levels = _with_noise(_module(method).find(profile, request))
    if not cross_check:
        return levels
    (second,) = set(METHODS) - {method}
    return _cross_checked(levels, _module(second).find(profile, request), request)


@functools.cache
def _module(method):
    return importlib.import_module(f".{METHODS[method]}", __package__)


def _with_noise(levels):
    """Return `levels` with what sigma_V does to each energy: first order, rows independent."""
    rows = levels.profile.rows
    if rows is None or rows.sigma_V is None:
        return levels
    noise = np.sqrt(np.square(levels.slope_V * rows.sigma_V).sum(axis=1))
    return replace(levels, budget=replace(levels.budget, noise=noise))


def _cross_checked(levels, other, request):
    """Return `levels` with the difference from `other` in the budget; raise if it is too large."""
    _, mine, theirs = np.intersect1d(levels.n, other.n, return_indices=True)
    for i, j in zip(mine, theirs, strict=True):
        allowed = levels.budget.numeric[i] + other.budget.numeric[j]
        if not abs(levels.energy[i] - other.energy[j]) <= allowed:  # a NaN disagrees too
            raise CheckError(_disagreement(levels, i, other.method, other.energy[j], allowed))
    difference = np.empty(len(levels))
    difference[mine] = np.abs(levels.energy[mine] - other.energy[theirs])
    for i in np.flatnonzero(~np.isin(levels.n, other.n)):
        difference[i] = _found_by_one(levels, i, other, request)
    for j in np.flatnonzero(~np.isin(other.n, levels.n)):
        _found_by_one(other, j, levels, request)
    return replace(levels, budget=replace(levels.budget, method=difference))


def _found_by_one(levels, i, other, request):
    """Return how far the methods are apart in a level that `other` does not list; raise if too far.

    Finite differences see energies to within their error only: closer than that to the continuum,
    or to an end of the window, they cannot tell on which side a level lies.
    """
    profile, n = levels.profile, int(levels.n[i])
    estimate, error = _module("finite-difference").estimates(profile, n, n + 1)
    limits = np.array([profile.open_edge, *(request.window or ())])
    allowed = levels.budget.numeric[i] + float(error[0])
    if not np.abs(levels.energy[i] - limits).min() <= allowed:
        raise CheckError(_disagreement(levels, i, other.method, None, allowed))
    return abs(levels.energy[i] - float(estimate[0]))


def _disagreement(levels, i, second, energy, allowed):
    """The text of a CheckError; `energy` is None where the second method has no such level."""
    unit, name = levels.profile.units.energy, levels.profile.source
    found = "no such level" if energy is None else f"{energy:.16g} {unit}"
    if energy is not None:
        apart = f"They are {abs(levels.energy[i] - energy):.2g} {unit} apart; "
    else:
        apart = "It is further from the ends of the list than their errors could explain; "
    return (
        f"{name + ': ' if name else ''}level n = {levels.n[i]}: {levels.method} finds "
        f"{levels.energy[i]:.16g} {unit}, {second} {found}\n"
        f"  {apart}bracket and error estimate together allow {allowed:.2g} {unit}.\n"
        "  The two methods share nothing but the profile, so one of them fails on it: use neither\n"
        "  number. This is a fault of the program; please report it with the profile. Without the\n"
        "  cross-check (cross_check=False, --no-cross-check) you get one opinion, not checked."
    )
