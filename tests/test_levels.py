"""Levels: what follows from the wave functions, and how it is handed on."""

import csv
import dataclasses
import json
import math

import numpy as np
import pytest
from scipy.interpolate import PPoly
from scipy.special import erf, eval_hermite, factorial

from eigen1d import InputError, Profile, Units, solve
from eigen1d.levels import DEFAULT_COUNT, Budget, Request

ATOMIC = Units("bohr", "hartree")
WIDTH, START = 2.5, -0.7  # off-centre: a formula that takes the middle for 0 would pass otherwise


@pytest.fixture(scope="module")
def box():
    """Infinite well of width WIDTH from START: five levels."""
    profile = Profile.from_layers(
        [WIDTH], [0.0], 0.8, start=START, left="wall", right="wall", units=ATOMIC
    )
    return solve(profile, count=5)


MASS, OMEGA, CENTRE = 0.6, 1.3, 0.4


@pytest.fixture(scope="module")
def oscillator():
    """m omega^2 (x - c)^2 / 2 cut where every psi below is under 1e-17: five levels."""
    half = MASS * OMEGA**2 / 2
    V = PPoly(np.array([[half], [-20 * half], [100 * half]]), np.array([CENTRE - 10, CENTRE + 10]))
    return solve(Profile.from_ppoly(V, MASS, units=ATOMIC), count=5)


@pytest.fixture(scope="module")
def step():
    """A wall, 1.5 bohr of V = 0 and m = 0.5, then V = 40 and m = 0.9 for ever: three levels."""
    profile = Profile.from_layers(
        [1.5, 0.5], [0.0, 40.0], [0.5, 0.9], left="wall", right="open", units=ATOMIC
    )
    return solve(profile)


def test_printed_levels_are_one_line(box):
    """What a notebook shows first; the arrays behind it run over pages."""
    named = dataclasses.replace(box, profile=dataclasses.replace(box.profile, title="box 7"))
    first, last = (f"{(np.pi * n / WIDTH) ** 2 / (2 * 0.8):.6g}" for n in (1, 5))
    assert str(named) == repr(named) == f"<Levels: 5 of box 7, {first} to {last} hartree, complete>"
    assert repr(dataclasses.replace(named, complete=False)).endswith(" hartree, NOT complete>")
    read = dataclasses.replace(box.profile, source="tables/box.csv")
    assert repr(dataclasses.replace(box, profile=read)).startswith("<Levels: 5 of box.csv, ")
    none = solve(Profile.from_layers([5.0, 5.0], [0.0, 0.3]))
    assert repr(none) == "<Levels: none of a profile, complete>"


# --- infinite well -------------------------------------------------------------------------------


def test_wave_functions_of_the_infinite_well(box):
    """psi_n = sqrt(2 / L) sin((n + 1) pi x / L), leftmost lobe positive, nothing beyond the walls.

    Every text on quantum mechanics.
    """
    x = np.linspace(START - 1, START + WIDTH + 1, 203)
    inside = (x > START) & (x < START + WIDTH)
    exact = math.sqrt(2 / WIDTH) * np.sin(np.outer(np.arange(1, 6), x - START) * np.pi / WIDTH)
    psi = box.psi(x)
    assert np.abs(psi - np.where(inside, exact, 0.0)).max() < 1e-13
    assert (psi[:, ~inside] == 0).all()


def test_position_of_the_infinite_well(box):
    """<m|x|n> = -8 L m n / (pi^2 (m^2 - n^2)^2) for m + n odd, 0 for even, L/2 on the diagonal.

    Elementary integral (m, n counted from 1).
    """
    m, n = np.arange(1, 6)[:, None], np.arange(1, 6)
    apart = np.where(m == n, 1, m**2 - n**2)
    exact = np.where((m + n) % 2, -8 * WIDTH * m * n / (np.pi * apart) ** 2, 0.0)
    exact += (START + WIDTH / 2) * np.eye(5)
    assert np.abs(box.position - exact).max() < 1e-13
    assert box.mean_x == pytest.approx(np.full(5, START + WIDTH / 2), abs=1e-14)


def test_spread_of_the_infinite_well(box):
    """<x^2> - <x>^2 = L^2 (1/12 - 1/(2 pi^2 n^2)), elementary."""
    n = np.arange(1, 6)
    exact = WIDTH * np.sqrt(1 / 12 - 1 / (2 * np.pi**2 * n**2))
    assert box.spread_x == pytest.approx(exact, rel=1e-13)


