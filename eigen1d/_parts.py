"""What a profile is made of: its edges, the rows behind it, and its cells as solvers see them."""

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from . import _cells, _interpolation
from ._checks import choice, frozen

EDGES = ("open", "wall")


@dataclass(frozen=True)
class Edge:
    """What lies beyond one end of the cells.

    Attributes
    ----------
    kind : {"open", "wall"}
        "open": V, mass and alpha keep their end value for ever. "wall": psi = 0 at the end.
    V, mass, alpha : float
        End values; of no effect at a wall.
    """

    kind: str
    V: float
    mass: float
    alpha: float = 0.0

    def scaled(self, unit):
        """Return the edge with its mass times `unit`."""
        return Edge(self.kind, self.V, self.mass * unit, self.alpha)


def edges(left, right, V, V_end, mass, mass_end, alpha=None):
    """Return both edges of cells that have these values at their left and their right ends."""
    choice("left edge", left, EDGES)
    choice("right edge", right, EDGES)
    first = 0.0 if alpha is None else float(alpha[0])
    last = 0.0 if alpha is None else float(alpha[-1])
    return (
        Edge(left, float(V[0]), float(mass[0]), first),
        Edge(right, float(V_end[-1]), float(mass_end[-1]), last),
    )


@dataclass(frozen=True, eq=False)
class Rows:
    """The table that a profile came from: what `slope_V` and the noise refer to.

    Attributes
    ----------
    x, V : ndarray, shape (rows,)
    interpolation : str
    sigma_V : ndarray, shape (rows,), or None
        Standard deviation of each V.
    """

    x: np.ndarray
    V: np.ndarray
    interpolation: str
    sigma_V: np.ndarray | None = None

    def stretches(self):
        """Slices of rows between jumps: x strictly ascends in each; lone rows are left out."""
        return _interpolation.stretches(self.x)

    def tilted(self, field):
        """Return the rows with field * x added to V, or None where they no longer give the cells.

        A straight line added to the rows is the same line added to a linear or smooth interpolant.
        """
        if self.interpolation not in ("linear", "smooth"):
            return None
        return replace(self, V=frozen(self.V + field * self.x))

    def scaled(self, factor):
        """Return the rows with V multiplied by `factor`."""
        sigma = None if self.sigma_V is None else frozen(self.sigma_V * abs(factor))
        return replace(self, V=frozen(self.V * factor), sigma_V=sigma)

    def mirrored(self):
        """Return the rows of the mirror image, or None if they are steps.

        The mirror image of "until the next row" is "since the row before": not a step table.
        """
        if self.interpolation == "step":
            return None
        sigma = None if self.sigma_V is None else frozen(self.sigma_V[::-1])
        return replace(self, x=frozen(-self.x[::-1]), V=frozen(self.V[::-1]), sigma_V=sigma)


@dataclass(frozen=True, eq=False)
class Natural:
    """Cells in units with hbar = 1: the user's length and energy, masses scaled to match.

    The mass in a cell at energy E is the polynomial `mass` + E * `mass_per_energy`, which is how a
    nonparabolicity alpha enters: m (1 + alpha (E - V)). Both, and `width`, are made when they are
    first asked for: of a long table each is memory that not every solver needs.

    Attributes
    ----------
    x : ndarray, shape (cells + 1,)
    V, mass_cells : ndarray, shape (cells, degree + 1)
        Power coefficients in t, 0 to 1 across each cell; masses in electron masses.
    alpha_cells : ndarray, shape (cells, degree + 1), or None
    unit : float
        The electron mass.
    left, right : Edge
        With masses in the same units as `mass`.
    """

    x: np.ndarray
    V: np.ndarray
    mass_cells: np.ndarray
    alpha_cells: np.ndarray | None
    unit: float
    left: Edge
    right: Edge

    @cached_property
    def width(self):
        """ndarray, shape (cells,): the length of each cell."""
        return self.x[1:] - self.x[:-1]

    @cached_property
    def mass(self):
        """ndarray, shape (cells, degree + 1): the mass at E = 0."""
        mass = _cells.scaled(self.mass_cells, self.unit)
        if self.alpha_cells is None:
            return mass
        taken = _cells.product(self.mass_per_energy, self.V)
        mass, taken = _cells.padded([mass, taken])
        return mass - taken

    @cached_property
    def mass_per_energy(self):
        """ndarray, shape (cells, degree + 1): its rise with E; no columns where alpha is zero."""
        if self.alpha_cells is None:
            return np.empty((self.x.size - 1, 0))
        return _cells.product(_cells.scaled(self.mass_cells, self.unit), self.alpha_cells)
