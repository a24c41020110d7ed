"""The compiled search: angles, isolation, root finding, and how many sweeps they may take."""

import mpmath
import numpy as np
import pytest
from hard_problems import HARD
from interpreted import interpreted
from problems import SOLVABLE

from eigen1d import _search, shooting, solve

NAMED = {problem.name: problem for problem in HARD}


@pytest.fixture(scope="module", params=["rough", "quartic-double", "alpha", "mass-100"])
def search(request):
    """A prepared search of a hard problem."""
    return shooting.Search(NAMED[request.param].make())


def angles(search, energies, stop, sigma, run=_search.angles):
    """The sum of both Pruefer angles, in pi: n + 1 at level n."""
    energies = np.array(energies, dtype=float)
    turn, angle = np.empty(energies.size, np.int64), np.empty(energies.size)
    stop, sigma = np.full(energies.size, stop), np.full(energies.size, sigma)
    run(search.cells, search.left, search.right, energies, stop, sigma, turn, angle)
    assert (np.abs(angle) <= np.pi / 2).all()
    return turn + angle / np.pi


def grid(search, count=70):
    """Energies over all of the well: more than four times the lanes, and no multiple of them."""
    top = search.edge if np.isfinite(search.edge) else search.floor + 60
    return np.linspace(search.floor, top, count + 2)[1:-1]


# --- angles -----------------------------------------------------------------------------------


def test_the_angle_grows_with_energy(search):
    """D(E) rises steadily, which is why one sign says on which side of a level an energy lies."""
    assert (np.diff(angles(search, grid(search), search.home, 1.7)) > 0).all()