@pytest.mark.parametrize("share", [0.1, 0.25, 0.77])
def test_probability_in_the_infinite_well(box, share):
    """P(0, a) = a/L - sin(2 n pi a / L) / (2 n pi), elementary."""
    n = np.arange(1, 6)
    exact = share - np.sin(2 * n * np.pi * share) / (2 * n * np.pi)
    assert box.probability(START, START + share * WIDTH) == pytest.approx(exact, abs=1e-14)
    assert box.probability(-np.inf, START + share * WIDTH) == pytest.approx(exact, abs=1e-14)


def test_digits_survive_far_from_the_origin(box):
    """A device may stand at x = 10^6: <x^2> - <x>^2 taken there would be noise of 10^-4.

    x itself is rounded to 10^-10 there, which bounds what can be kept.
    """
    far = solve(
        Profile.from_layers([WIDTH], [0.0], 0.8, start=1e6, left="wall", right="wall",
                            units=ATOMIC),
        count=5,
    )  # fmt: skip
    assert far.spread_x == pytest.approx(box.spread_x, rel=1e-9)
    assert far.mean_x == pytest.approx(box.mean_x - START + 1e6, abs=1e-9)
    apart = ~np.eye(5, dtype=bool)
    np.testing.assert_allclose(far.position[apart], box.position[apart], atol=1e-9)


def test_probability_adds_up(box, step):
    """Parts that touch must share no point and leave none out; outside walls there is nothing."""
    for levels in (box, step):
        cuts = [-np.inf, 0.2, 0.21, 1.0, 1.7, 2.5, np.inf]
        parts = [levels.probability(a, b) for a, b in zip(cuts[:-1], cuts[1:], strict=True)]
        assert sum(parts) == pytest.approx(np.ones(len(levels)), abs=1e-13)
    assert (box.probability(-9.0, START) == 0).all()
    assert (box.probability(50.0, 60.0) == 0).all()


def test_expectation_of_a_wave(box):
    """<n|cos(2 pi k x / L)|n> is -1/2 where k = n and 0 for any other whole k > 0."""
    for k in range(1, 6):
        found = box.expect(lambda x, k=k: np.cos(2 * np.pi * k * (x - START) / WIDTH))
        assert found == pytest.approx(np.where(np.arange(1, 6) == k, -0.5, 0.0), abs=1e-13)


# --- harmonic oscillator -------------------------------------------------------------------------


def test_wave_functions_of_the_oscillator(oscillator):
    """Hermite functions (E. Schroedinger, Ann. Phys. 384 (1926) 489), leftmost lobe positive."""
    x = np.linspace(CENTRE - 4, CENTRE + 4, 101)
    xi = math.sqrt(MASS * OMEGA) * (x - CENTRE)
    for n, psi in enumerate(oscillator.psi(x)):
        norm = (MASS * OMEGA / np.pi) ** 0.25 / math.sqrt(2.0**n * factorial(n))
        exact = (-1) ** n * norm * eval_hermite(n, xi) * np.exp(-(xi**2) / 2)
        assert np.abs(psi - exact).max() < 2e-12


def test_position_of_the_oscillator(oscillator):
    """<n|x|n+1> = sqrt((n + 1) / (2 m omega)), and only neighbours couple.

    The sign is minus: both leftmost lobes are positive, so the states differ in sign on the right.
    """
    ladder = -np.sqrt(np.arange(1, 5) / (2 * MASS * OMEGA))
    exact = np.diag(ladder, 1) + np.diag(ladder, -1) + CENTRE * np.eye(5)
    assert np.abs(oscillator.position - exact).max() < 1e-11


def test_moments_of_the_oscillator(oscillator):
    """<x^2> = (n + 1/2) / (m omega), <x^4> = 3 (2 n^2 + 2 n + 1) / (2 m omega)^2, about the centre.

    By ladder operators, in every text on quantum mechanics.
    """
    n = np.arange(5)
    assert oscillator.mean_x == pytest.approx(np.full(5, CENTRE), abs=1e-12)
    assert oscillator.spread_x == pytest.approx(np.sqrt((n + 0.5) / (MASS * OMEGA)), rel=1e-12)
    fourth = oscillator.expect(lambda x: (x - CENTRE) ** 4)
    exact = 3 * (2 * n**2 + 2 * n + 1) / (2 * MASS * OMEGA) ** 2
    assert fourth == pytest.approx(exact, rel=1e-11)


