"""Profile: what a table, a sheet of layers, a spline or a function means, exactly."""

import dataclasses
import tracemalloc

import numpy as np
import pytest
from numpy.polynomial import polynomial
from scipy.interpolate import Akima1DInterpolator, CubicSpline, PchipInterpolator, PPoly

from eigen1d import Profile, Units, solve

EPS = np.finfo(float).eps
ATOMIC = Units("bohr", "hartree")

# A table with two jumps, uneven steps, and a mass and an alpha of their own.
X = np.array([0.0, 1.0, 2.5, 2.5, 3.0, 4.5, 6.0, 6.0, 7.0, 8.0])
V = np.array([0.3, 0.35, 0.3, 0.0, 0.1, -0.1, 0.05, 0.25, 0.2, 0.3])
MASS = np.array([0.1, 0.1, 0.12, 0.06, 0.07, 0.065, 0.06, 0.1, 0.11, 0.1])
ALPHA = np.array([0.0, 0.1, 0.2, 0.5, 0.6, 0.5, 0.4, 0.2, 0.1, 0.0])
STRETCHES = [slice(0, 3), slice(3, 7), slice(7, 10)]
POINTS = np.setdiff1d(np.linspace(-1.0, 9.0, 501), X)


def table(**keywords):
    return Profile.from_rows(X, V, MASS, units=ATOMIC, **keywords)


# --- rows ----------------------------------------------------------------------------------------

CURVES = {
    "linear": lambda x, y: lambda at: np.interp(at, x, y),
    "step": lambda x, y: lambda at: y[np.searchsorted(x, at, side="right") - 1],
    "smooth": lambda x, y: CubicSpline(x, y),
    "monotone": lambda x, y: PchipInterpolator(x, y),
}


@pytest.mark.parametrize("interpolation", CURVES)
def test_rows_mean_this_curve(interpolation):
    """Between jumps each stretch is a curve of its own; a spline across a jump would ring.

    Judged by scipy's interpolants. Mass and alpha follow V, but never by a spline, which could
    swing below zero.
    """
    profile = table(alpha=ALPHA, interpolation=interpolation)
    positive = "monotone" if interpolation == "smooth" else interpolation
    for stretch in STRETCHES:
        x = X[stretch]
        at = POINTS[(POINTS > x[0]) & (POINTS < x[-1])]
        for found, values, how in (
            (profile.V(at), V, interpolation),
            (profile.m(at), MASS, positive),
            (profile.alpha(at), ALPHA, positive),
        ):
            np.testing.assert_allclose(found, CURVES[how](x, values[stretch])(at), atol=2e-15)


@pytest.mark.parametrize("interpolation", CURVES)
def test_a_jump_has_a_value_on_each_side(interpolation):
    """Two rows at one x: the first ends the cells on its left, the second begins the next."""
    profile = table(interpolation=interpolation)
    just_left, just_right = np.nextafter(2.5, 0), np.nextafter(2.5, 9)
    # A step table holds the row before the jump up to it, so the value on its left is not used.
    assert profile.V(just_left) == pytest.approx(0.35 if interpolation == "step" else 0.3)
    assert profile.V(just_right) == pytest.approx(0.0, abs=1e-14)
    assert profile.V(2.5) == 0.0
    assert profile.m(just_right) == pytest.approx(0.06)


@pytest.mark.parametrize("interpolation", CURVES)
def test_jumps_at_both_ends_set_the_edges(interpolation):
    """The shortest table of a square well: each end row stands alone, outside all cells."""
    profile = Profile.from_rows([0, 0, 1, 1], [5.0, 0.0, 0.0, 4.0], interpolation=interpolation)
    # At a jump V is the value on its right, and the last one is no exception.
    assert profile.V([-1.0, 0.0, 0.5, 1.0, 1.5]).tolist() == [5.0, 0.0, 0.0, 4.0, 4.0]
    assert profile.cells == 1 and profile.open_edge == 4.0
    assert profile.rows.stretches() == [slice(1, 3)]