def test_where_the_solutions_meet_does_not_change_the_count(search):
    """floor(D / pi) is the number of levels below E, at every node and for every scale sigma."""
    energies = grid(search)
    expected = np.floor(angles(search, energies, search.home, 1.0))
    nodes = search.x.size
    for stop in {0, 1, nodes // 3, nodes // 2, nodes - 2, nodes - 1}:
        for sigma in (1e-3, 1.0, 300.0):
            found = np.floor(angles(search, energies, stop, sigma))
            np.testing.assert_array_equal(found, expected, err_msg=f"node {stop}, sigma {sigma}")


def test_the_angle_passes_n_plus_one_at_level_n(search):
    """(n + 1) pi lies between the angles at the two ends of the bracket of level n."""
    levels = solve(search.profile, count=4)
    for n, (low, high) in zip(levels.n, levels.bracket, strict=True):
        below, above = angles(search, [low, high], search.home, 1.0)
        assert below <= n + 1 <= above


# --- compiled and interpreted -----------------------------------------------------------------


def test_search_is_what_its_python_says(search, monkeypatch):
    """Isolation and refinement find the same energies run by the interpreter."""
    first = solve(search.profile, count=3)
    # Sweeps stay compiled: they are compared in test_kernels.py, and are slow in Python.
    python = interpreted(_search, sweep=_search.sweep)
    for name in ("angles", "isolate", "refine"):
        monkeypatch.setattr(shooting._search, name, python[name])
    second = solve(search.profile, count=3)
    np.testing.assert_array_equal(first.n, second.n)
    half = np.diff(first.bracket, axis=1)[:, 0]
    np.testing.assert_array_less(np.abs(first.energy - second.energy), half)


@pytest.mark.parametrize("edge", [3.0, np.inf])
def test_steps_in_the_variable_of_the_continuum(edge):
    """u = -sqrt(edge - E) keeps its digits beside the edge, where edge - u^2 has none.

    Against 50 digits, from the bottom up to 1e-14 below the edge; u = E without an edge.
    """
    python = interpreted(_search)

    def u(E):
        return mpmath.mpf(E) if np.isinf(edge) else -mpmath.sqrt(edge - mpmath.mpf(E))

    with mpmath.workdps(50):
        for one, other in [(0.5, 2.0), (2.9, 2.999), (3 - 1e-6, 3 - 1e-7), (3 - 2e-14, 3 - 1e-14)]:
            for a, b in ((one, other), (other, one)):
                for share in (0.01, 0.5, 0.9):
                    point = python["_between"](a, b, share, edge)
                    assert one < point < other or np.isinf(edge)
                    wanted = u(a) + share * (u(b) - u(a))
                    exact = wanted if np.isinf(edge) else edge - wanted**2
                    # A step below the spacing of doubles is no step: see the next test.
                    if abs(exact - a) > np.spacing(3.0):
                        assert abs(point - exact) <= 2 * np.spacing(3.0)
                middle = 0.5 * (a + b)
                ratio = python["_ratio"](middle, a, b, edge)
                exact = (u(middle) - u(a)) / (u(b) - u(a))
                # Differences of these doubles are exact; edge - E too.
                assert abs(ratio - exact) <= 1e-14


def test_a_step_never_stands_still():
    """Where a step in u rounds to an end of the bracket, E is halved instead, or none would end.

    The last doubles below an edge: a level bound by less than their spacing lies among them.
    """
    python = interpreted(_search)
    edge = 3.0
    for ulps in (2, 3, 10, 1000):
        low = edge - ulps * (edge - np.nextafter(edge, 0))
        for share in (1e-9, 0.5, 1 - 1e-9):
            assert low < python["_between"](low, edge, share, edge) < edge
            assert low < python["_between"](edge, low, share, edge) < edge


# --- isolation --------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["rough", "stack-of-20", "doublet-1e-12", "doublet-1e-112"])
def test_isolated_pieces_hold_the_levels_they_say(name):
    """Every piece holds one level, or levels that doubles cannot part; all are accounted for."""
    search = shooting.Search(NAMED[name].make())
    total = search.threshold[0]
    for first, last in ((0, total), (total // 2, total), (0, 1), (1, 2)):
        bracket, counts = np.empty((last - first, 2)), np.empty((last - first, 2), np.int64)
        start = (search.floor, search.edge, 0, total)
        _search.isolate(
            search.cells, search.left, search.right, search.home, 1.0, search.resolution,
            first, last, start, bracket, counts,
        )  # fmt: skip
        n = np.arange(first, last)
        assert (counts[:, 0] <= n).all()
        assert (counts[:, 1] > n).all()
        width = np.diff(bracket, axis=1)[:, 0]
        assert (width > 0).all()
        together = counts[:, 1] > counts[:, 0] + 1
        assert together.any() == (name == "doublet-1e-112")
        # Counted anew, at another node.
        ends = angles(search, bracket.ravel(), search.home + 1, 1.0).reshape(-1, 2)
        np.testing.assert_array_equal(np.floor(ends)[~together], counts[~together])


# --- cost -------------------------------------------------------------------------------------


@pytest.fixture
def evaluations(monkeypatch):
    """Counts evaluations of the angle (two half sweeps each) of everything solved in the test."""
    spent = []

    def counting(cells, left, right, energies, *rest):
        spent.append(energies.size)
        _search.angles(cells, left, right, energies, *rest)

    python = interpreted(_search, angles=counting, sweep=_search.sweep)
    for name in ("isolate", "refine"):
        monkeypatch.setattr(shooting._search, name, python[name])

    class Counted:
        def __getattr__(self, name):
            return counting if name == "angles" else getattr(_search, name)

    monkeypatch.setattr(shooting, "_search", Counted())
    return spent


@pytest.mark.parametrize("case", SOLVABLE, ids=lambda case: case.id)
def test_reference_levels_cost_few_evaluations(case, evaluations):
    """A level costs a dozen evaluations or so, bracket included; a lost order of the root finder
    or a search that bisects shows here, without a clock.

    Up to 16 energies are one set of lanes, so a handful of levels pays for a first cut of 16.
    """
    levels = solve(case.profile(), count=case.count)
    assert sum(evaluations) <= 64 + 16 * len(levels)


DOUBLETS = {"doublet-1e-12", "doublet-1e-40", "doublet-1e-112", "almost-doublet", "quartic-double"}


@pytest.mark.parametrize("problem", HARD, ids=lambda problem: problem.name)
def test_hard_problems_cost_a_bounded_number_of_evaluations(problem, evaluations):
    """Thresholds and rough tables cost little more. Near-degenerate doublets are parted by halving
    an interval from the depth down to rounding: 50 halvings, four at a time by 16 lanes.
    """
    assert DOUBLETS <= set(NAMED)
    levels = solve(problem.make(), count=problem.count)
    each = 64 if problem.name in DOUBLETS else 24
    assert sum(evaluations) <= 40 + each * len(levels)
