"""Functions cut into polynomial cells: as close as promised, and refused where they cannot be."""

import numpy as np
import pytest
from numpy.polynomial import polynomial

from eigen1d import _functions

EPS = np.finfo(float).eps
T = np.linspace(0.0, 1.0, 21)


def table(coefficients, t=T):
    """Values of each cell at all t: shape (cells, t.size)."""
    return polynomial.polyval(t, np.asarray(coefficients, dtype=float).T)


def deviation(function, x, cells, points=41):
    """Largest error of the cells, relative to each cell's own height above the least value.

    What the function itself rounds is no error of the cells: its value, and its x.
    """
    t = np.linspace(0.001, 0.999, points)
    at = x[:-1, None] + t * np.diff(x)[:, None]
    exact = function(at)
    slope = np.ptp(exact, axis=1) / np.diff(x)
    rounding = 8 * EPS * (np.abs(exact).max(axis=1) + slope * np.abs(at).max(axis=1))
    error = np.abs(table(cells, t) - exact).max(axis=1)
    return (np.maximum(error - rounding, 0) / (exact.max(axis=1) - exact.min())).max()


FUNCTIONS = {
    "parabola": (lambda x: 0.5 * x**2, (-12.0, 12.0)),
    "off-centre": (lambda x: 0.5 * (x - 0.3) ** 2, (-9.0, 11.0)),
    "sextic wall": (lambda x: x**6 - 3 * x**2, (-4.0, 4.0)),
    "sech": (lambda x: -6 / np.cosh(x) ** 2, (-20.0, 20.0)),
    "morse": (lambda x: (1 - np.exp(-x)) ** 2, (-1.5, 25.0)),
    "lattice": (lambda x: np.cos(x), (0.0, 60.0)),
    "narrow": (lambda x: -np.exp(-(((x - 3.1) / 1e-3) ** 2)), (3.09, 3.11)),
}


@pytest.mark.parametrize("name", FUNCTIONS)
def test_functions_are_followed_to_the_tolerance(name):
    """The promise of from_function, cell by cell: that is what bounds every level's own error."""
    function, span = FUNCTIONS[name]
    x, (V, mass) = _functions.cells(function, lambda x: 1.0, np.array(span), 1e-13)
    assert deviation(function, x, V) <= 1e-13
    assert (x[0], x[-1]) == span and (np.diff(x) > 0).all()
    assert V.shape[1] <= _functions.DEGREE + 1
    assert mass.tolist() == [[1.0]] * (x.size - 1)


def test_powers_of_chebyshev_polynomials_are_exact():
    """The conversion must not cost the digits that the interpolation won: it begins exact.

    T_j(2 t - 1) = 2 (2 t - 1) T_(j-1) - T_(j-2), here from Python's whole numbers.
    """
    one, two = [-1, 2], [1]
    for row in _functions._TO_POWER[2:]:
        raised = [4 * a - 2 * b for a, b in zip([0, *one], [*one, 0], strict=True)]
        one, two = [a - b for a, b in zip(raised, [*two, 0, 0], strict=True)], one
        assert row[: len(one)].tolist() == one and not row[len(one) :].any()


def test_a_looser_tolerance_takes_fewer_cells():
    """The tolerance is the user's dial, so it must turn something, and be kept."""
    function, span = FUNCTIONS["morse"]
    sizes = []
    for tolerance in (1e-13, 1e-9, 1e-5):
        x, (V, _) = _functions.cells(function, lambda x: 1.0, np.array(span), tolerance)
        assert deviation(function, x, V) <= tolerance
        sizes.append(x.size)
    assert sizes[0] > sizes[1] > sizes[2]


def test_the_height_of_a_wall_is_no_excuse_at_the_bottom_of_the_well():
    """V = x^12 is 10^9 at x = 6 and its lowest levels lie near 1: the cells there must know it.

    One polynomial follows V over the whole span to 1e-13 of 10^9; it would be wrong by 1e-4 where
    the ground state lives.
    """
    x, (V, _) = _functions.cells(lambda x: x**12, lambda x: 1.0, np.array([-6.0, 6.0]), 1e-13)
    assert deviation(lambda x: x**12, x, V) <= 1e-13
    near = (x[:-1] < 1) & (x[1:] > -1)
    assert np.diff(x)[near].max() < 3