def test_cell_of_finds_the_cell_and_the_place_in_it():
    """At a breakpoint the cell on its right; beyond the ends, the ends."""
    profile = Profile.from_layers([1.0, 2.0], [0.0, 1.0])
    cell, t = profile.cell_of([-9.0, 0.0, 0.25, 1.0, 2.0, 3.0, 9.0])
    assert cell.tolist() == [0, 0, 0, 1, 1, 1, 1]
    assert t.tolist() == [0.0, 0.0, 0.25, 0.0, 0.5, 1.0, 1.0]


def test_open_edges_keep_the_last_values_and_walls_end_the_world():
    profile = table(alpha=ALPHA, left="wall")
    assert profile.V(-0.1) == np.inf and np.isnan(profile.m(-0.1)) and np.isnan(profile.alpha(-0.1))
    assert (profile.V(1e9), profile.m(1e9), profile.alpha(1e9)) == (0.3, 0.1, 0.0)
    assert profile.left.kind == "wall" and profile.right.kind == "open"
    assert profile.open_edge == 0.3
    walls = Profile.from_layers([1.0], [0.2], left="wall", right="wall")
    assert walls.V([0.0, 1.0]).tolist() == [0.2, 0.2]  # a wall begins beyond the last point


def test_open_edge_is_the_lower_one():
    """A level is bound below every open edge; taking the higher would list leaking states."""
    rows = [0.0, 1.0], [0.2, 0.5]
    assert Profile.from_rows(*rows).open_edge == 0.2
    assert Profile.from_rows(*rows, left="wall").open_edge == 0.5
    assert Profile.from_rows(*rows, left="wall", right="wall").open_edge == np.inf


def test_a_step_table_has_its_last_row_at_the_edge():
    """The last row of a step table holds from there on: that is the open edge."""
    profile = Profile.from_rows([0, 1, 2], [0.5, 0.0, 0.7], interpolation="step")
    assert profile.V([0.5, 1.5, 2.0, 2.5]).tolist() == [0.5, 0.0, 0.7, 0.7]
    assert profile.open_edge == 0.5


def test_values_come_in_the_shape_they_were_asked_in():
    profile = table(alpha=ALPHA)
    for ask in (profile.V, profile.m, profile.alpha, Profile.from_rows([0, 1], [0, 1]).alpha):
        assert isinstance(ask(0.5), float)
        assert ask(np.zeros((2, 3))).shape == (2, 3)
        assert ask([]).shape == (0,)


def test_the_least_V_may_lie_between_rows():
    """A spline dips below its rows, and levels lie down there: the search begins at V_min."""
    smooth = Profile.from_rows([0, 1, 2, 3], [1.0, 0.0, 0.0, 1.0], interpolation="smooth")
    # Not-a-knot through four rows is the cubic through them, here x^2/2 - 3 x/2 + 1.
    assert smooth.V_min == pytest.approx(-0.125, abs=1e-15)
    monotone = Profile.from_rows([0, 1, 2, 3], [1.0, 0.0, 0.0, 1.0], interpolation="monotone")
    assert monotone.V_min == 0.0


def test_rows_are_kept_for_what_refers_to_them():
    """slope_V and the noise speak of the rows that the user wrote, not of cells."""
    profile = table(sigma_V=0.002, title="run 14")
    assert profile.kind == "rows" and profile.row_count == 10 and profile.title == "run 14"
    assert profile.rows.x.tolist() == X.tolist() and profile.rows.V.tolist() == V.tolist()
    assert profile.rows.sigma_V.tolist() == [0.002] * 10
    assert profile.rows.stretches() == STRETCHES
    assert profile.tolerance == 0.0


def test_the_profile_owns_its_numbers():
    """A profile changed from outside would no longer be what its levels were found for."""
    x, values = np.array([0.0, 1.0]), np.array([0.0, 1.0])
    profile = Profile.from_rows(x, values)
    x[0], values[0] = -9.0, 9.0
    assert profile.V([-5.0, 0.5]).tolist() == [0.0, 0.5]
    for array in (profile.x, profile.V_cells, profile.mass_cells, profile.rows.V):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 7.0
    with pytest.raises(dataclasses.FrozenInstanceError):
        profile.title = "other"


