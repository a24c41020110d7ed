"""The shooting solver against reference levels, a 50-digit judge and functions of scipy."""

from decimal import Decimal

import mpmath
import numpy as np
import pytest
from hard_problems import HARD
from high_precision import count_below
from problems import NOT_A_PROFILE, REFERENCE, SOLVABLE

from eigen1d import Profile, shooting, solve

EPS = np.finfo(float).eps


@pytest.fixture(scope="module")
def solved():
    """Levels of every reference case, each solved once and shared by the tests."""
    found = {}

    def levels(case):
        if case.id not in found:
            found[case.id] = solve(case.profile(), count=case.count)
        return found[case.id]

    return levels


def difference(found, exact):
    """found - exact of a double and a Decimal, without rounding the latter first."""
    return float(Decimal(float(found)) - exact)


# --- reference levels -------------------------------------------------------------------------


def test_reference_cases_are_all_here():
    """A case that silently never runs protects nothing: what is left out is named, and why."""
    assert len({case.id for case in REFERENCE}) == len(REFERENCE) == 32
    assert set(NOT_A_PROFILE) <= {case.id for case in REFERENCE}
    assert len(SOLVABLE) == 29
    for case in REFERENCE:
        singular = "singular_at" in case.entry["potential"]
        periodic = "bloch" in case.entry["boundary"].values()
        assert (case.id in NOT_A_PROFILE) == (singular or periodic), case.id


@pytest.mark.parametrize("case", SOLVABLE, ids=lambda case: case.id)
def test_reference_levels(case, solved):
    """Every recorded level is found under its own number, to 1e-12 of its height, in its bracket.

    The reference has 27 digits or more, so all of the difference is the solver's. The worst seen
    is 2e-14 of the height above the least V for functions, whose cells are cut to 1e-13 of their
    own height, and 5e-16 for tables, layers and polynomials, which are exact.
    """
    levels, profile = solved(case), case.profile()
    assert levels.complete
    np.testing.assert_array_equal(levels.n, np.arange(len(levels)))
    assert len(levels) == (case.bound or case.n[-1] + 1)
    exact = case.entry["potential"]["kind"] != "formula"
    for n, energy in zip(case.n, case.energy, strict=True):
        height = float(energy) - profile.V_min
        assert abs(difference(levels.energy[n], energy)) <= (1e-14 if exact else 1e-12) * height
        low, high = levels.bracket[n]
        assert difference(low, energy) <= 0 <= difference(high, energy), n


@pytest.mark.parametrize("case", SOLVABLE, ids=lambda case: case.id)
def test_brackets_are_narrow(case, solved):
    """A bracket that holds the level is of use only if it is narrow.

    A few roundings of the height for exact cells, and the tolerance of the cut on top for
    functions; never wider than 2e-13 of the height.
    """
    levels, profile = solved(case), case.profile()
    height = levels.energy - profile.V_min
    half = 0.5 * np.diff(levels.bracket, axis=1)[:, 0]
    promised = 32 * EPS + 2 * profile.tolerance
    # Where an offset in V costs digits, no bracket can be narrower than doubles at that energy.
    assert (half <= promised * height + 8 * np.spacing(np.abs(levels.energy))).all()
    np.testing.assert_array_equal(levels.budget.numeric >= half * (1 - 1e-6), True)


PUBLISHED = [
    pytest.param(case, published["n"], published["energy"], id=f"{case.id}-{published['n']}")
    for case in SOLVABLE
    for published in case.entry.get("published_check", ())
]


@pytest.mark.parametrize("case, n, energy", PUBLISHED)
def test_published_values(case, n, energy, solved):
    """Literature values hold to their last digit, some of which were truncated, not rounded.

    Sources are in tests/reference/levels.json, most of them from memory. Two have more digits
    than a double: the bracket must then reach to within a unit of the last one.
    """
    value = Decimal(energy)
    unit = 10.0 ** value.as_tuple().exponent
    low, high = solved(case).bracket[n]
    assert difference(low, value) <= unit
    assert difference(high, value) >= -unit
    if unit > 1e-12:
        assert abs(difference(solved(case).energy[n], value)) <= unit