def test_probability_in_the_oscillator(oscillator):
    """The ground state is a Gaussian: erf(1) of it lies within sqrt(1 / (m omega))."""
    reach = 1 / math.sqrt(MASS * OMEGA)
    found = oscillator.probability(CENTRE - reach, CENTRE + reach)[0]
    assert found == pytest.approx(erf(1.0), abs=1e-13)


def test_matrix_is_symmetric_and_its_diagonal_is_expect(oscillator, step):
    """Two ways to the same number; an asymmetric one would make selection rules lie."""
    for levels in (oscillator, step):
        matrix = levels.matrix(np.sin)
        np.testing.assert_allclose(matrix, matrix.T, atol=1e-15)
        np.testing.assert_allclose(np.diag(matrix), levels.expect(np.sin), atol=1e-13)
        identity = levels.matrix(lambda x: 1.0)
        np.testing.assert_allclose(identity, np.eye(len(levels)), atol=1e-12)


# --- tails and jumps of the mass -----------------------------------------------------------------


def test_probability_in_a_tail(step):
    """sin(k x) joined to a tail, k = sqrt(2 m E), kappa = sqrt(2 M (V - E)), elementary:

    P_out / P_in = [sin^2(k a) / (2 kappa)] / [a/2 - sin(2 k a) / (4 k)], whatever the mass does,
    since psi is continuous. The tail runs through a cell and on beyond the edge.
    """
    a, k = 1.5, np.sqrt(2 * 0.5 * step.energy)
    kappa = np.sqrt(2 * 0.9 * (40.0 - step.energy))
    inside = a / 2 - np.sin(2 * k * a) / (4 * k)
    outside = np.sin(k * a) ** 2 / (2 * kappa)
    assert len(step) == 3
    assert step.probability(a, np.inf) == pytest.approx(outside / (inside + outside), rel=1e-12)
    far = np.exp(-2 * kappa * 2.0) * outside / (inside + outside)
    assert step.probability(3.5, np.inf) == pytest.approx(far, rel=1e-11)


def test_psi_in_a_tail_decays_and_joins(step):
    """Anywhere means anywhere: the picture and the CSV go beyond the last row."""
    kappa = np.sqrt(2 * 0.9 * (40.0 - step.energy))
    psi = step.psi([2.0 - 1e-9, 2.0 + 1e-9, 3.0, 300.0])
    np.testing.assert_allclose(psi[:, 1], psi[:, 0] * np.exp(-2e-9 * kappa), rtol=1e-11)
    np.testing.assert_allclose(psi[:, 2], psi[:, 1] * np.exp(-kappa * (1 - 1e-9)), rtol=1e-11)
    assert (np.abs(psi[:, 3]) < 1e-100).all()
    assert (step.psi([-0.1]) == 0).all()  # beyond the wall


def test_norm_of_a_state_deep_below_a_long_tail():
    """A barely bound state lies almost wholly in its tails, which no grid of rows would hold.

    One shallow well, weakly bound: E = -m g^2 / 2 with g = V0 a, to first order in g, and
    psi^2 falls as exp(-2 kappa |x|), so <x^2> = 1 / (2 kappa^2). L. D. Landau, E. M. Lifshitz,
    Quantum Mechanics, par. 45.
    """
    profile = Profile.from_layers([1e-3], [-1e-3], start=-5e-4, units=ATOMIC)
    flat = dataclasses.replace(
        profile,
        left=dataclasses.replace(profile.left, V=0.0),
        right=dataclasses.replace(profile.right, V=0.0),
    )
    levels = solve(flat)
    kappa = math.sqrt(-2 * levels.energy[0])
    assert levels.energy[0] == pytest.approx(-(1e-6**2) / 2, rel=1e-5)
    assert levels.spread_x[0] == pytest.approx(1 / (math.sqrt(2) * kappa), rel=1e-5)
    assert levels.probability(0, np.inf)[0] == pytest.approx(0.5, abs=1e-9)


# --- how levels answer to the rows ---------------------------------------------------------------

ROWS = [0.0, 0.5, 1.0, 1.0, 1.7, 2.6, 3.0, 3.0, 3.6, 4.4]
POTENTIAL = [3.0, 2.8, 2.9, 0.1, 0.4, -0.2, 0.3, 2.5, 2.7, 3.1]