# --- merging -------------------------------------------------------------------------------------


def test_a_thousand_rows_of_three_flat_layers_are_three_cells():
    """Cost follows structure: a finely printed growth sheet is solved like the sheet itself."""
    x = np.concatenate([np.linspace(a, a + 10, 334) for a in (0.0, 10.0, 20.0)])
    values = np.repeat([0.3, 0.0, 0.3], 334)
    profile = Profile.from_rows(x, values, 0.067)
    assert profile.cells == 3 and profile.row_count == 1002
    assert profile.x.tolist() == [0.0, 10.0, 20.0, 30.0]
    layers = Profile.from_layers([10.0] * 3, [0.3, 0.0, 0.3], 0.067)
    np.testing.assert_array_equal(solve(profile).energy, solve(layers).energy)


@pytest.mark.parametrize("rows", [101, 10001, 100001])
def test_a_finely_sampled_parabola_does_not_merge(rows):
    """From row to row it looks straight; merging by looks would flatten the well."""
    x = np.linspace(-1.0, 1.0, rows)
    profile = Profile.from_rows(x, x**2)
    assert profile.cells > 0.9 * (rows - 1)
    np.testing.assert_allclose(profile.V(x), x**2, atol=8 * EPS)


@pytest.mark.parametrize("interpolation", ["smooth", "monotone", "linear"])
def test_straight_rows_are_one_cell(interpolation):
    """A ramp of a thousand rows is one straight line under every way of joining them."""
    x = np.linspace(0.0, 10.0, 1001)
    profile = Profile.from_rows(x, 0.1 * x - 0.3, 0.067, interpolation=interpolation)
    assert profile.cells == 1
    np.testing.assert_allclose(profile.V(x), 0.1 * x - 0.3, atol=4 * EPS)


def test_a_mass_that_changes_keeps_cells_apart():
    """Merging by V alone would average a heterojunction away."""
    profile = Profile.from_layers([1.0, 1.0, 1.0], [0.0] * 3, [0.1, 0.2, 0.2])
    assert profile.x.tolist() == [0.0, 1.0, 3.0]
    assert profile.m([0.5, 1.5]).tolist() == [0.1, 0.2]
    by_alpha = Profile.from_layers([1.0, 1.0], [0.0] * 2, alpha=[0.1, 0.2])
    assert by_alpha.cells == 2


def test_one_mass_for_all_rows_takes_no_memory():
    """Ten million rows with one mass: 80 MB saved a field."""
    profile = Profile.from_rows(np.arange(10**5), np.random.default_rng(0).random(10**5), 0.067)
    assert profile.mass_cells.strides[0] == 0 and profile.natural().mass.strides[0] == 0


def test_a_mass_column_of_one_value_is_one_number():
    """Most tables repeat one mass in every row: solvers should know that it is constant."""
    x, V = np.arange(9), np.arange(9) ** 2
    for profile in (
        Profile.from_rows(x, V, np.full(9, 0.067)),
        Profile.from_layers(np.ones(9), V, np.full(9, 0.067), mass_end=0.067),
    ):
        assert profile.mass_cells.strides[0] == 0
        assert profile.mass_cells.tolist() == [[0.067]] * profile.cells


def test_a_stepped_mass_of_linear_rows_is_constant_in_each_cell():
    """Heterostructures written as rows: no cell pays for a slope of the mass that is zero."""
    profile = Profile.from_rows(X, V, np.repeat([0.1, 0.06, 0.1], [3, 4, 3]))
    assert profile.V_cells.shape[1] == 2
    assert profile.mass_cells.tolist() == [[0.1]] * 2 + [[0.06]] * 3 + [[0.1]] * 2


