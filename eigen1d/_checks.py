"""Validators: each checks one thing, raises `InputError`, returns the cleaned value if any."""

import math

import numpy as np

from . import _cells
from .errors import InputError


def numbers(name, values):
    """A row of finite numbers, read-only."""
    if np.ma.is_masked(values):
        bad = int(np.argmax(np.ma.getmaskarray(values)))
        raise InputError(f"{name} has masked values, row {bad} first; leave out these rows")
    try:
        row = np.array(values, ndmin=1)
        if row.dtype.kind == "c":
            raise TypeError("a cast to float would drop the imaginary part")
        row = row.astype(float, copy=False)
    except (TypeError, ValueError):
        raise InputError(f"{name} must be numbers; found {values!r:.80}") from None
    if row.ndim != 1:
        raise InputError(f"{name} must be one row of numbers; found shape {row.shape}")
    finite = np.isfinite(row)
    if not finite.all():
        bad = int(np.argmin(finite))
        raise InputError(f"{name} must be finite; row {bad} has {row[bad]}")
    row.flags.writeable = False
    return row


def number(name, value):
    """One finite number."""
    if np.ndim(value):
        raise InputError(f"{name} must be one number; found {value!r:.80}")
    try:
        value = float(value)
    except (TypeError, ValueError):
        raise InputError(f"{name} must be a number; found {value!r:.80}") from None
    if not np.isfinite(value):
        raise InputError(f"{name} must be finite; found {value}")
    return value


def positive(name, value):
    """One finite number above zero."""
    value = number(name, value)
    if value <= 0:
        raise InputError(f"{name} must be positive; found {value:g}")
    return value


def per_row(name, values, count):
    """One number a row; if it is the same for all, as a view with no memory of its own."""
    values = numbers(name, values)
    if values.size not in (1, count):
        raise InputError(f"{name} must be one number or {count} of them; found {values.size}")
    if values.size == 1 or values.min() == values.max():
        return _cells.repeated(values[0], (count,))
    return values


def choice(name, value, allowed):
    """A name that is in the list `allowed`."""
    if value not in allowed:
        raise InputError(f"unknown {name} {value!r}; write one of: {', '.join(allowed)}")


def check_rows(x):
    """Positions that never descend, at most two at one place, and that cover a length."""
    if _cells.least_width(x) > 0:
        return
    step = x[1:] - x[:-1]
    if step.min() < 0:
        bad = int(np.argmax(step < 0)) + 1
        raise InputError(f"x must ascend; row {bad} has {x[bad]:.12g} after {x[bad - 1]:.12g}")
    still = step == 0
    if still.all():
        raise InputError("x must cover a length; all rows are at one place")
    triple = still[1:] & still[:-1]
    if triple.any():
        raise InputError(
            f"three rows at x = {x[np.argmax(triple)]:.12g}; a jump is two rows at one x: the "
            "value on its left, then the value on its right"
        )


def layer_ends(thickness, start):
    """The ends of layers that are thick enough to be told apart, shape (layers + 1,)."""
    if thickness.min() <= 0:
        bad = int(np.argmin(thickness))
        raise InputError(f"thickness must be positive; layer {bad} has {thickness[bad]:g}")
    x = np.zeros(thickness.size + 1)
    np.cumsum(thickness, out=x[1:])
    x += start
    if _cells.least_width(x) <= 0:
        bad = int(np.argmin(np.diff(x)))
        raise InputError(f"layer {bad} is too thin for its position to be told apart from the next")
    return x


def check_ppoly(name, function):
    """A PPoly of one real function, its breakpoints ascending."""
    from scipy.interpolate import PPoly

    if not isinstance(function, PPoly):
        raise InputError(
            f"{name} must be a scipy.interpolate.PPoly, such as a CubicSpline; found "
            f"{type(function).__name__}"
        )
    if function.c.ndim != 2 or np.iscomplexobj(function.c):
        raise InputError(
            f"{name} must be one real function; its coefficients are {function.c.dtype} of shape "
            f"{function.c.shape}"
        )
    if function.x[0] > function.x[-1]:
        raise InputError(
            f"breakpoints of {name} must ascend; found {function.x[0]:g} to {function.x[-1]:g}"
        )