@pytest.mark.parametrize("alpha", [None, 0.05])
@pytest.mark.parametrize("interpolation", ["linear", "step", "smooth", "monotone"])
def test_slope_V_is_the_derivative(interpolation, alpha):
    """dE_n/dV_row against levels of changed tables: central differences, extrapolated once.

    Open edges, jumps and an energy-dependent mass all take part; the noise of a table is carried
    to its levels by these numbers.
    """

    def energies(V):
        profile = Profile.from_rows(
            ROWS, V, 0.7, alpha=alpha, interpolation=interpolation, units=ATOMIC
        )
        return solve(profile, count=2)

    found = energies(POTENTIAL).slope_V
    expected = []
    for row in np.eye(len(ROWS)):
        one, two = (
            (energies(POTENTIAL + h * row).energy - energies(POTENTIAL - h * row).energy) / (2 * h)
            for h in (2e-3, 4e-3)
        )
        expected.append((4 * one - two) / 3)
    assert found.shape == (2, len(ROWS))
    assert found == pytest.approx(np.array(expected).T, abs=2e-9)
    assert found.sum(axis=1) == pytest.approx([1.0, 1.0], abs=1e-14)


def test_slope_V_follows_changes_of_the_profile():
    """A tilted, mirrored, stretched table is still a table: each row keeps its meaning."""
    rows = Profile.from_rows(ROWS, POTENTIAL, 0.7, units=ATOMIC)
    changed = rows.tilted(0.1).stretched(1.2).shifted(5.0).mirrored()
    again = Profile.from_rows(changed.rows.x, changed.rows.V, 0.7, units=ATOMIC)
    one, other = solve(changed, count=2), solve(again, count=2)
    np.testing.assert_allclose(one.energy, other.energy, rtol=1e-13)
    np.testing.assert_allclose(one.slope_V, other.slope_V, atol=1e-11)


@pytest.mark.parametrize(
    ("profile", "made_from"),
    [
        (Profile.from_layers([1.0], [0.0], left="wall", right="wall"), "layers"),
        (Profile.from_rows([0, 1], [0, 1], interpolation="monotone", left="wall",
                           right="wall").tilted(1.0), "rows"),
    ],
)  # fmt: skip
def test_slope_V_without_rows_says_so(profile, made_from):
    """Layers have no rows of V, and a tilted shape-preserving curve is that of no table."""
    with pytest.raises(InputError) as caught:
        solve(profile, count=1).slope_V  # noqa: B018
    assert str(caught.value) == (
        f"slope_V needs a table of rows of V; this profile was made from {made_from}, or its rows "
        "no longer describe it"
    )


# --- the object ----------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["n", "energy", "bracket"])
def test_results_are_read_only(box, name):
    """A result changed by accident in one place would be wrong in all others."""
    with pytest.raises(ValueError, match="read-only"):
        getattr(box, name)[...] = 0
    with pytest.raises(dataclasses.FrozenInstanceError):
        setattr(box, name, None)


def test_psi_cannot_be_spoilt_by_what_was_done_with_it(box):
    """Each call hands out its own array: scaling psi for a picture must not scale the next."""
    x = [0.0, 1.0]
    before = box.psi(x).copy()
    box.psi(x)[:] = 7.0
    np.testing.assert_array_equal(box.psi(x), before)


def test_a_profile_that_binds_nothing():
    """An answer, not an error: all that follows from no level is empty, and can be written."""
    levels = solve(Profile.from_layers([1.0], [1.0], units=ATOMIC))
    assert len(levels) == 0 and levels.complete
    assert levels.psi([0.0, 1.0]).shape == (0, 2)
    assert levels.position.shape == (0, 0)
    assert levels.mean_x.size == levels.spread_x.size == levels.probability(0, 1).size == 0
    assert levels.expect(np.cos).size == 0
    assert levels.to_dict()["levels"] == []


def test_probability_of_nothing_is_refused(box):
    for a, b in ((1.0, 1.0), (2.0, 1.0), (np.nan, 1.0)):
        with pytest.raises(InputError) as caught:
            box.probability(a, b)
        assert str(caught.value) == f"a must lie below b; found {a:g}, {b:g}"


@pytest.mark.parametrize("ask", ["expect", "matrix"])
@pytest.mark.parametrize(
    ("f", "message"),
    [
        (3.0, "f must be a function of x; found 3.0"),
        (lambda x: 1 / (x - x), "f must be finite on the span; it is not at x = "),
        (lambda x: x[:2], "f must return one number for each x; for "),
        (lambda x: 1j * x, "f must return one number for each x; for "),
        (math.sin, "f failed on an array of positions: "),
    ],
)
def test_functions_that_cannot_be_averaged(box, ask, f, message):
    """A complex f would lose its imaginary part and a nan spread to all levels, in silence."""
    with pytest.raises(InputError) as caught:
        getattr(box, ask)(f)
    assert str(caught.value).startswith(message)