@pytest.mark.parametrize(
    ("mass", "interpolation", "held"),
    [(False, "linear", 3), (True, "linear", 5), (True, "step", 3)],
)
def test_long_tables_take_little_memory(mass, interpolation, held):
    """In arrays of the table's length, beyond the table: x, V, and for straight lines each rise.

    While it is made a copy of the mass may stand beside its cells, and blocks of temporary arrays.
    """
    rows = 10**6
    x = np.linspace(0.0, 100.0, rows)
    values = np.sin(x), 0.1 + 0.01 * np.cos(x) if mass else 0.1
    Profile.from_rows(x[:9], x[:9])  # so that all modules are imported
    tracemalloc.start()
    profile = Profile.from_rows(x, *values, interpolation=interpolation)
    size, peak = np.array(tracemalloc.get_traced_memory()) / x.nbytes
    tracemalloc.stop()
    assert profile.cells == rows - 1
    assert size < held + 0.1
    assert peak < held + 1.4


def test_solvers_see_views():
    """What solvers do not ask for is not computed, nor are the arrays of a long table copied."""
    profile = Profile.from_rows(X, V, MASS)
    natural = profile.natural()
    assert np.shares_memory(natural.V, profile.V_cells)
    assert not np.shares_memory(natural.V, profile.rows.V)  # jumps: cells of their own
    assert natural.x is profile.x and natural.mass_cells is profile.mass_cells
    smooth = Profile.from_rows(np.arange(9), np.arange(9) ** 2)
    assert np.shares_memory(smooth.V_cells, smooth.rows.V) and smooth.rows.x is smooth.x


# --- layers --------------------------------------------------------------------------------------


def test_layers_are_constant_or_graded():
    """A graded layer runs straight from V to V_end, and so does its mass."""
    profile = Profile.from_layers(
        [2.0, 3.0, 1.0], [0.3, 0.0, 0.3], [0.1, 0.06, 0.1],
        V_end=[0.3, 0.15, 0.2], mass_end=[0.1, 0.09, 0.1], start=-1.0, alpha=[0.0, 0.5, 0.1],
    )  # fmt: skip
    assert profile.x.tolist() == [-1.0, 1.0, 4.0, 5.0]
    at = np.array([-0.5, 1.0, 2.5, 3.7, 4.5, 9.0])
    s = (at - 1.0) / 3.0
    inside = (at >= 1) & (at < 4)
    expected = np.where(inside, 0.15 * s, [0.3, 0, 0, 0, 0.25, 0.2])
    np.testing.assert_allclose(profile.V(at), expected, atol=1e-16)
    expected = np.where(inside, 0.06 + 0.03 * s, 0.1)
    np.testing.assert_allclose(profile.m(at), expected, atol=1e-16)
    assert profile.alpha(at).tolist() == [0.0, 0.5, 0.5, 0.5, 0.1, 0.1]
    assert (profile.kind, profile.row_count, profile.rows) == ("layers", 3, None)
    assert (profile.left.V, profile.right.V) == (0.3, 0.2)


def test_linear_mass_is_exact():
    """The mass of a graded alloy is straight between its ends, at every point to rounding."""
    rows = Profile.from_rows([0, 4], [0, 0], [0.06, 0.10])
    layers = Profile.from_layers([4.0], [0.0], 0.06, mass_end=0.10)
    at = np.linspace(0, 4, 41)
    for profile in (rows, layers):
        assert profile.cells == 1
        np.testing.assert_allclose(profile.m(at), 0.06 + 0.01 * at, rtol=4 * EPS)


# --- piecewise polynomials -----------------------------------------------------------------------


@pytest.mark.parametrize(
    "curve", [CubicSpline, PchipInterpolator, Akima1DInterpolator], ids=lambda c: c.__name__
)
def test_splines_of_scipy_are_taken_as_they_are(curve):
    """No resampling: every piece of the user's own spline is met to rounding."""
    x = np.array([-1.0, 0.0, 0.3, 2.0, 2.2, 4.0])
    spline = curve(x, np.array([1.0, -0.5, 0.3, 0.0, 0.7, 1.1]))
    profile = Profile.from_ppoly(spline, 0.5, units=ATOMIC, left="wall")
    at = np.linspace(-1, 3.999, 200)
    np.testing.assert_allclose(profile.V(at), spline(at), atol=1e-14)
    # Not-a-knot: the first two pieces of a CubicSpline are one cubic, and so are the last two.
    assert profile.cells == (3 if curve is CubicSpline else 5)
    assert (profile.kind, profile.row_count) == ("polynomial", 5)
    assert (profile.left.kind, profile.right.V) == ("wall", pytest.approx(1.1))


