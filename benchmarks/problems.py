"""The problems of the comparison, each with reference levels, in one form for all methods.

Every problem has `name`, `kind`, `energy` (the reference), `scale` (what errors are relative to),
`pieces(decay)` for the other methods and `make(decay)`, a function that makes the profile. `decay`
says how far an infinite line is followed: until the wave of the highest level has decayed by
exp(-decay). `decays` are the choices; each method takes its own best.
"""

import json
import pathlib
from dataclasses import dataclass

import mpmath
import numpy as np
from scipy.optimize import brentq

from benchmarks.peer_methods import Piece, extrapolated
from eigen1d import Profile, Units, solve
from eigen1d.closed_forms import morse, morse_potential
from eigen1d.square_well import SquareWell

ATOMIC = Units("bohr", "hartree")
DECAYS = (10.0, 11.0, 12.0, 13.0, 14.0, 16.0)
_LEVELS = pathlib.Path(__file__).parent.parent / "tests" / "reference" / "levels.json"


def constant(value):
    """A function of positions that is the same everywhere."""
    return lambda x: np.full(np.shape(x), value)


class _Problem:
    @property
    def count(self):
        """How many levels are wanted."""
        return len(self.energy)

    def error(self, energy):
        """The largest error of a list of levels, relative to `scale`."""
        if len(energy) < self.count:
            return float("inf")
        return float(np.max(np.abs(energy - self.energy) / self.scale))


@dataclass
class Smooth(_Problem):
    """A smooth potential on the infinite line, of constant mass.

    `turning`: the classical turning points of the highest level; `reach`: look no further beyond.
    """

    name: str
    V: object
    mass: float
    energy: np.ndarray
    scale: object
    turning: tuple
    reach: float
    kind = "smooth"
    decays = DECAYS

    def span(self, decay):
        """Where exp(-decay) is left of the highest level, by the integral of kappa."""
        ends, step = [], self.reach / 100_000
        for turn, sign in zip(self.turning, (-1, 1), strict=True):
            x = turn + sign * step * np.arange(100_001)
            kappa = np.sqrt(2 * self.mass * np.maximum(self.V(x) - self.energy[-1], 0))
            ends.append(float(x[np.searchsorted(np.cumsum(kappa) * step, decay)]))
        return tuple(ends)

    def pieces(self, decay):
        """One piece."""
        return [Piece(*self.span(decay), self.V, constant(self.mass))]

    def make(self, decay):
        """A function that makes the profile."""
        span = self.span(decay)
        return lambda: Profile.from_function(self.V, span, self.mass, units=ATOMIC)


@dataclass
class Layered(_Problem):
    """Constant layers, the outer two of which go on for ever; all bound levels."""

    name: str
    thickness: list
    V: list
    mass: list
    energy: np.ndarray
    scale: float
    kind = "layers"
    decays = DECAYS

    def pieces(self, decay):
        """One piece a layer, the outer ones as wide as `decay` says."""
        V, mass = np.array(self.V)[[0, -1]], np.array(self.mass)[[0, -1]]
        width = np.array(self.thickness)
        width[[0, -1]] = decay / np.sqrt(2 * mass * (V - self.energy[-1]))
        ends = np.cumsum(np.append(0.0, width))
        layers = zip(ends[:-1], ends[1:], self.V, self.mass, strict=True)
        return [Piece(low, high, constant(V), constant(m)) for low, high, V, m in layers]

    def make(self, decay):
        """A function that makes the profile: open edges, whatever the decay."""
        return lambda: Profile.from_layers(self.thickness, self.V, self.mass, units=ATOMIC)


@dataclass
class Table(_Problem):
    """Rows joined by straight lines, between two walls; equidistant for the sake of the others."""

    name: str
    x: np.ndarray
    V: np.ndarray
    mass: object
    energy: np.ndarray
    scale: float
    kind = "table"
    decays = (None,)

    def pieces(self, decay):
        """One piece, from the first row to the last."""
        mass = np.broadcast_to(self.mass, self.x.shape)
        V, m = (lambda x, f=f: np.interp(x, self.x, f) for f in (self.V, mass))
        return [Piece(self.x[0], self.x[-1], V, m)]

    def make(self, decay):
        """A function that makes the profile."""
        return lambda: walled(self.x, self.V, self.mass)