@pytest.mark.parametrize(
    ("x", "message"),
    [
        ([[0.0, 1.0]], "x must be one row of numbers; found shape (1, 2)"),
        ([0.0, np.nan], "x must be finite; row 1 has nan"),
        ("here", "x must be numbers; found 'here'"),
    ],
)
def test_places_that_are_none(box, x, message, tmp_path):
    with pytest.raises(InputError) as caught:
        box.psi(x)
    assert str(caught.value) == message
    with pytest.raises(InputError) as caught:
        box.states_to_csv(tmp_path / "states.csv", x)
    assert str(caught.value) == message
    assert list(tmp_path.iterdir()) == []


# --- budget and request --------------------------------------------------------------------------


def test_budget_adds_squares_of_what_applies():
    """3-4-5 and 2-3-6-7: independent errors; what does not apply takes no part."""
    three, four = np.array([3.0, 2.0]), np.array([4.0, 3.0])
    assert Budget(three, method=four).total.tolist() == [5.0, math.sqrt(13)]
    assert Budget(three, noise=four).total.tolist() == [5.0, math.sqrt(13)]
    assert Budget(three, table=four).total.tolist() == [5.0, math.sqrt(13)]
    six = np.array([0.0, 6.0])
    assert Budget(three, table=four, noise=six).total.tolist() == [5.0, 7.0]
    assert Budget(three).total.tolist() == [3.0, 2.0]


def test_budget_tells_none_from_zero():
    """Not applicable is null; 0.0 is a measured zero. JSON readers rely on the difference."""
    budget = Budget(np.array([3.0]), noise=np.array([0.0]))
    assert budget.of_level(0) == {
        "numeric": 3.0, "table": None, "noise": 0.0, "method": None, "total": 3.0,
    }  # fmt: skip
    assert json.dumps(budget.of_level(0))  # plain floats


WALLS = Profile.from_layers([1.0], [0.0], left="wall", right="wall")
OPEN = Profile.from_layers([1.0], [0.0])


def test_requests():
    """All bound levels by default, and a number that ends where there is no end of them."""
    assert Request.checked(OPEN) == Request()
    assert Request.checked(WALLS) == Request(count=DEFAULT_COUNT)
    assert DEFAULT_COUNT == 10
    assert Request.checked(WALLS, count=np.int64(3)) == Request(count=3)
    assert Request.checked(OPEN, window=[-1, 2]) == Request(window=(-1.0, 2.0))
    assert Request.checked(OPEN, window=np.array([0.0, 1.0])) == Request(window=(0.0, 1.0))


@pytest.mark.parametrize(
    ("keywords", "message"),
    [
        (dict(count=1, window=(0, 1)),
         "give count or window, not both: a window returns all levels in it"),
        (dict(count=0), "count must be a whole number from 1; found 0"),
        (dict(count=-2), "count must be a whole number from 1; found -2"),
        (dict(count=1.5), "count must be a whole number from 1; found 1.5"),
        (dict(count="3"), "count must be a whole number from 1; found '3'"),
        (dict(count=True), "count must be a whole number from 1; found True"),
        (dict(window=1.0), "window must be two energies (low, high); found 1.0"),
        (dict(window=(1, 2, 3)), "window must be two energies (low, high); found (1, 2, 3)"),
        (dict(window=("a", 1)), "window must be two energies (low, high); found ('a', 1)"),
        (dict(window=(2, 1)),
         "window must ascend: its first energy lies below its second; found 2.0, 1.0"),
        (dict(window=(1, 1)),
         "window must ascend: its first energy lies below its second; found 1.0, 1.0"),
        (dict(window=(float("nan"), 1)),
         "both ends of the window must be finite; found nan, 1.0"),
        (dict(window=(0, float("inf"))),
         "both ends of the window must be finite; found 0.0, inf"),
    ],
)  # fmt: skip
def test_requests_that_cannot_be_met(keywords, message):
    """Whole texts: what was found, and what to write instead."""
    with pytest.raises(InputError) as caught:
        Request.checked(OPEN, **keywords)
    assert str(caught.value) == message


# --- handing it on -------------------------------------------------------------------------------


