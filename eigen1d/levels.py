"""Levels: what was asked (Request), what was found, and what follows from the wave functions.

A solver hands over energies, brackets and `states`; everything here is the same for every solver.
`states.sample(x)` returns psi and phi = psi'/m, each of shape (count, len(x)), for x on the cells,
in any normalisation; the exact tails beyond open edges are added here.
"""

import csv
import io
import os
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from ._checks import numbers, sampler
from ._files import write_whole
from ._interpolation import gradient
from ._quadrature import Tail, pieces
from .errors import InputError
from .profile import Profile

_CROWDED = 1e-6  # of the height: levels closer than this share their digits, see `_mixing`
MOST_LEVELS = 100_000  # in one list
DEFAULT_COUNT = 10  # between two walls levels never end; this many are returned unless asked


@dataclass(frozen=True)
class Request:
    """Which levels are wanted: the lowest `count`, all in `window`, or, by default, all bound."""

    count: int | None = None
    window: tuple[float, float] | None = None

    @classmethod
    def checked(cls, profile, count=None, window=None):
        """Return the request for `profile`; `InputError` if it, `count` or `window` is none."""
        if not isinstance(profile, Profile):
            raise InputError(
                f"levels are those of a Profile; found {profile!r:.60}. Profile.from_rows, "
                "Profile.from_layers or read_profile makes one"
            )
        if count is not None and window is not None:
            raise InputError("give count or window, not both: a window returns all levels in it")
        if count is not None:
            return cls.lowest(count)
        if window is not None:
            try:
                low, high = (float(value) for value in window)
            except (TypeError, ValueError):
                raise InputError(
                    f"window must be two energies (low, high); found {window!r}"
                ) from None
            if not (np.isfinite(low) and np.isfinite(high)):
                raise InputError(f"both ends of the window must be finite; found {low}, {high}")
            if not low < high:
                raise InputError(
                    f"window must ascend: its first energy lies below its second; found "
                    f"{low}, {high}"
                )
            return cls(window=(low, high))
        if np.isinf(profile.open_edge):
            return cls(count=DEFAULT_COUNT)
        return cls()

    @classmethod
    def lowest(cls, count):
        """Return the request for `count` levels; `InputError` if that is no number of levels."""
        if isinstance(count, bool) or not hasattr(count, "__index__") or count < 1:
            raise InputError(f"count must be a whole number from 1; found {count!r}")
        if count > MOST_LEVELS:
            raise InputError(f"count must be at most {MOST_LEVELS:,}; found {count:,}")
        return cls(count=int(count))


@dataclass(frozen=True, eq=False)
class Budget:
    """What limits each level, in `units.energy`; None where a term does not apply.

    Attributes
    ----------
    numeric : ndarray, shape (count,)
        Half width of the bracket.
    method : ndarray or None
        Difference from the other method.
    table : ndarray or None
        Worth of the interpolation.
    noise : ndarray or None
        Standard deviation of the energy that sigma_V brings about.
    """

    numeric: np.ndarray
    method: np.ndarray | None = None
    table: np.ndarray | None = None
    noise: np.ndarray | None = None

    @property
    def total(self):
        """ndarray, shape (count,): root of the sum of squares of the terms that apply."""
        terms = [t for t in (self.numeric, self.method, self.table, self.noise) if t is not None]
        return np.sqrt(sum(np.square(t) for t in terms))

    def of_level(self, i):
        """Return the terms of level i as a dict of float or None, ready for JSON."""
        terms = {name: getattr(self, name) for name in ("numeric", "table", "noise", "method")}
        out = {name: None if term is None else float(term[i]) for name, term in terms.items()}
        return out | {"total": float(self.total[i])}