def walled(x, V, mass=1.0):
    """The profile of a table between two walls."""
    return Profile.from_rows(x, V, mass, left="wall", right="wall", units=ATOMIC)


def smooth_problems():
    """Morse by its closed form; the quartic oscillator by case P17 of the reference levels."""
    energy = morse(50.0, 1.0)
    turning = [
        brentq(lambda x: morse_potential(x, 50.0, 1.0) - energy[-1], *bracket)
        for bracket in ((-3.0, 0.0), (0.0, 9.0))
    ]
    (case,) = (c for c in json.loads(_LEVELS.read_text())["cases"] if c["id"] == "P17")
    quartic = np.array([float(level["energy"]) for level in case["levels"][:5]])
    turn = quartic[-1] ** 0.25

    def morse_50(x):
        return morse_potential(x, 50.0, 1.0)

    return [
        Smooth("Morse", morse_50, 1.0, energy, 50.0, turning, 60.0),
        Smooth("quartic", lambda x: x**4, 0.5, quartic, quartic, (-turn, turn), 6.0),
    ]


def layered_problems():
    """The square well by its closed form; the double well by transfer matrices in 30 digits."""
    square = SquareWell(2.0, 24.5)  # z0 = (2.0 / 2) sqrt(2 * 24.5) = 7
    thickness, V, mass = [2.0, 1.7, 0.6, 1.3, 2.0], [30.0, 0.0, 30.0, 0.0, 30.0], [1.5, 1.0] * 2
    mass = [*mass, 1.5]
    near = solve(Profile.from_layers(thickness, V, mass, units=ATOMIC)).energy
    double = np.array([_by_matrices(E, thickness, V, mass) for E in near])
    return [
        Layered("square well", [2.0] * 3, [24.5, 0.0, 24.5], [1.0] * 3, square.energies, 24.5),
        Layered("double well, mass steps", thickness, V, mass, double, 30.0),
    ]


def _by_matrices(near, thickness, V, mass):
    """The root, close to `near`, of psi'/m + kappa psi/m behind all layers: shares no code."""
    with mpmath.workdps(30):

        def mismatch(E):
            first, *inner, last = (
                (mpmath.mpf(w), mpmath.mpf(m), mpmath.sqrt(2 * mpmath.mpf(m) * (v - E)))
                for w, v, m in zip(thickness, V, mass, strict=True)
            )
            psi, phi = mpmath.mpf(1), first[2] / first[1]
            for w, m, k in inner:
                cosh, sinh = mpmath.cosh(k * w), mpmath.sinh(k * w)
                psi, phi = psi * cosh + phi * m / k * sinh, psi * k / m * sinh + phi * cosh
            return mpmath.re(phi + last[2] / last[1] * psi)

        return float(mpmath.findroot(mismatch, (near * (1 - 1e-9), near * (1 + 1e-9))))


def invented_table(rows, mass_column=False):
    """An invented well with noise, for ten levels and more: x, V and mass, no two cells alike."""
    x = np.linspace(0.0, 30.0, rows)
    noise = np.random.default_rng(20).normal(size=rows)
    V = 50 * (1 - np.exp(-(((x - 11) / 6) ** 2))) + 0.02 * x + 0.05 * noise
    return x, V, 1.0 + V / 100 if mass_column else 1.0


def table_problems(rows=1000, count=10):
    """Two tables, by finite differences on the rows and 2, 3, 4 intervals a cell, extrapolated."""
    problems = []
    for name, mass_column in (("table", False), ("table, mass column", True)):
        x, V, mass = invented_table(rows, mass_column)
        problem = Table(name, x, V, mass, np.zeros(count), float(np.ptp(V)))
        problem.energy = extrapolated(problem.pieces(None), rows - 1, count)
        problems.append(problem)
    return problems
