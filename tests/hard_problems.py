"""Named problems, each hard for a reason that it names, small enough for a 50-digit judge."""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from problems import ATOMIC
from scipy.interpolate import PPoly

from eigen1d import Profile, Units


@dataclass(frozen=True)
class Hard:
    """A profile and why it is hard.

    Attributes
    ----------
    name : str
    make : callable
        Returns the profile.
    why : str
        What a careless solver gets wrong.
    count : int, optional
        How many levels to ask for; between two walls they never end.
    bound : int, optional
        How many bound levels there are, where counting on paper tells.
    """

    name: str
    make: Callable[[], Profile]
    why: str
    count: int | None = None
    bound: int | None = None


def layers(thickness, V, mass=1.0, **keywords):
    return Profile.from_layers(thickness, V, mass, **({"units": ATOMIC} | keywords))


def rows(x, V, mass=1.0, **keywords):
    return Profile.from_rows(x, V, mass, **({"units": ATOMIC} | keywords))


def well(strength, depth=0.5, **keywords):
    """A symmetric well of half width 1 and unit mass: z0 = sqrt(2 depth) for a strength of 1."""
    return layers([1, 2 / np.sqrt(2 * depth), 1], np.array([1, 0, 1]) * depth * strength**2)


def double_well(barrier, detuning=0.0):
    """Wells of width 2 and depth 10, the right one shallower by `detuning`."""
    return layers([1, 2, barrier, 2, 1], [10, 0, 10, detuning, 10], start=-3.0)


def stack(wells, barrier):
    """Equal wells side by side: `wells` levels grow from each level of one."""
    return layers([1.0] + [1.0, barrier] * wells, [20.0] + [0.0, 20.0] * wells)


def rough(seed, rows_=40, interpolation="linear", **edges):
    """A table of noise with a graded mass: nothing about it is smooth or symmetric."""
    random = np.random.default_rng(seed)
    x = np.cumsum(random.uniform(0.05, 0.4, rows_))
    V = random.uniform(0, 12, rows_)
    V[[0, -1]] = 9.0, 11.0
    mass = random.uniform(0.3, 1.5, rows_)
    return rows(x, V, mass, interpolation=interpolation, **edges)


def uneven():
    """Rows from 1e-4 to 10 apart: a heterojunction in a micrometre of flat band."""
    step = 10.0 ** np.array([1, 1, 0, -1, -2, -3, -4, -4, -3, -2, -1, 0, 0, -3, -4, -1, 1, 1])
    x = np.concatenate([[0.0], np.cumsum(step)])
    V = np.array([5, 5, 4.9, 4, 3, 2.5, 2.4, 0.1, 0, 0, 0.2, 0.9, 1.2, 1, 3, 3.1, 5, 5, 5])
    return rows(x, V)


def spike(height, width):
    """A needle in the middle of a box, by linear rows: psi must nearly vanish there."""
    half = width / 2
    return rows(
        [0, 2 - half, 2, 2 + half, 4.3], [0, 0, height, 0, 0], left="wall", right="wall"
    )  # off-centre, so that no symmetry pairs the levels


def polynomial(*ascending, span, mass=1.0, **keywords):
    """One cell of a polynomial in x - span[0]."""
    V = PPoly(np.array(ascending, dtype=float)[::-1, None], np.array(span, dtype=float))
    return Profile.from_ppoly(V, mass, units=ATOMIC, **keywords)


_NM = {"units": Units("nm", "eV")}
_WALLS = {"left": "wall", "right": "wall"}