@dataclass(frozen=True, eq=False)
class Levels:
    """Bound levels of a profile, ascending, none left out between the first and the last.

    Attributes
    ----------
    profile : Profile
    n : ndarray of int, shape (count,)
        Number of nodes: the index from the ground state.
    energy : ndarray, shape (count,)
        In `profile.units.energy`.
    bracket : ndarray, shape (count, 2)
        The node count is n (or less) at the lower end and n + 1 (or more) at the upper: the level
        lies between them. Levels closer together than double precision share a bracket.
    complete : bool
        Every bound level, or every one asked for, is in the list.
    method : {"shooting", "finite-difference"}
    states : object
        See the module docstring.
    budget : Budget
    notes : tuple of str
        What the user should know about this list, in words.

    Examples
    --------
    >>> from eigen1d import Profile, Units, solve
    >>> box = Profile.from_layers([1.0], [0.0], left="wall", right="wall",
    ...                           units=Units("bohr", "hartree"))
    >>> levels = solve(box, count=3)
    >>> levels
    <Levels: 3 of a profile, 4.9348 to 44.4132 hartree, complete>
    >>> levels.mean_x.round(12)
    array([0.5, 0.5, 0.5])
    >>> levels.probability(0, 0.25).round(6)
    array([0.090845, 0.25    , 0.303052])
    """

    profile: Profile
    n: np.ndarray
    energy: np.ndarray
    bracket: np.ndarray
    complete: bool
    method: str
    states: object
    budget: Budget
    notes: tuple[str, ...] = field(default=())

    def __post_init__(self):
        for array in (self.n, self.energy, self.bracket):
            array.flags.writeable = False

    def __len__(self):
        return self.energy.size

    def __repr__(self):
        name = self.profile.title or os.path.basename(self.profile.source) or "a profile"
        unit = self.profile.units.energy
        span = f", {self.energy[0]:.6g} to {self.energy[-1]:.6g} {unit}" if len(self) else ""
        complete = "complete" if self.complete else "NOT complete"
        return f"<Levels: {len(self) or 'none'} of {name}{span}, {complete}>"

    # Wave functions -----------------------------------------------------------------------------

    def psi(self, x):
        """Wave functions at x.

        Parameters
        ----------
        x : array_like, shape (points,)
            In `units.length`; anywhere, tails included.

        Returns
        -------
        ndarray, shape (count, points)
            Real, the integral of psi^2 dx over all x is 1, the leftmost lobe is positive. Zero
            beyond a wall.

        Raises
        ------
        InputError
            x not one row of finite numbers.
        """
        x = numbers("x", x)
        psi = self._sample(np.clip(x, self.profile.x[0], self.profile.x[-1]))[0]
        for tail in self._tails:
            beyond = tail.depth(x) > 0
            psi[:, beyond] = tail.psi(x[beyond])
        for edge, outside in (
            (self.profile.left, x < self.profile.x[0]),
            (self.profile.right, x > self.profile.x[-1]),
        ):
            if edge.kind == "wall":
                psi[:, outside] = 0.0
        return psi / self._norm[:, None]

    def _sample(self, x):
        """psi and phi of the states at x inside the cells, those of each crowd orthonormal."""
        psi, phi = self.states.sample(x)
        for crowd, mixing in self._mixing:
            psi[crowd], phi[crowd] = mixing @ psi[crowd], mixing @ phi[crowd]
        return psi, phi

    @cached_property
    def _mixing(self):
        """(levels, matrix) for each crowd of levels too close for their states to be told apart.

        Rounding mixes states of levels that differ by a part g of their height by eps / g. The
        nearest orthonormal ones take their place: S^(-1/2), S being their overlaps
        (P.-O. Loewdin, J. Chem. Phys. 18 (1950) 365).
        """
        near = np.diff(self.energy) <= _CROWDED * (self.energy[1:] - self.profile.V_min)
        cuts = np.flatnonzero(~near) + 1
        crowds = [c for c in np.split(np.arange(len(self)), cuts) if c.size > 1]
        out = []
        for crowd in (slice(c[0], c[-1] + 1) for c in crowds):
            energy = self.energy[crowd]
            overlap = np.zeros((energy.size, energy.size))
            for x, weight in pieces(self.profile, energy):
                psi = self.states.sample(x)[0][crowd]
                overlap += (psi * weight) @ psi.T
            for tail in self._tails_of(self.states.sample, crowd):
                overlap += tail.matrix(np.ones_like)
            norm = np.sqrt(np.diag(overlap))
            value, vector = np.linalg.eigh(overlap / np.outer(norm, norm))
            root = (vector / np.sqrt(np.maximum(value, np.finfo(float).eps))) @ vector.T
            out.append((crowd, root / norm))
        return out

    @cached_property
    def _tails(self):
        """The decaying tails beyond the open edges, in the normalisation of `_sample`."""
        return self._tails_of(self._sample, slice(None))

    def _tails_of(self, sample, part):
        ends = (
            (self.profile.left, self.profile.x[0], -1),
            (self.profile.right, self.profile.x[-1], 1),
        )
        unit = self.profile.units.electron_mass
        return [
            Tail.beyond(
                edge, x, side, unit, self.energy[part], sample(np.array([x]))[0][part, 0]
            )
            for edge, x, side in ends
            if edge.kind == "open"
        ]

    @cached_property
    def _norm(self):
        squares = np.zeros(len(self))
        for _, weight, psi, _ in self._chunks():
            squares += psi**2 @ weight
        squares += sum(tail.squares() for tail in self._tails)
        return np.sqrt(squares)

    def _chunks(self, breaks=(), span=None):
        """Yield (x, weight, psi, phi) of a quadrature over the cells; psi as the states give it."""
        for x, weight in pieces(self.profile, self.energy, breaks, span):
            yield x, weight, *self._sample(x)

    # What follows from them ---------------------------------------------------------------------

    def expect(self, f):
        """Expectation values <n|f(x)|n>.

        Parameters
        ----------
        f : callable
            Maps an array of positions to an array; smooth between the profile's breakpoints.

        Returns
        -------
        ndarray, shape (count,)

        Raises
        ------
        InputError
            f not a function, or its values not finite real numbers, one for each x.
        """
        f = sampler("f", f)
        total = np.zeros(len(self))
        for x, weight, psi, _ in self._chunks():
            total += psi**2 @ (weight * f(x))
        total += sum(tail.expect(f) for tail in self._tails)
        return total / self._norm**2

    def matrix(self, f):
        """Matrix elements <i|f(x)|j>.

        Parameters
        ----------
        f : callable
            As for `expect`.

        Returns
        -------
        ndarray, shape (count, count)

        Raises
        ------
        InputError
            As for `expect`.
        """
        f = sampler("f", f)
        total = np.zeros((len(self), len(self)))
        for x, weight, psi, _ in self._chunks():
            total += (psi * (weight * f(x))) @ psi.T
        total += sum(tail.matrix(f) for tail in self._tails)
        return total / np.outer(self._norm, self._norm)

    @cached_property
    def position(self):
        """ndarray, shape (count, count): <i|x|j>, in `units.length`.

        With alpha the mass differs from level to level and states are not quite orthogonal: what is
        off the diagonal then depends on the origin, which here is the middle of the profile.
        """
        # About a point inside the profile: off-diagonal elements do not depend on the origin, and
        # a profile far from x = 0 would lose digits in them.
        middle = 0.5 * (self.profile.x[0] + self.profile.x[-1])
        return self.matrix(lambda x: x - middle) + middle * np.eye(len(self))

    @cached_property
    def mean_x(self):
        """ndarray, shape (count,): <x>, in `units.length`."""
        middle = 0.5 * (self.profile.x[0] + self.profile.x[-1])
        return middle + self.expect(lambda x: x - middle)

    @cached_property
    def spread_x(self):
        """ndarray, shape (count,): standard deviation of x, in `units.length`."""
        middle = 0.5 * (self.profile.x[0] + self.profile.x[-1])
        offset = self.mean_x - middle
        square = self.expect(lambda x: (x - middle) ** 2)
        return np.sqrt(np.maximum(square - offset**2, 0.0))

    def probability(self, a, b):
        """Probability to find the particle between a and b, either of which may be infinite.

        Returns
        -------
        ndarray, shape (count,)

        Raises
        ------
        InputError
            a not below b.
        """
        if not a < b:
            raise InputError(f"a must lie below b; found {a:g}, {b:g}")
        total = np.zeros(len(self))
        low, high = max(a, self.profile.x[0]), min(b, self.profile.x[-1])
        if low < high:
            for _, weight, psi, _ in self._chunks(span=(low, high)):
                total += psi**2 @ weight
        total += sum(tail.squares(a, b) for tail in self._tails)
        return total / self._norm**2

    @cached_property
    def slope_V(self):
        """ndarray, shape (count, rows): dE_n/dV_row, exact; a sum over rows is 1.

        First-order perturbation theory: dE/dV(x) = psi^2, through the interpolation to the rows.
        An end row also carries its open edge. Where the mass depends on E - V (alpha), V acts on
        the mass too, and the level's own shift acts back:
        dE/dV(x) = (psi^2 + a phi^2) / (1 + integral of a phi^2), a = m alpha / 2.

        Raises
        ------
        InputError
            The profile has no rows of V.
        """
        rows = self.profile.rows
        if rows is None:
            raise InputError(
                "slope_V needs a table of rows of V; this profile was made from "
                f"{self.profile.kind}, or its rows no longer describe it"
            )
        moments = self._row_moments(rows)
        slope = np.zeros((len(self), rows.x.size))
        for stretch in rows.stretches():
            cells = slice(stretch.start, stretch.stop - 1)
            for i in range(len(self)):
                slope[i, stretch] += gradient(
                    rows.interpolation, rows.x[stretch], rows.V[stretch], moments[i, cells]
                )
        for tail in self._tails:
            slope[:, 0 if tail.side < 0 else -1] += tail.weighted_squares()
        return slope / slope.sum(axis=1, keepdims=True)

    def _row_moments(self, rows):
        """Integrals of (psi^2 + a phi^2) t^k over the cells between rows: (count, rows - 1, 4)."""
        moments = np.zeros((len(self), rows.x.size - 1, 4))
        unit = self.profile.units.electron_mass
        for x, weight, psi, phi in self._chunks(breaks=rows.x):
            density = psi**2
            if self.profile.alpha_cells is not None:
                density += 0.5 * unit * self.profile.m(x) * self.profile.alpha(x) * phi**2
            cell = np.clip(np.searchsorted(rows.x, x, side="right") - 1, 0, rows.x.size - 2)
            t = (x - rows.x[cell]) / (rows.x[cell + 1] - rows.x[cell])
            for k in range(4):
                for i in range(len(self)):
                    moments[i, :, k] += np.bincount(
                        cell, density[i] * weight * t**k, minlength=rows.x.size - 1
                    )
        return moments

    # Handing it on ------------------------------------------------------------------------------

    def to_dict(self):
        """Return the JSON object of schema "eigen1d/levels-1"; energies in `units.energy`."""
        p = self.profile
        edge = p.open_edge
        described = {
            "title": p.title,
            "source": p.source,
            "sha256": p.sha256,
            "kind": p.kind,
            "rows": p.row_count,
            "cells": p.cells,
            "length_unit": p.units.length,
            "energy_unit": p.units.energy,
            "left": p.left.kind,
            "right": p.right.kind,
            "open_edge": None if np.isinf(edge) else edge,
        }
        return {
            "schema": "eigen1d/levels-1",
            "profile": described,
            "method": self.method,
            "complete": self.complete,
            "levels": [
                {
                    "n": int(self.n[i]),
                    "energy": float(self.energy[i]),
                    "bracket": [float(end) for end in self.bracket[i]],
                    "mean_x": float(self.mean_x[i]),
                    "spread_x": float(self.spread_x[i]),
                    "budget": self.budget.of_level(i),
                }
                for i in range(len(self))
            ],
        }

    def to_csv(self, path, inputs=()):
        """Write one row a level to `path`, whole or not at all; never over a file of `inputs`."""
        energy, length = self.profile.units.energy, self.profile.units.length
        header = ["n", f"energy [{energy}]", f"bracket_low [{energy}]", f"bracket_high [{energy}]"]
        header += [f"mean_x [{length}]", f"spread_x [{length}]"]
        columns = [self.n, self.energy, *self.bracket.T, self.mean_x, self.spread_x]
        write_whole(path, _csv(header, columns), inputs)

    def states_to_csv(self, path, x, inputs=()):
        """Write V and every psi at the points x to `path`, one row a point; else as `to_csv`."""
        x = numbers("x", x)
        energy, length = self.profile.units.energy, self.profile.units.length
        header = [f"x [{length}]", f"V [{energy}]"]
        header += [f"psi_{n} [{length}^-1/2]" for n in self.n]
        write_whole(path, _csv(header, [x, self.profile.V(x), *self.psi(x)]), inputs)


def _csv(header, columns):
    """Text of a comma-separated table; numbers in the shortest form that reads back the same."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(header)
    writer.writerows(zip(*(column.tolist() for column in columns), strict=True))
    return text.getvalue()
