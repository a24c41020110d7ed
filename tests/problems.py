"""The reference levels as profiles: one table that every test of a solver reads."""

import json
from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path

import numpy as np
from scipy.interpolate import PPoly

from eigen1d import Profile, Units

# With hbar = 1 the dimensionless equation of the reference levels is the one in atomic units.
ATOMIC = Units("bohr", "hartree")

_DOMAIN = {"pi": np.pi, "pi/2": np.pi / 2, "-pi/2": -np.pi / 2, "0": 0.0}


@dataclass(frozen=True)
class Case:
    """One entry of tests/reference/levels.json."""

    id: str
    title: str
    entry: dict

    @property
    def n(self):
        """Numbers of the levels recorded."""
        return np.array([level["n"] for level in self.entry["levels"]])

    @property
    def energy(self):
        """Their energies as Decimal: all digits recorded."""
        return [Decimal(level["energy"]) for level in self.entry["levels"]]

    @property
    def count(self):
        """How many levels to ask for: all bound ones (None) where their number is recorded."""
        return None if self.bound is not None else int(self.n[-1]) + 1

    @property
    def bound(self):
        """Number of bound levels, None where there is no end of them."""
        return self.entry.get("n_bound")

    def profile(self):
        """The profile, as tests/reference/README.md says.

        Where psi decays for ever, the edge is open: at the end of the domain V then stands so far
        above the levels recorded, or so close to its limit, that either edge gives the same.
        """
        kind = self.entry["potential"]["kind"]
        return getattr(self, f"_{kind}")(
            **{
                side: "wall" if edge == "wall" else "open"
                for side, edge in self.entry["boundary"].items()
            },
            units=ATOMIC,
            title=self.title,
        )

    def _layers(self, **keywords):
        thickness, V, mass = zip(*self.entry["potential"]["layers"], strict=True)
        start = self.entry["potential"]["x0"]
        return Profile.from_layers(thickness, V, mass, start=start, **keywords)

    def _piecewise_linear(self, **keywords):
        table, mass = self.entry["potential"], self.entry["mass"]
        if mass["kind"] == "piecewise_linear":
            assert mass["x"] == table["x"]
            return Profile.from_rows(table["x"], table["V"], mass["m"], **keywords)
        return Profile.from_rows(table["x"], table["V"], mass["value"], **keywords)

    def _piecewise_polynomial(self, **keywords):
        table = self.entry["potential"]
        highest_first = np.array(table["coefficients"], dtype=float).T[::-1]
        V = PPoly(highest_first, np.array(table["breakpoints"], dtype=float))
        return Profile.from_ppoly(V, self.entry["mass"]["value"], **keywords)

    def _formula(self, **keywords):
        code = compile(self.entry["potential"]["expression"], self.id, "eval")

        def V(x):
            return eval(code, {"np": np, "x": x})

        span = [_DOMAIN[end] if isinstance(end, str) else end for end in self.entry["domain"]]
        return Profile.from_function(V, span, self.entry["mass"]["value"], **keywords)


REFERENCE = [
    Case(entry["id"], entry["title"], entry)
    for entry in json.loads((Path(__file__).parent / "reference" / "levels.json").read_text())[
        "cases"
    ]
]
# What a profile does not describe, and why.
NOT_A_PROFILE = {
    "P23": "V goes to minus infinity at x = 0: no polynomial follows it there",
    "P24": "V goes to infinity as 1/x^2 at x = 0: no polynomial follows it there",
    "P29": "edges of bands: psi repeats with a phase instead of vanishing or decaying",
}
SOLVABLE = [case for case in REFERENCE if case.id not in NOT_A_PROFILE]
