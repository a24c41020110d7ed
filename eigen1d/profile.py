"""Profile: V(x) and m(x) as one exact object, a piecewise polynomial with two edges.

What a table means is decided here and nowhere else. Solvers see `natural()`: the cells in units
with hbar = 1. Everything keeps the user's units of length and energy.
"""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from . import _cells, _checks, _functions, _interpolation
from ._checks import frozen
from ._parts import Edge, Natural, Rows, edges
from .errors import InputError
from .units import Units

NM_EV = Units("nm", "eV")


@dataclass(frozen=True, eq=False)
class Profile:
    """A one-dimensional potential with its mass: cells between breakpoints, and two edges.

    Make one with `from_rows`, `from_layers`, `from_ppoly`, `from_function` or `read_profile`.

    Attributes
    ----------
    x : ndarray, shape (cells + 1,)
        Breakpoints, in `units.length`, strictly ascending. Neighbouring cells with the same
        polynomial have been joined, where that saves a quarter of all cells or more.
    V_cells : ndarray, shape (cells, degree + 1)
        Coefficients of V in powers of t, 0 to 1 across each cell, in `units.energy`.
    mass_cells : ndarray, shape (cells, degree + 1)
        The same for the mass, in electron masses. Read only; may be a broadcast view.
    alpha_cells : ndarray, shape (cells, degree + 1), or None
        Nonparabolicity, in 1 / `units.energy`: m(E) = m (1 + alpha (E - V)).
    left, right : Edge
    units : Units
    title, source, sha256 : str
        A name for pictures and reports; the file it was read from and the digest of its bytes.
    kind : {"rows", "layers", "polynomial", "function"}
    rows : Rows or None
        The table behind the cells, where there is one.
    row_count : int
        Rows or layers that were given; 0 for a function.
    tolerance : float
        Relative error of the cells against what was given: 0 except for `from_function`.
    """

    x: np.ndarray
    V_cells: np.ndarray
    mass_cells: np.ndarray
    alpha_cells: np.ndarray | None
    left: Edge
    right: Edge
    units: Units
    kind: str
    title: str = ""
    source: str = ""
    sha256: str = ""
    rows: Rows | None = None
    row_count: int = 0
    tolerance: float = 0.0

    def __post_init__(self):
        _check_units(self.units)
        _checks.check_range(self)
        if self.alpha_cells is not None:
            _checks.check_alpha(self)

    # Making one ---------------------------------------------------------------------------------

    @classmethod
    def from_rows(
        cls,
        x,
        V,
        mass=1.0,
        *,
        alpha=None,
        interpolation="linear",
        left="open",
        right="open",
        units=NM_EV,
        sigma_V=None,
        title="",
    ):
        """Make a profile from rows (x, V); two rows with the same x are a jump.

        Parameters
        ----------
        x : array_like, shape (rows,)
            Positions, ascending, in `units.length`.
        V : array_like, shape (rows,)
            Potential energy, in `units.energy`.
        mass : float or array_like, shape (rows,), optional
            In electron masses.
        alpha : float or array_like, shape (rows,), optional
            Nonparabolicity, in 1 / `units.energy`, not negative.
        interpolation : {"linear", "step", "smooth", "monotone"}, optional
            How rows are joined: straight lines; a value holds until the next row; cubic spline;
            shape-preserving cubic. Mass and alpha follow V, except that under "smooth" they are
            joined by "monotone", since a spline could swing below zero.
        left, right : {"open", "wall"}, optional
        units : Units, optional
        sigma_V : array_like, shape (rows,), optional
            Standard deviation of each V, in `units.energy`.
        title : str, optional

        Raises
        ------
        InputError
            Values that cannot be used; the message says which row, counted from 0.

        Examples
        --------
        >>> well = Profile.from_rows([0, 2, 2, 8, 8, 10], [0.3, 0.3, 0, 0, 0.3, 0.3], mass=0.067)
        >>> well.V([1.0, 5.0])
        array([0.3, 0. ])
        """
        x, V = _checks.numbers("x", x), _checks.numbers("V", V)
        if x.size < 2 or x.size != V.size:
            raise InputError(
                f"x and V need two or more rows, equally many; found {x.size}, {V.size}"
            )
        _checks.choice("interpolation", interpolation, _interpolation.INTERPOLATIONS)
        _checks.check_rows(x)
        mass = _checks.per_row("mass", mass, x.size)
        alpha = None if alpha is None else _checks.per_row("alpha", alpha, x.size)
        _checks.check_mass(mass, alpha)
        if sigma_V is not None:
            sigma_V = _checks.per_row("sigma_V", sigma_V, x.size)
            if (sigma_V < 0).any():
                raise InputError(f"sigma_V must not be negative; row {np.argmin(sigma_V)} is")
        positive = "monotone" if interpolation == "smooth" else interpolation
        ends = x[:-1] < x[1:]
        if interpolation == "linear" and ends.all():  # one copy of V for the rows and the cells
            rises = _interpolation.rises(V)
            V, V_cells = frozen(rises[:, 0]), rises[:-1]
        else:
            V_cells = _interpolation.cells(interpolation, x, V)
        fields = [V_cells, _interpolation.cells(positive, x, mass)]
        if alpha is not None:
            fields.append(_interpolation.cells(positive, x, alpha))
        sides = edges(left, right, V, V, mass, mass, alpha)
        del mass, alpha  # memory: of a long table the cells are enough
        return cls._joined(
            x if ends.all() else x[np.append(ends, True)],
            fields,
            sides,
            units=units,
            kind="rows",
            title=title,
            rows=Rows(x, V, interpolation, sigma_V),
            row_count=x.size,
        )

    @classmethod
    def from_layers(
        cls,
        thickness,
        V,
        mass=1.0,
        *,
        V_end=None,
        mass_end=None,
        start=0.0,
        alpha=None,
        left="open",
        right="open",
        units=NM_EV,
        title="",
    ):
        """Make a profile from layers, each constant or linearly graded.

        Parameters
        ----------
        thickness : array_like, shape (layers,)
            In `units.length`, positive.
        V : array_like, shape (layers,)
            Potential energy at the left side of each layer, in `units.energy`.
        mass : float or array_like, shape (layers,), optional
            In electron masses, at the left side.
        V_end, mass_end : array_like, shape (layers,), optional
            Values at the right side; default: the layer is constant.
        start : float, optional
            Position of the first layer's left side.
        alpha : float or array_like, shape (layers,), optional
            Nonparabolicity, in 1 / `units.energy`, constant in each layer.
        left, right, units, title
            As for `from_rows`.

        Raises
        ------
        InputError
            Values that cannot be used.

        Examples
        --------
        >>> box = Profile.from_layers([10.0], [0.0], left="wall", right="wall")
        >>> box.x
        array([ 0., 10.])
        """
        thickness, V = _checks.numbers("thickness", thickness), _checks.numbers("V", V)
        count = thickness.size
        if count == 0 or V.size != count:
            raise InputError(f"thickness and V must be equally long; found {count} and {V.size}")
        x = _checks.layer_ends(thickness, _checks.number("start", start))
        mass = _checks.per_row("mass", mass, count)
        V_end = V if V_end is None else _checks.per_row("V_end", V_end, count)
        mass_end = mass if mass_end is None else _checks.per_row("mass_end", mass_end, count)
        alpha = None if alpha is None else _checks.per_row("alpha", alpha, count)
        _checks.check_mass(mass, alpha)
        _checks.check_mass(mass_end, None)
        fields = [_cells.graded(V, V_end), _cells.graded(mass, mass_end)]
        if alpha is not None:
            fields.append(alpha[:, None])
        return cls._joined(
            x,
            fields,
            edges(left, right, V, V_end, mass, mass_end, alpha),
            units=units,
            kind="layers",
            title=title,
            row_count=count,
        )

    @classmethod
    def from_ppoly(cls, V, mass=1.0, *, left="open", right="open", units=NM_EV, title=""):
        """Make a profile from piecewise polynomials of any degree.

        Parameters
        ----------
        V : scipy.interpolate.PPoly
            Its breakpoints are the ends of the profile.
        mass : float or scipy.interpolate.PPoly, optional
            In electron masses; a PPoly must cover the same span.
        left, right, units, title
            As for `from_rows`.

        Raises
        ------
        InputError
            Not a PPoly of one real function, a span that the mass does not cover, a mass that is
            not positive, values not finite.
        """
        _checks.check_ppoly("V", V)
        x = V.x
        if hasattr(mass, "c"):
            _checks.check_ppoly("mass", mass)
            _checks.check_span(mass.x, x)
            x = np.union1d(x, mass.x[(mass.x > x[0]) & (mass.x < x[-1])])
            weight = _cells.from_ppoly(mass, x)
        else:
            weight = _cells.repeated(_checks.positive("mass", mass), (x.size - 1, 1))
        V_cells = _cells.from_ppoly(V, x)
        if not (np.isfinite(V_cells).all() and np.isfinite(weight).all()):
            raise InputError("V and mass must be finite")
        keywords = {"units": units, "title": title, "row_count": V.x.size - 1}
        return cls._from_fields(x, [V_cells, weight], left, right, kind="polynomial", **keywords)

    @classmethod
    def from_function(
        cls,
        V,
        span,
        mass=1.0,
        *,
        breaks=(),
        tolerance=1e-13,
        left="open",
        right="open",
        units=NM_EV,
        title="",
    ):
        """Make a profile from a function, cut into polynomial cells.

        Parameters
        ----------
        V : callable
            Maps an array of positions to an array of energies.
        span : (float, float)
            Where the cells begin and end.
        mass : float or callable, optional
            In electron masses.
        breaks : sequence of float, optional
            Places inside the span where V or mass jumps or has a kink. At a jump, V is asked on
            both sides; it is never asked exactly at a break.
        tolerance : float, optional
            Local: relative to each cell's own height above the minimum of V, so that a level's
            error is at most this part of its own height, whatever walls stand beside it.
        left, right, units, title
            As for `from_rows`.

        Raises
        ------
        InputError
            A span that is not ascending, a value that is not finite, or a function that jumps,
            bends or wiggles where `breaks` names no place.

        Examples
        --------
        >>> trap = Profile.from_function(lambda x: x**2, (-6, 6), units=Units("bohr", "hartree"))
        >>> bool(abs(trap.V(1.7) - 1.7**2) < 1e-14)
        True
        """
        _check_units(units)
        span, breaks = _checks.numbers("span", span), _checks.numbers("breaks", breaks)
        if span.size != 2:
            raise InputError(f"span must be two numbers (low, high); found {span.size}")
        low, high = span
        if not low < high or not all(low < place < high for place in breaks):
            raise InputError(f"span must ascend and hold all breaks; found {low:g} to {high:g}")
        if not 1e-15 <= _checks.number("tolerance", tolerance) < 1e-3:
            raise InputError(f"tolerance must be from 1e-15 to 1e-3; found {tolerance:g}")
        if callable(mass):
            mass = _checks.sampler("mass", mass, positive=True)
        else:
            mass = _checks.positive("mass", mass)
        ends = np.array([low, *sorted(set(breaks.tolist())), high])
        try:
            x, fields = _functions.cells(
                _checks.sampler("V", V), mass, ends, tolerance, units.electron_mass
            )
        except _functions.TooRough as fault:
            raise InputError(str(fault)) from None
        return cls._from_fields(
            x, fields, left, right, units=units, kind="function", title=title, tolerance=tolerance
        )

    @classmethod
    def _joined(cls, x, fields, ends, **keywords):
        # Cells of a function are cut on purpose, so that low ones do not round by high ones.
        cut = keywords["kind"] == "function" or max(f.shape[1] for f in fields) > 4
        if x.size > 2 and not cut:
            x, fields = _cells.merged(x, fields)
        V, mass, *alpha = (frozen(_cells.trimmed(field)) for field in fields)
        return cls(
            x=frozen(x),
            V_cells=V,
            mass_cells=mass,
            alpha_cells=alpha[0] if alpha else None,
            left=ends[0],
            right=ends[1],
            **keywords,
        )

    @classmethod
    def _from_fields(cls, x, fields, left, right, **keywords):
        if _cells.minimum(fields[1]) <= 0:
            raise InputError("mass must be positive everywhere")
        start, end = [f[:1, 0] for f in fields], [f[-1:].sum(axis=1) for f in fields]
        ends = edges(left, right, start[0], end[0], start[1], end[1])
        return cls._joined(x, fields, ends, **keywords)

    # Asking it ----------------------------------------------------------------------------------

    def V(self, x):
        """Potential energy at x, in `units.energy`; at a jump, the value on its right.

        Beyond an open edge the end value, beyond a wall infinity.
        """
        return self._value(x, self.V_cells, self.left.V, self.right.V, np.inf)

    def m(self, x):
        """Mass at x, in electron masses; beyond a wall not a number."""
        return self._value(x, self.mass_cells, self.left.mass, self.right.mass, np.nan)

    def alpha(self, x):
        """Nonparabolicity at x, in 1 / `units.energy`."""
        x = np.asarray(x, dtype=float)
        if self.alpha_cells is None:
            return np.zeros_like(x) if x.ndim else 0.0
        return self._value(x, self.alpha_cells, self.left.alpha, self.right.alpha, np.nan)

    def cell_of(self, x):
        """Return the cell of each x, and its t, 0 to 1 across it; x is clipped to the cells."""
        x = np.asarray(x, dtype=float)
        cell = np.clip(np.searchsorted(self.x, x, side="right") - 1, 0, self.x.size - 2)
        t = (x - self.x[cell]) / (self.x[cell + 1] - self.x[cell])
        return cell, np.clip(t, 0.0, 1.0)

    def _value(self, x, coefficients, left, right, beyond_wall):
        x = np.asarray(x, dtype=float)
        cell, t = self.cell_of(x)
        value = _cells.evaluated(coefficients[cell.ravel()], t.ravel()).reshape(x.shape)
        value = np.where(x < self.x[0], left if self.left.kind == "open" else beyond_wall, value)
        is_open = self.right.kind == "open"
        beyond = x >= self.x[-1] if is_open else x > self.x[-1]  # there may be a jump to the edge
        value = np.where(beyond, right if is_open else beyond_wall, value)
        return value if x.ndim else float(value)

    @cached_property
    def V_min(self):
        """float: the least V of all cells, in `units.energy`."""
        return _cells.minimum(self.V_cells)

    @cached_property
    def open_edge(self):
        """float: the lowest open edge, below which levels are bound; infinity between two walls."""
        return min((e.V for e in (self.left, self.right) if e.kind == "open"), default=np.inf)

    @property
    def cells(self):
        """int: number of cells."""
        return self.x.size - 1

    def natural(self):
        """Return the cells as solvers see them, in units with hbar = 1.

        Returns
        -------
        Natural
        """
        unit = self.units.electron_mass
        return Natural(
            self.x,
            np.ascontiguousarray(self.V_cells),
            self.mass_cells,
            self.alpha_cells,
            unit,
            self.left.scaled(unit),
            self.right.scaled(unit),
        )

    # Changing it --------------------------------------------------------------------------------

    def tilted(self, field):
        """Return the profile with field * x added to V; `field` in energy per length.

        Open edges keep the end values of the tilted cells.
        """
        field = _checks.number("field", field)
        slope = np.column_stack([field * self.x[:-1], field * np.diff(self.x)])
        V, slope = _cells.padded([self.V_cells, slope])
        return replace(
            self,
            V_cells=frozen(V + slope),
            left=replace(self.left, V=self.left.V + field * self.x[0]),
            right=replace(self.right, V=self.right.V + field * self.x[-1]),
            rows=self.rows and self.rows.tilted(field),
        )

    def stretched(self, factor):
        """Return the profile with positions times `factor`; `InputError` if it is not positive."""
        if not _checks.number("factor", factor) > 0:
            raise InputError(f"factor must be positive; found {factor}; use mirrored() to reflect")
        rows = self.rows and replace(self.rows, x=frozen(self.rows.x * factor))
        return replace(self, x=frozen(self.x * factor), rows=rows)

    def scaled(self, factor):
        """Return the profile with V multiplied by `factor`."""
        factor = _checks.number("factor", factor)
        return self._with_V(
            self.V_cells * factor, lambda V: V * factor, self.rows and self.rows.scaled(factor)
        )

    def shifted(self, energy):
        """Return the profile with `energy` added to V."""
        energy = _checks.number("energy", energy)
        V = self.V_cells.copy()
        V[:, 0] += energy
        rows = self.rows and replace(self.rows, V=frozen(self.rows.V + energy))
        return self._with_V(V, lambda V: V + energy, rows)

    def mirrored(self):
        """Return the mirror image: x replaced by -x, left and right exchanged."""
        alpha = self.alpha_cells
        return replace(
            self,
            x=frozen(-self.x[::-1]),
            V_cells=frozen(_cells.mirrored(self.V_cells)),
            mass_cells=frozen(_cells.mirrored(self.mass_cells)),
            alpha_cells=None if alpha is None else frozen(_cells.mirrored(alpha)),
            left=self.right,
            right=self.left,
            rows=self.rows and self.rows.mirrored(),
        )

    def _with_V(self, cells, of_edge, rows):
        return replace(
            self,
            V_cells=frozen(cells),
            left=replace(self.left, V=of_edge(self.left.V)),
            right=replace(self.right, V=of_edge(self.right.V)),
            rows=rows,
        )

    def with_source(self, source, sha256):
        """Return the profile as read from the file `source`, whose digest is `sha256`."""
        return replace(self, source=source, sha256=sha256)


def _check_units(units):
    if not isinstance(units, Units):
        raise InputError(f'units must be Units("nm", "eV") or the like; found {units!r:.80}')