def check_span(mass_x, x):
    """Breakpoints of a mass that cover those of V."""
    if mass_x[0] > x[0] or mass_x[-1] < x[-1]:
        raise InputError(
            f"mass covers {mass_x[0]:g} to {mass_x[-1]:g}, V covers {x[0]:g} to {x[-1]:g}; "
            "give a mass for the whole span of V"
        )


def check_mass(mass, alpha):
    """A mass that is positive, and that does not fall with energy."""
    if mass.min() <= 0:
        bad = int(np.argmin(mass))
        raise InputError(f"mass must be positive; row {bad} has {mass[bad]:g}")
    if alpha is not None and alpha.min() < 0:
        bad = int(np.argmin(alpha))
        raise InputError(
            f"alpha must not be negative; row {bad} has {alpha[bad]:g}. Levels are counted by "
            "nodes, which needs a mass that does not fall with energy"
        )


MOST = 1e100  # of any size: its square is a double


def check_range(profile):
    """Refuse sizes that no unit gives to a length, energy or mass: solvers would leave doubles."""
    x, V, mass = profile.x, profile.V_cells, _cells.distinct(profile.mass_cells)
    step, height = _cells.least_width(x), max(V.max(), -V.min())
    if not (step > 0 and math.isfinite(height)):
        raise InputError("positions or energies leave the range of double precision")
    for name, allowed, least, most in (
        ("steps of x", 1e-100, step, max(-x[0], x[-1])),
        ("V", 1e-250, height or 1.0, height),  # wells of any shallowness bind
        ("the mass", 1e-100, mass[:, 0].min(), mass.max()),  # positive: none is larger by far
    ):
        if least < allowed or most > MOST:
            raise InputError(
                f"{name} must be of a size from {allowed:g} to {MOST:g}; found "
                f"{least if least < allowed else most:g}. Is the unit right?"
            )


def check_alpha(profile):
    """Refuse an alpha that makes m (1 + alpha (E - V)) vanish at an energy above the least V."""
    height = profile.V_cells.copy()
    height[:, 0] -= profile.V_min
    drop = _cells.product(profile.alpha_cells, height)
    edges = [edge.alpha * (edge.V - profile.V_min) for edge in (profile.left, profile.right)]
    if max(-_cells.minimum(-drop), *edges) < 1:
        return
    tried = [_cells.evaluated(drop, np.full(drop.shape[0], t)) for t in (0.0, 0.5, 1.0)]
    k, cell = np.unravel_index(np.argmax(tried), (3, drop.shape[0]))
    at = profile.x[cell] + 0.5 * k * (profile.x[cell + 1] - profile.x[cell])
    rise = _cells.evaluated(height[cell : cell + 1], np.array([0.5 * k]))[0]
    length, energy = profile.units.length, profile.units.energy
    raise InputError(
        f"alpha is too large for this profile: m (1 + alpha (E - V)) is not positive at x = "
        f"{at:g} {length} for E near the least V; V rises {rise:g} {energy} there and alpha must "
        f"stay below {1 / rise:g} 1/{energy}"
    )


def sampler(name, function, positive=False):
    """The function, held to return finite (and positive) numbers, one for each x or one for all."""
    if not callable(function):
        raise InputError(f"{name} must be a function of x; found {function!r:.80}")

    def checked(x):
        try:
            with np.errstate(all="ignore"):  # what is not finite in the end has its own message
                values = np.asarray(function(x))
        except (TypeError, ValueError) as fault:
            raise InputError(
                f"{name} failed on an array of positions: {fault}; write it with numpy functions, "
                "or wrap it in np.vectorize"
            ) from fault
        if values.dtype.kind not in "biuf" or values.shape not in ((), x.shape):
            raise InputError(
                f"{name} must return one number for each x; for {x.size} of them, shape {x.shape}, "
                f"it returned {values.dtype} of shape {values.shape}"
            )
        usable = np.isfinite(values)
        if positive:
            usable &= values > 0
        if not usable.all():
            bad = x.flat[np.argmin(np.broadcast_to(usable, x.shape))]
            wanted = "finite and positive" if positive else "finite"
            raise InputError(f"{name} must be {wanted} on the span; it is not at x = {bad:.12g}")
        return values

    return checked


def frozen(array):
    """The array, or a view of it, that nobody can write to."""
    array = np.asarray(array)
    if array.flags.writeable:
        array = array.view()
        array.flags.writeable = False
    return array
