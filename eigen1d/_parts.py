"""What a profile is made of: its edges, the rows behind it, and its cells as solvers see them."""

from dataclasses import dataclass, replace

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
        cuts = np.flatnonzero(np.diff(self.x) == 0) + 1
        bounds = np.concatenate([[0], cuts, [self.x.size]])
        return [slice(a, b) for a, b in zip(bounds[:-1], bounds[1:], strict=True) if b - a > 1]

    def cells(self, values, interpolation):
        """Return the cell polynomials through `values`, one a row: shape (cells, degree + 1)."""
        if values.strides == (0,):  # one number for all rows stays one number
            return np.broadcast_to(values[:1, None], (np.count_nonzero(np.diff(self.x)), 1))
        parts = [
            _interpolation.cells(interpolation, self.x[s], values[s]) for s in self.stretches()
        ]
        return np.concatenate(_cells.padded(parts)) if len(parts) > 1 else parts[0]

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
    nonparabolicity alpha enters: m (1 + alpha (E - V)).

    Attributes
    ----------
    width : ndarray, shape (cells,)
    V, mass : ndarray, shape (cells, degree + 1)
        Power coefficients in t, 0 to 1 across each cell.
    mass_per_energy : ndarray, shape (cells, degree + 1), no columns where alpha is zero
    left, right : Edge
        With masses in the same units.
    """

    width: np.ndarray
    V: np.ndarray
    mass: np.ndarray
    mass_per_energy: np.ndarray
    left: Edge
    right: Edge