def test_mass_as_a_ppoly_with_breakpoints_of_its_own():
    """Both are cut at all breakpoints, and neither changes by it."""
    V = PPoly(np.array([[1.0, -2.0], [0.0, 1.0], [0.5, 0.2]]), [0.0, 1.0, 3.0])
    mass = PPoly(np.array([[0.1, 0.0, 0.2], [0.3, 0.2, 0.25]]), [-1.0, 0.4, 1.7, 5.0])
    profile = Profile.from_ppoly(V, mass)
    assert profile.x.tolist() == [0.0, 0.4, 1.0, 1.7, 3.0]
    at = np.linspace(0.001, 2.999, 300)
    np.testing.assert_allclose(profile.V(at), V(at), atol=1e-14)
    np.testing.assert_allclose(profile.m(at), mass(at), atol=1e-14)
    assert profile.right.mass == pytest.approx(float(mass(3.0)))
    assert profile.row_count == 2


def test_a_mass_of_one_piece_beyond_both_ends_adds_no_breakpoint():
    V = PPoly(np.array([[1.0, 2.0]]), [0.0, 1.0, 3.0])
    profile = Profile.from_ppoly(V, PPoly(np.array([[0.1], [0.5]]), [-1.0, 4.0]))
    assert profile.x.tolist() == [0.0, 1.0, 3.0]
    assert profile.m([0.0, 3.0]) == pytest.approx([0.6, 0.9], rel=1e-15)


def test_degrees_of_V_and_mass_need_not_agree():
    V = PPoly(np.ones((8, 1)), [0.0, 1.0])
    profile = Profile.from_ppoly(V, PPoly(np.array([[0.5]]), [0.0, 1.0]))
    assert profile.V(0.5) == pytest.approx(sum(0.5**k for k in range(8)), rel=2 * EPS)
    assert profile.m(0.7) == 0.5


# --- functions -----------------------------------------------------------------------------------


def test_a_function_is_followed_and_its_tolerance_kept():
    """The tolerance travels with the profile: the solver's brackets account for it."""
    for tolerance in (1e-13, 1e-6):
        profile = Profile.from_function(
            lambda x: 1 - np.exp(-((x - 0.2) ** 2)), (-4, 5), tolerance=tolerance, units=ATOMIC
        )
        at = np.linspace(-4, 5, 1001)
        exact = 1 - np.exp(-((at - 0.2) ** 2))
        error = np.abs(profile.V(at) - exact).max()
        assert error <= tolerance and (tolerance == 1e-13 or error > 1e-12)
        assert (profile.kind, profile.row_count, profile.tolerance) == ("function", 0, tolerance)
    assert Profile.from_function(np.cos, (0, 1)).tolerance == 1e-13


def test_breaks_hold_jumps_and_kinks():
    """The square well and the triangular well as functions, exact because of their breaks."""
    square = Profile.from_function(
        lambda x: np.where(np.abs(x) < 1.5, 0.0, 4.0), (-3, 3), breaks=[1.5, -1.5], units=ATOMIC
    )
    assert square.V([-2.0, -1.4, 0.0, 1.4999, 1.5001]).tolist() == [4.0, 0.0, 0.0, 0.0, 4.0]
    layers = Profile.from_layers([1.5, 3, 1.5], [4.0, 0.0, 4.0], start=-3, units=ATOMIC)
    np.testing.assert_allclose(solve(square).energy, solve(layers).energy, rtol=1e-14)
    triangle = Profile.from_function(lambda x: np.abs(x - 0.3), (-9, 9), breaks=[0.3], units=ATOMIC)
    assert triangle.V(np.array([0.0, 0.3, 1.3])) == pytest.approx([0.3, 0.0, 1.0], abs=1e-15)