SPLITTINGS = [
    pytest.param(case, *doublet["pair"], Decimal(doublet["splitting"]), id=f"{case.id}-{i}")
    for case in SOLVABLE
    for i, doublet in enumerate(case.entry.get("splittings", ()))
]


@pytest.mark.parametrize("case, lower, upper, splitting", SPLITTINGS)
def test_reference_splittings(case, lower, upper, splitting, solved):
    """A doublet is two levels, apart by its splitting to what two energies can tell.

    A program that finds the second state by sign changes on a grid of energies would lose it.
    """
    levels = solved(case)
    low = levels.bracket[upper, 0] - levels.bracket[lower, 1]
    high = levels.bracket[upper, 1] - levels.bracket[lower, 0]
    assert low <= float(splitting) <= high
    # Two energies, each to a rounding or two of the depth.
    depth = levels.profile.open_edge - levels.profile.V_min
    found = levels.energy[upper] - levels.energy[lower]
    assert abs(difference(found, splitting)) <= 4 * EPS * depth


# --- hard problems, judged in 50 digits -------------------------------------------------------


@pytest.mark.parametrize("case", SOLVABLE[25:], ids=lambda case: case.id)
def test_the_judge_agrees_with_the_reference(case):
    """The judge counts n and n + 1 levels within 1e-24 on both sides of reference level n.

    Only then may it judge. Jumps, linear and quadratic V and linear mass are among these cases.
    """
    profile = case.profile()
    for n, energy in zip(case.n[:3], case.energy, strict=False):
        with mpmath.workdps(50):
            energy = mpmath.mpf(str(energy))
            away = abs(energy) * mpmath.mpf(10) ** -24
            assert count_below(profile, energy - away) == n
            assert count_below(profile, energy + away) == n + 1


@pytest.mark.parametrize("problem", HARD, ids=lambda problem: problem.name)
def test_hard_problem(problem):
    """None missed, none invented, and every bracket holds its level, says 50-digit arithmetic.

    The judge counts at both ends of every bracket and at the open edge. That this is no matter of
    luck is why each problem is here for a reason of its own.
    """
    profile = problem.make()
    levels = solve(profile, count=problem.count)
    np.testing.assert_array_equal(levels.n, np.arange(len(levels)))
    if problem.bound is not None:
        assert len(levels) == problem.bound
    if problem.count is None:
        assert len(levels) == count_below(profile, profile.open_edge)
    else:
        assert len(levels) == problem.count
    for n, energy, (low, high) in zip(levels.n, levels.energy, levels.bracket, strict=True):
        assert low <= energy <= high
        assert count_below(profile, low) <= n < count_below(profile, high)
    # Narrow as well: a few roundings of the height, or of the offset where that is larger.
    half = 0.5 * np.diff(levels.bracket, axis=1)[:, 0]
    height = levels.energy - profile.V_min
    assert (half <= 32 * EPS * height + 8 * np.spacing(np.abs(levels.energy))).all()


def test_hard_problems_have_names_of_their_own():
    """A name used twice would hide one of the two in a list of failures."""
    assert len({problem.name for problem in HARD}) == len(HARD)
    assert all(problem.why for problem in HARD)


def test_an_interruption_is_a_keyboard_interrupt(monkeypatch):
    """Compiled code returns from one with a SystemError, which `except Exception` would swallow."""

    def interrupted(*_):
        raise SystemError("returned a result with an exception set") from KeyboardInterrupt()

    monkeypatch.setattr(shooting._search, "found", interrupted)
    with pytest.raises(KeyboardInterrupt):
        solve(Profile.from_layers([10.0], [0.0], left="wall", right="wall"), count=2)


def test_other_faults_of_compiled_code_stay_what_they_are(monkeypatch):
    """Only an interruption is unwrapped."""

    def broken(*_):
        raise SystemError("something else")

    monkeypatch.setattr(shooting._search, "found", broken)
    with pytest.raises(SystemError, match="something else"):
        solve(Profile.from_layers([10.0], [0.0], left="wall", right="wall"), count=2)