HARD = [
    Hard(
        "shallow-1e-6", lambda: well(1e-3), "bound by 1e-6 of the depth; tail 1000 wells", bound=1
    ),
    Hard("shallow-1e-9", lambda: well(10**-4.5), "bound by 1e-9 of the depth", bound=1),
    Hard(
        "odd-just-bound",
        lambda: well(np.pi / 2 * (1 + 1e-5)),
        "the second level is 2.5e-10 of the depth below the rim",
        bound=2,
    ),
    Hard(
        "odd-just-not-bound",
        lambda: well(np.pi / 2 * (1 - 1e-5)),
        "psi turns down only just too late at the rim",
        bound=1,
    ),
    Hard(
        "lopsided-just-bound",
        # K L = arctan sqrt(9) at the threshold of the first level, K = sqrt(2): SquareWell's phase.
        lambda: layers([1, np.arctan(3.0) / np.sqrt(2) * (1 + 1e-5), 1], [10, 0, 1]),
        "the only level of a lopsided well, 1e-10 of the depth below its lower rim",
        bound=1,
    ),
    Hard("doublet-1e-12", lambda: double_well(6.6), "splitting 1e-12, a few hundred roundings"),
    Hard("doublet-1e-40", lambda: double_well(21), "splitting 1e-40: one double for two levels"),
    Hard("doublet-1e-112", lambda: double_well(60), "splitting 1e-112, far below doubles"),
    Hard(
        "almost-doublet",
        lambda: double_well(60, 1e-9),
        "levels 1e-9 apart, each in a well of its own, mixed by 1e-100 only",
    ),
    Hard(
        "opaque",
        lambda: layers([1, 1, 40, 0.8, 1], [300, 0, 300, 0, 300]),
        "exp(+-980) across the barrier: amplitudes leave the range of doubles",
    ),
    Hard(
        "stack-of-20",
        lambda: stack(20, 3.0),
        "20 levels within 1e-8, a miniband that is a line to most programs",
    ),
    Hard(
        "mass-100",
        lambda: layers([1, 1.5, 0.5, 1, 1], [8, 0, 3, 1, 6], [10, 0.1, 10, 0.1, 1]),
        "psi' jumps by 100 at each interface",
    ),
    Hard(
        "spike-1e6",
        lambda: spike(1e6, 1e-3),
        "V of 1e6 over a thousandth of the box",
        count=6,
    ),
    Hard("spike-down", lambda: spike(-1e5, 1e-2), "a needle 1e5 deep beside a flat box", count=14),
    Hard("uneven", uneven, "rows 1e-4 to 10 apart in one table"),
    Hard("rough", lambda: rough(1), "noise, graded mass, open edges"),
    Hard("rough-step", lambda: rough(2, interpolation="step"), "a jump of V and m at every row"),
    Hard("rough-smooth", lambda: rough(3, 25, "smooth"), "a cubic spline that overshoots its rows"),
    Hard(
        "rough-monotone",
        lambda: rough(4, 25, "monotone", left="wall", right="wall"),
        "cubic V and m between walls",
        count=7,
    ),
    Hard(
        "wall-and-open",
        lambda: rough(5, left="wall"),
        "different conditions at both ends",
    ),
    Hard(
        "open-and-wall",
        lambda: rough(6, right="wall"),
        "the mirror case: an open edge on the left",
    ),
    Hard(
        "alpha",
        lambda: layers(
            [5, 8, 3, 6, 5],
            [0.3, 0, 0.25, 0.05, 0.3],
            [0.09, 0.067, 0.08, 0.06, 0.09],
            alpha=[0.5, 0.64, 0.5, 0.7, 0.4],
            **_NM,
        ),
        "a mass that grows with the energy sought",
    ),
    Hard(
        "alpha-graded",
        lambda: rows(
            [0, 4, 4, 10, 13, 13, 17],
            [0.4, 0.4, 0, 0.1, 0.02, 0.35, 0.35],
            [0.09, 0.09, 0.06, 0.07, 0.05, 0.09, 0.09],
            alpha=[0.3, 0.4, 1.0, 0.8, 1.2, 0.5, 0.5],
            **_NM,
        ),
        "V, m and alpha all graded: a cubic mass that depends on energy",
    ),
    Hard(
        "graded-mass",
        lambda: layers(
            [2, 3, 2], [9, 0, 7], [0.2, 0.5, 3.0], V_end=[6, 2, 9], mass_end=[1.0, 4.0, 0.1]
        ),
        "V and m linear in every layer, m by a factor of 30",
    ),
    Hard(
        "quartic-double",
        # 3.7 (t^2 - 7.9 t + 7.3)^2: terms of 5e4 on the cell add up to 0 at the bottoms.
        lambda: polynomial(
            *(3.7 * np.array([53.29, -115.34, 77.01, -15.8, 1])), span=(0, 9.7), **_WALLS
        ),
        "two wells in one cell of degree 4, whose power coefficients cancel where the states are",
        count=2,
    ),
    Hard(
        "sextic-corner",
        lambda: polynomial(
            *(0.023 * math.comb(6, k) * (-7.77) ** (6 - k) for k in range(7)),
            span=(0, 10.3),
            **_WALLS,
        ),
        "0.023 (x - 7.77)^6 in one cell, with coefficients 10^5 times the levels",
        count=3,
    ),
    Hard(
        "far-away-curved",
        lambda: polynomial(200.5, -80.2, 8.02, span=(2**20, 2**20 + 10.3), right="wall"),
        "a parabola at x = 1e6: parts of a cell must not take their widths from positions",
        count=4,
    ),
    Hard(
        "offset",
        lambda: double_well(1.0).shifted(4096.0),
        "a level's height is what counts, not the zero of energy",
    ),
    Hard(
        "far-away",
        lambda: layers([1, 2, 1], [10, 0, 8], start=1e6),
        "a well at x = 1e6: widths, not positions, are what counts",
    ),
    Hard(
        "needle",
        lambda: layers([1, 1e-4, 1], [1e4, 0, 1e4]),
        "a delta function: all of psi is tail",
        bound=1,
    ),
    Hard(
        "far-wall",
        lambda: layers([300, 2], [1, 0], left="wall", right="open"),
        "the edge is the bottom: nothing is bound, however wide",
        bound=0,
    ),
    Hard(
        "hill",
        lambda: rows([0, 1, 2], [0, 5, 0]),
        "no well at all: an empty answer, not an error",
        bound=0,
    ),
]