def test_a_polynomial_keeps_its_degree():
    """Trailing coefficients of rounding size are dropped: a parabola costs what parabolas cost."""
    _, (V, mass) = _functions.cells(
        lambda x: 3 - x + 2 * x**2, lambda x: 1 + x / 10, np.array([0.0, 1.0]), 1e-13
    )
    assert V.shape[1] == 3 and mass.shape[1] == 2
    np.testing.assert_allclose(V[0], [3, -1, 2], atol=1e-14)


def test_the_mass_has_its_own_tolerance():
    """A mass that varies where V is flat must still cut cells."""
    mass = lambda x: 1 + 0.5 * np.tanh(20 * x)  # noqa: E731
    x, (_, cells) = _functions.cells(lambda x: 0.0, mass, np.array([-1.0, 1.0]), 1e-13)
    at = x[:-1, None] + T * np.diff(x)[:, None]
    np.testing.assert_allclose(table(cells), mass(at), rtol=1e-13)
    assert x.size > 4


def test_breaks_are_approached_from_both_sides():
    """At a jump each side has its own value; a function asked at the break itself has one only."""
    asked = []

    def step(x):
        asked.append(np.array(x))
        return np.where(x < 1.0, 2.0, 5.0)

    breaks = np.array([0.0, 1.0, 3.0])
    x, (V, _) = _functions.cells(step, lambda x: 1.0, breaks, 1e-13)
    assert x.tolist() == [0.0, 1.0, 3.0]
    assert V.tolist() == [[2.0], [5.0]]
    asked = np.concatenate([a.ravel() for a in asked])
    assert not (asked == 1.0).any()
    assert np.abs(asked - 1.0).min() <= EPS  # but as close as doubles go
    assert {0.0, 3.0} <= set(asked)  # the span's own ends are asked


@pytest.mark.parametrize("place", [0.0, 0.3, -1.7, 1000.3])
@pytest.mark.parametrize(
    "rough", [np.abs, np.sign, lambda d: np.sqrt(np.abs(d))], ids=["kink", "jump", "root"]
)
def test_a_rough_place_is_named_in_bounded_work(rough, place):
    """Halving towards a kink never ends by itself, and away from x = 0 it spreads: where V is tiny
    next to x, the rounding of x alone fails all cells near, twice as many in each round.
    """
    asked = 0

    def V(x):
        nonlocal asked
        asked += x.size
        return rough(x - place)

    ends = place + np.array([-1.1, 1.4])
    with pytest.raises(
        _functions.TooRough, match=f"near x = {place:g}; .* breaks=\\[{place:g}\\]$"
    ):
        _functions.cells(V, lambda x: 1.0, ends, 1e-13)
    assert asked < 10**5
    if rough in (np.abs, np.sign):  # and the advice works
        x, _ = _functions.cells(V, lambda x: 1.0, np.insert(ends, 1, place), 1e-13)
        assert place in x


def test_noise_is_refused_in_bounded_memory(monkeypatch):
    """Measured values wrapped in a function are rough everywhere; memory must not decide."""
    monkeypatch.setattr(_functions, "_MOST_CELLS", 1000)
    noise = np.random.default_rng(10)
    span = np.array([2.0, 3.0])
    with pytest.raises(
        _functions.TooRough, match="asks for more than 1000 cells, at x = 2 and elsewh"
    ):
        _functions.cells(lambda x: noise.random(x.shape), lambda x: 1.0, span, 1e-13)


def test_a_condition_is_a_function_too():
    """x > 1 is 0 or 1 to who writes it; numpy would refuse to subtract such values."""
    x, (V, _) = _functions.cells(lambda x: x > 1, 1.0, np.array([0.0, 1.0, 3.0]), 1e-13)
    assert V.tolist() == [[0.0], [1.0]]


def test_halves_that_have_no_length_do_no_harm():
    """Near x = 1e15 doubles are 0.125 apart: a sixteenth of this span has no length left."""
    span = 1e15 + np.array([0.0, 1.0])
    x, (V, _) = _functions.cells(lambda x: 3 * (x - 1e15), 1.0, span, 1e-13)
    assert x.tolist() == span.tolist()
    np.testing.assert_allclose(table(V), 3 * T[None], atol=0.5)  # x itself is off by up to 1/16


def test_a_smooth_function_is_asked_once():
    """All that a few cells need is sampled in one call: a call costs more than its positions."""
    calls = []

    def V(x):
        calls.append(x.shape)
        return x**4

    _functions.cells(V, 1.0, np.array([-5.0, 5.0]), 1e-13)
    assert len(calls) == 1 and len(calls[0]) == 1