def test_a_mass_function_may_jump_at_breaks():
    profile = Profile.from_function(
        lambda x: 0.0, (0, 2), lambda x: np.where(x < 1, 0.1, 0.2), breaks=[1.0]
    )
    assert profile.m([0.5, 0.999, 1.0, 1.5]).tolist() == [0.1, 0.1, 0.2, 0.2]


def test_cells_of_a_function_stay_cut():
    """One parabola over the whole span rounds by its walls where the ground state lives."""
    trap = Profile.from_function(lambda x: x**2 / 2, (-100, 100), units=ATOMIC)
    assert trap.cells > 1
    middle = trap.x[np.searchsorted(trap.x, 0.0)] - trap.x[np.searchsorted(trap.x, 0.0) - 1]
    assert middle < 20
    # From 5000 at the ends, eps is 1e-12; the levels n + 1/2 must not show it.
    assert solve(trap, count=3).energy == pytest.approx([0.5, 1.5, 2.5], rel=1e-13)


# --- what solvers see ----------------------------------------------------------------------------


def test_natural_scales_the_mass_and_nothing_else():
    """Lengths and energies stay in the user's units: no energy is rounded on the way in or out."""
    profile = Profile.from_layers([10.0, 5.0], [0.0, 0.3], [0.067, 0.09])
    natural, unit = profile.natural(), Units("nm", "eV").electron_mass
    assert natural.width.tolist() == [10.0, 5.0]
    assert natural.V.tolist() == profile.V_cells.tolist()
    assert natural.mass.tolist() == [[0.067 * unit], [0.09 * unit]]
    assert (natural.left.V, natural.left.mass) == (0.0, 0.067 * unit)
    assert (natural.right.V, natural.right.mass) == (0.3, 0.09 * unit)
    assert natural.mass_per_energy.shape == (2, 0)


def test_natural_mass_with_alpha():
    """m (1 + alpha (E - V)) as a polynomial plus E times another, at points and energies."""
    profile = table(alpha=ALPHA, interpolation="smooth")
    natural, t = profile.natural(), np.linspace(0.01, 0.99, 9)
    at = profile.x[:-1, None] + t * natural.width[:, None]
    mass, alpha, V_at = profile.m(at), profile.alpha(at), profile.V(at)
    for energy in (-0.1, 0.0, 0.27):
        found = polynomial.polyval(t, natural.mass.T) + energy * polynomial.polyval(
            t, natural.mass_per_energy.T
        )
        np.testing.assert_allclose(found, mass * (1 + alpha * (energy - V_at)), rtol=1e-13)


# --- changes -------------------------------------------------------------------------------------

PROFILES = {
    "linear": table(alpha=ALPHA, sigma_V=0.1),
    "step": table(interpolation="step", left="wall"),
    "smooth": table(interpolation="smooth", right="wall"),
    "monotone": table(alpha=0.2, interpolation="monotone", sigma_V=np.arange(10.0)),
    "layers": Profile.from_layers([1.0, 2.0], [0.1, 0.3], 0.2, V_end=[0.2, 0.3], start=0.5),
    "ppoly": Profile.from_ppoly(CubicSpline([0, 1, 2, 5], [1.0, 0.0, 2.0, 1.0]), 0.3),
    "function": Profile.from_function(np.cos, (0.3, 7), lambda x: 1 + x**2),
}
CHANGES = {
    "tilted": (
        lambda p: p.tilted(0.37),
        lambda p, x: p.V(x) + 0.37 * np.clip(x, p.x[0], p.x[-1]),
        lambda x: x,
    ),
    "stretched": (lambda p: p.stretched(1.7), lambda p, x: p.V(x / 1.7), lambda x: x / 1.7),
    "scaled": (lambda p: p.scaled(2.5), lambda p, x: 2.5 * p.V(x), lambda x: x),
    "shifted": (lambda p: p.shifted(-0.8), lambda p, x: p.V(x) - 0.8, lambda x: x),
    "mirrored": (lambda p: p.mirrored(), lambda p, x: p.V(-x), lambda x: -x),
}