def test_to_dict_is_the_published_object(step):
    """Keys, their order and their types are a contract: other people's scripts read them."""
    found = step.to_dict()
    assert list(found) == ["schema", "profile", "method", "complete", "levels"]
    assert found["schema"] == "eigen1d/levels-1"
    assert found["profile"] == {
        "title": "", "source": "", "sha256": "", "kind": "layers", "rows": 2, "cells": 2,
        "length_unit": "bohr", "energy_unit": "hartree", "left": "wall", "right": "open",
        "open_edge": 40.0,
    }  # fmt: skip
    assert list(found["profile"]) == [
        "title", "source", "sha256", "kind", "rows", "cells", "length_unit", "energy_unit",
        "left", "right", "open_edge",
    ]  # fmt: skip
    assert found["method"] == "shooting" and found["complete"] is True
    assert len(found["levels"]) == len(step)
    for i, level in enumerate(found["levels"]):
        assert list(level) == ["n", "energy", "bracket", "mean_x", "spread_x", "budget"]
        assert list(level["budget"]) == ["numeric", "table", "noise", "method", "total"]
        assert level["n"] == i and level["energy"] == step.energy[i]
        assert level["bracket"] == list(step.bracket[i])
        assert (level["mean_x"], level["spread_x"]) == (step.mean_x[i], step.spread_x[i])
        assert level["budget"]["table"] is level["budget"]["noise"] is None
        assert level["budget"]["method"] is None and level["budget"]["numeric"] > 0


def test_to_dict_survives_json_to_the_last_digit(step, box):
    """Strict JSON: no NaN, no Infinity (a box has no open edge: null), no numpy types."""
    for levels in (step, box):
        text = json.dumps(levels.to_dict(), allow_nan=False)
        assert json.loads(text) == levels.to_dict()
    assert box.to_dict()["profile"]["open_edge"] is None


def read(path):
    with open(path, newline="") as stream:
        header, *rows = csv.reader(stream)
    return header, [[float(cell) for cell in row] for row in rows]


def test_to_csv_reads_back_to_the_last_digit(step, tmp_path):
    """Units stand in every header, as in the tables that are read."""
    step.to_csv(tmp_path / "levels.csv")
    header, rows = read(tmp_path / "levels.csv")
    assert header == [
        "n", "energy [hartree]", "bracket_low [hartree]", "bracket_high [hartree]",
        "mean_x [bohr]", "spread_x [bohr]",
    ]  # fmt: skip
    columns = [step.n, step.energy, *step.bracket.T, step.mean_x, step.spread_x]
    np.testing.assert_array_equal(np.array(rows), np.column_stack(columns))
    assert (tmp_path / "levels.csv").read_text().startswith("n,energy [hartree],")
    assert (tmp_path / "levels.csv").read_text().splitlines()[1].startswith("0,")


def test_states_to_csv_reads_back_to_the_last_digit(step, tmp_path):
    """V and all wave functions at the points asked for, in the tail too."""
    x = np.array([0.0, 0.5, 1.5, 2.0, 9.0])
    step.states_to_csv(tmp_path / "states.csv", x)
    header, rows = read(tmp_path / "states.csv")
    names = [f"psi_{n} [bohr^-1/2]" for n in step.n]
    assert header == ["x [bohr]", "V [hartree]", *names]
    columns = [x, step.profile.V(x), *step.psi(x)]
    np.testing.assert_array_equal(np.array(rows), np.column_stack(columns))


@pytest.mark.parametrize("write", ["to_csv", "states_to_csv"])
def test_files_are_whole_or_not_there(step, tmp_path, monkeypatch, write):
    """A disk that fills up half way must leave the old file, and no part of the new one."""

    def full(*_):
        raise OSError(28, "No space left on device")

    path = tmp_path / "out.csv"
    path.write_text("old")
    points = () if write == "to_csv" else (np.array([0.0, 1.0]),)
    monkeypatch.setattr("os.fsync", full)
    with pytest.raises(InputError, match="cannot be written: No space left on device"):
        getattr(step, write)(path, *points)
    assert [p.name for p in tmp_path.iterdir()] == ["out.csv"] and path.read_text() == "old"
    monkeypatch.undo()
    with pytest.raises(InputError, match=r"would overwrite the input .*out\.csv"):
        getattr(step, write)(path, *points, inputs=[path])
    assert path.read_text() == "old"
    getattr(step, write)(path, *points)
    assert path.read_text() != "old"
