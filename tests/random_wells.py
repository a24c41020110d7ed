"""Random profiles as arrays, of kinds that are hard for different reasons."""

from dataclasses import dataclass

import numpy as np
from kernel_cells import EPS, WALL, table

from eigen1d import _angles, _plan, _search, shooting


@dataclass(frozen=True)
class Wells:
    """Cells, edges, the least V, where the continuum begins, and the half width of brackets.

    The latter is relative to the height above the least V.
    """

    cells: tuple
    left: np.ndarray
    right: np.ndarray
    floor: float
    edge: float
    resolution: float = 16 * EPS

    @classmethod
    def of(cls, profile):
        """The arrays of a Profile."""
        search = shooting.Search(profile)
        return cls(
            search.cells, search.left, search.right, search.floor, search.edge, search.resolution
        )

    def find(self, first, last, *, bottom=None, top=np.nan, most=1000, run=None):
        """`_search.find`: below, sure, energy, bracket, done."""
        return (run or _search.found)(
            *self.cells, self.left, self.right, self.floor, self.edge, first, last, most,
            self.floor if bottom is None else bottom, top, self.resolution,
        )  # fmt: skip

    def scaled(self, energy, length):
        """The same in other units of energy and length, with hbar = 1 still."""
        width, V, mass, per_energy = self.cells
        unit = 1 / (energy * length**2)  # of mass
        factors = np.array([1.0, energy, unit, unit / energy])
        return Wells(
            (width * length, V * energy, mass * unit, per_energy * (unit / energy)),
            self.left * factors, self.right * factors, self.floor * energy, self.edge * energy,
        )  # fmt: skip

    def half_width(self, energy):
        """Of the brackets that are promised."""
        return self.resolution * (energy - self.floor) + 4 * EPS * np.abs(energy)

    def angles(self, energies, *, stop=None, whole=True, top=None):
        """turn and angle at a node, home if none is given."""
        energies = np.array(energies, dtype=float, ndmin=1)
        top = energies.max() if top is None else top
        cells, _, left, right, home = _plan.prepared(
            *self.cells, self.left, self.right, self.floor, float(top), whole
        )
        turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
        stop = home if stop is None else min(stop, cells[0].size)
        stop = np.full(energies.size, stop)
        _angles.angles(cells, left, right, stop, energies, turn, angle)
        return turn, angle

    def count(self, energies, **keywords):
        """Levels below each energy."""
        turn, angle = self.angles(energies, **keywords)
        return turn - (angle < 0)

    def bisected(self, n, top):
        """Levels n by nothing but counts: as slow as it is plain."""
        low, high = np.full(n.size, self.floor), np.full(n.size, top)
        for _ in range(64):
            middle = 0.5 * (low + high)
            above = self.count(middle, top=top) > n
            low, high = np.where(above, low, middle), np.where(above, middle, high)
        return 0.5 * (low + high)


def _rough(random):
    """Straight noise in cells of all widths, half of them with a graded mass."""
    count = int(random.integers(1, 60))
    V = random.uniform(0, random.choice([1, 10, 100]), (count, 2))
    V[:, 1] -= V[:, 0]
    mass = random.uniform(0.3, 2, (count, 1))
    if random.random() < 0.5:
        mass = np.column_stack([mass, random.uniform(-0.2, 0.5, count)])
    return table(10 ** random.uniform(-2, 0.5, count), V, mass)


def _curved(random):
    """Quartic cells that jump at each joint."""
    count = int(random.integers(1, 40))
    V = random.normal(size=(count, 5)) * 5
    V[:, 0] += 20
    return table(10 ** random.uniform(-1, 0.5, count), V, random.uniform(0.3, 2, (count, 1)))


def _stack(random):
    """Equal wells side by side, their depths the same or the least bit different."""
    wells = int(random.integers(2, 25))
    barrier = random.uniform(0.3, 4)
    V = np.array([20.0, *[0.0, 20.0] * wells, 20.0])
    if random.random() < 0.5:
        V += random.choice([1e-14, 1e-12, 1e-9, 1e-3]) * random.normal(size=V.size)
    return table([2, *[1, barrier] * wells, 2], V[:, None], np.ones((V.size, 1)))


def _doublet(random):
    """Two wells up to 30 apart, equal or detuned by 1e-13 to 1e-5."""
    well, barrier = random.uniform(1, 3), random.uniform(0.5, 30)
    detuned = random.choice([0, 0, 1e-13, 1e-12, 1e-9, 1e-5])
    V = [[10.0], [0.0], [10.0], [detuned], [10.0]]
    return table([2, well, barrier, well, 2], V, np.ones((5, 1)))


def _far(random):
    """Different wells far apart: no node is good for all of their states."""
    wells = int(random.integers(2, 7))
    width, V = [3.0], [10.0]
    for _ in range(wells):
        width += [random.uniform(0.5, 3), random.uniform(0.5, 30)]
        V += [random.uniform(0, 5), random.uniform(10, 15)]
    mass = random.choice([1, 0.5, 0.07])
    return table(width, np.column_stack([V, np.zeros(len(V))]), np.full((len(V), 1), mass))


def _alpha(random):
    """Layers whose mass grows with the energy."""
    count = int(random.integers(1, 20))
    mass = random.uniform(0.3, 1, (count, 1))
    V, alpha = random.uniform(0, 10, (count, 1)), random.uniform(0, 0.02, (count, 1))
    return table(random.uniform(0.05, 2, count), V, mass, mass * alpha)


MAKERS = {
    "rough": _rough, "curved": _curved, "stack": _stack, "doublet": _doublet, "far": _far,
    "alpha": _alpha,
}  # fmt: skip


def random_wells(kind, seed):
    """One of a kind, with a wall or an open edge at each end; None if it has no well."""
    random = np.random.default_rng([seed, list(MAKERS).index(kind)])
    cells = MAKERS[kind](random)
    V = np.polynomial.polynomial.polyval(np.linspace(0, 1, 101), cells[1].T)
    floor = V.min() - (1e-3 if kind == "curved" else 0.0)  # the samples may miss a bottom
    left, right = (
        WALL if random.random() < 0.5 else np.array([1.0, end, 0.8, 0.01 * (kind == "alpha")])
        for end in (V[0, 0], V[-1, -1])
    )
    edge = min([end[1] for end in (left, right) if end[0]], default=np.inf)
    return Wells(cells, left, right, float(floor), float(edge)) if edge > floor else None