@pytest.mark.parametrize("change", CHANGES)
@pytest.mark.parametrize("name", PROFILES)
def test_changes_are_exact(name, change):
    """A changed profile is the changed function, edges and mass included, not a resampling."""
    profile = PROFILES[name]
    make, V_at, mass_at = CHANGES[change]
    changed = make(profile)
    # Points away from jumps, where left and right differ.
    x = np.linspace(-12.0, 16.0, 3001)
    jumps = np.concatenate([profile.x, profile.x * 1.7, -profile.x])
    x = x[np.abs(x[:, None] - jumps).min(axis=1) > 1e-9]
    np.testing.assert_allclose(changed.V(x), V_at(profile, x), atol=2e-14, rtol=1e-14)
    np.testing.assert_allclose(changed.m(x), profile.m(mass_at(x)), rtol=1e-13)
    np.testing.assert_allclose(changed.alpha(x), profile.alpha(mass_at(x)), atol=1e-14)
    for side in ("left", "right"):
        now = getattr(changed, side)
        before = getattr(
            profile, side if change != "mirrored" else {"left": "right", "right": "left"}[side]
        )
        assert (now.kind, now.mass, now.alpha) == (before.kind, before.mass, before.alpha)
    assert changed.units == profile.units and changed.tolerance == profile.tolerance


@pytest.mark.parametrize("change", CHANGES)
@pytest.mark.parametrize("name", ["linear", "step", "smooth", "monotone"])
def test_rows_change_with_the_profile_or_are_given_up(name, change):
    """Rows that no longer give the cells would give wrong slopes; None says so, and where.

    A tilt is no longer a step or shape-preserving curve of its rows; the mirror image of a step
    holds since the row before. All others stay tables, and the table says the same as the cells.
    """
    changed = CHANGES[change][0](PROFILES[name])
    lost = {("step", "tilted"), ("monotone", "tilted"), ("step", "mirrored")}
    if (name, change) in lost:
        assert changed.rows is None
        return
    rows = changed.rows
    again = Profile.from_rows(rows.x, rows.V, 1.0, interpolation=rows.interpolation)
    at = np.setdiff1d(np.linspace(changed.x[0], changed.x[-1], 400)[1:-1], changed.x)
    np.testing.assert_allclose(again.V(at), changed.V(at), atol=1e-14)
    sigma = PROFILES[name].rows.sigma_V
    if sigma is None:
        assert rows.sigma_V is None
    else:
        expected = {"scaled": 2.5 * sigma, "mirrored": sigma[::-1]}.get(change, sigma)
        assert rows.sigma_V.tolist() == expected.tolist()


def test_a_negative_scale_turns_hills_into_wells():
    """sigma_V stays positive, and the least V is the highest before."""
    turned = table(sigma_V=0.1).scaled(-1.0)
    assert turned.V_min == -0.35 and turned.rows.sigma_V.tolist() == [0.1] * 10
    assert turned.open_edge == -0.3


def test_changes_leave_the_profile_alone():
    """Profiles are shared between sweeps; a change in place would change them all."""
    profile = table(alpha=ALPHA)
    before = [a.copy() for a in (profile.x, profile.V_cells, profile.mass_cells, profile.rows.V)]
    for make, _, _ in CHANGES.values():
        make(profile)
    now = (profile.x, profile.V_cells, profile.mass_cells, profile.rows.V)
    for a, b in zip(before, now, strict=True):
        np.testing.assert_array_equal(a, b)


def test_source_is_added_to_nothing_else():
    profile = table(title="t")
    read = profile.with_source("well.csv", "ab12")
    assert (read.source, read.sha256, read.title) == ("well.csv", "ab12", "t")
    assert read.V_cells is profile.V_cells and profile.source == ""
