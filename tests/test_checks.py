"""What a profile refuses, and the whole text of every refusal."""

import numpy as np
import pytest
from scipy.interpolate import BPoly, PPoly

from eigen1d import InputError, Profile

from_rows, from_layers = Profile.from_rows, Profile.from_layers
from_ppoly, from_function = Profile.from_ppoly, Profile.from_function
LINE = PPoly(np.array([[1.0, 1.0], [0.0, 0.0]]), [0.0, 1.0, 2.0])
WALL = from_rows([0, 1], [0, 1])
NODES = "Levels are counted by nodes, which needs a mass that does not fall with energy"
UNITS = 'units must be Units("nm", "eV") or the like; found '


@pytest.mark.parametrize(
    ("call", "message"),
    [
        # rows
        (lambda: from_rows([0, 1, 2], [0, 1]),
         "x and V need two or more rows, equally many; found 3, 2"),
        (lambda: from_rows([0], [0]), "x and V need two or more rows, equally many; found 1, 1"),
        (lambda: from_rows("ab", [0, 1]), "x must be numbers; found 'ab'"),
        (lambda: from_rows([0, 1], [0, 1j]), "V must be numbers; found [0, 1j]"),
        (lambda: from_rows([[0, 1]], [0, 1]), "x must be one row of numbers; found shape (1, 2)"),
        (lambda: from_rows([0, 1], [0, np.nan]), "V must be finite; row 1 has nan"),
        (lambda: from_rows([0, 2, 1], [0, 0, 0]), "x must ascend; row 2 has 1 after 2"),
        (lambda: from_rows([0, 1, 1, 1], [0] * 4),
         "three rows at x = 1; a jump is two rows at one x: the value on its left, then the value "
         "on its right"),
        (lambda: from_rows([1, 1], [0, 1]), "x must cover a length; all rows are at one place"),
        (lambda: from_rows([0, 1], [0, 1], interpolation="cubic"),
         "unknown interpolation 'cubic'; write one of: linear, step, smooth, monotone"),
        (lambda: from_rows([0, 1], [0, 1], left="closed"),
         "unknown left edge 'closed'; write one of: open, wall"),
        (lambda: from_rows([0, 1], [0, 1], right=None),
         "unknown right edge None; write one of: open, wall"),
        (lambda: from_rows([0, 1], [0, 1], [1, 2, 3]),
         "mass must be one number or 2 of them; found 3"),
        (lambda: from_rows([0, 1], [0, 1], [1, 0]), "mass must be positive; row 1 has 0"),
        (lambda: from_rows([0, 1], [0, 1], alpha=[0, -0.5]),
         f"alpha must not be negative; row 1 has -0.5. {NODES}"),
        (lambda: from_rows([0, 1], [0, 1], alpha=[0] * 3),
         "alpha must be one number or 2 of them; found 3"),
        (lambda: from_rows([0, 1], [0, 1], sigma_V=[0.1, -0.1]),
         "sigma_V must not be negative; row 1 is"),
        (lambda: from_rows([0, 1], [0, 1], units="nm"), UNITS + "'nm'"),
        # layers
        (lambda: from_layers([], []), "thickness and V must be equally long; found 0 and 0"),
        (lambda: from_layers([1, 2], [0]), "thickness and V must be equally long; found 2 and 1"),
        (lambda: from_layers([1, -2], [0, 0]), "thickness must be positive; layer 1 has -2"),
        (lambda: from_layers([1, 1e-20], [0, 0]),
         "layer 1 is too thin for its position to be told apart from the next"),
        (lambda: from_layers([1], [0], V_end=[1, 2]),
         "V_end must be one number or 1 of them; found 2"),
        (lambda: from_layers([1], [0], mass_end=[1, 2]),
         "mass_end must be one number or 1 of them; found 2"),
        (lambda: from_layers([1], [0], mass_end=-1), "mass must be positive; row 0 has -1"),
        (lambda: from_layers([1], [0], alpha=-1.0),
         f"alpha must not be negative; row 0 has -1. {NODES}"),
        (lambda: from_layers([1], [0], start="left"), "start must be a number; found 'left'"),
        (lambda: from_layers([1], [0], start=[1, 2]), "start must be one number; found [1, 2]"),
        (lambda: from_layers([1], [0], start=np.inf), "start must be finite; found inf"),
        # piecewise polynomials
        (lambda: from_ppoly(np.cos),
         "V must be a scipy.interpolate.PPoly, such as a CubicSpline; found ufunc"),
        (lambda: from_ppoly(BPoly([[1.0], [2.0]], [0, 1])),
         "V must be a scipy.interpolate.PPoly, such as a CubicSpline; found BPoly"),
        (lambda: from_ppoly(PPoly(np.ones((2, 1, 3)), [0, 1])),
         "V must be one real function; its coefficients are float64 of shape (2, 1, 3)"),
        (lambda: from_ppoly(PPoly(np.ones((2, 1)) * 1j, [0, 1])),
         "V must be one real function; its coefficients are complex128 of shape (2, 1)"),
        (lambda: from_ppoly(PPoly(np.ones((2, 1)), [1, 0])),
         "breakpoints of V must ascend; found 1 to 0"),
        (lambda: from_ppoly(PPoly(np.array([[np.nan]]), [0, 1])), "V and mass must be finite"),
        (lambda: from_ppoly(LINE, PPoly(np.ones((1, 1)), [0, 1])),
         "mass covers 0 to 1, V covers 0 to 2; give a mass for the whole span of V"),
        (lambda: from_ppoly(LINE, PPoly(np.ones((1, 2)), [0.5, 1, 3])),
         "mass covers 0.5 to 3, V covers 0 to 2; give a mass for the whole span of V"),
        (lambda: from_ppoly(LINE, PPoly(np.ones((1, 2)), [-1, 1, 1.5])),
         "mass covers -1 to 1.5, V covers 0 to 2; give a mass for the whole span of V"),
        (lambda: from_ppoly(LINE, PPoly(np.ones((1, 1)), [2, 0])),
         "breakpoints of mass must ascend; found 2 to 0"),
        (lambda: from_ppoly(LINE, PPoly(np.array([[-1.0], [1.0]]), [0, 2])),
         "mass must be positive everywhere"),
        (lambda: from_ppoly(LINE, [1, 2]), "mass must be one number; found [1, 2]"),
        (lambda: from_ppoly(LINE, -1.0), "mass must be positive; found -1"),
        # functions
        (lambda: from_function(1.0, (0, 1)), "V must be a function of x; found 1.0"),
        (lambda: from_function(np.cos, (1, 0)),
         "span must ascend and hold all breaks; found 1 to 0"),
        (lambda: from_function(np.cos, (0, 1), breaks=[1.0]),
         "span must ascend and hold all breaks; found 0 to 1"),
        (lambda: from_function(np.cos, 1.0), "span must be two numbers (low, high); found 1"),
        (lambda: from_function(np.cos, (0, 1), breaks="a"), "breaks must be numbers; found 'a'"),
        (lambda: from_function(np.cos, (0, 1), tolerance=0.1),
         "tolerance must be from 1e-15 to 1e-3; found 0.1"),
        (lambda: from_function(np.cos, (0, 1), tolerance=0),
         "tolerance must be from 1e-15 to 1e-3; found 0"),
        (lambda: from_function(np.cos, (0, 1), tolerance="fine"),
         "tolerance must be a number; found 'fine'"),
        (lambda: from_function(lambda x: 1 / x, (0, 1)),
         "V must be finite on the span; it is not at x = 0"),
        (lambda: from_function(np.cos, (0, 1), lambda x: x),
         "mass must be finite and positive on the span; it is not at x = 0"),
        (lambda: from_function(np.cos, (0, 1), -1.0), "mass must be positive; found -1"),
        (lambda: from_function(np.cos, (0, 1), [1, 2]), "mass must be one number; found [1, 2]"),
        (lambda: from_function(lambda x: 0 * x[:3], (0, 1)),
         "V must return one number for each x; for 775 of them, shape (775,), it returned float64 "
         "of shape (3,)"),
        (lambda: from_function(lambda x: 1j * x, (0, 1)),
         "V must return one number for each x; for 775 of them, shape (775,), it returned "
         "complex128 of shape (775,)"),
        (lambda: from_function(lambda x: float("deep"), (0, 1)),
         "V failed on an array of positions: could not convert string to float: 'deep'; write it "
         "with numpy functions, or wrap it in np.vectorize"),
        (lambda: from_function(np.sign, (-1, 2)),
         "no polynomial follows the function near x = 0; if it jumps or has a kink there, write "
         "breaks=[0]"),
        (lambda: from_function(lambda x: abs(x - 0.3), (-1, 2)),
         "no polynomial follows the function near x = 0.3; if it jumps or has a kink there, write "
         "breaks=[0.3]"),
        (lambda: from_function(lambda x: abs(x) ** 0.5, (-1, 2), breaks=[0]),
         "no polynomial follows the function up to x = 0, as where it has a root or a pole; end "
         "the span some way off, or give rows to from_rows"),
        (lambda: from_function(np.cos, (0, 1), units="nm"), UNITS + "'nm'"),
        # changes
        (lambda: WALL.tilted(np.nan), "field must be finite; found nan"),
        (lambda: WALL.stretched(0), "factor must be positive; found 0; use mirrored() to reflect"),
        (lambda: WALL.stretched(-1.5),
         "factor must be positive; found -1.5; use mirrored() to reflect"),
        (lambda: WALL.stretched("2x"), "factor must be a number; found '2x'"),
        (lambda: WALL.scaled(1e250),
         "V must be of a size from 1e-250 to 1e+100; found 1e+250. Is the unit right?"),
        (lambda: WALL.scaled(None), "factor must be a number; found None"),
        (lambda: WALL.shifted([1, 2]), "energy must be one number; found [1, 2]"),
    ],
)  # fmt: skip
def test_messages(call, message):
    """Whole texts: what is wrong, where, what was found, and what to write instead."""
    with pytest.raises(InputError) as caught:
        call()
    assert str(caught.value) == message


def test_a_function_that_fails_by_itself_keeps_its_own_error():
    """A fault inside the user's function is his to see, traceback and all."""

    def broken(x):
        raise ZeroDivisionError("mine")

    with pytest.raises(ZeroDivisionError, match="mine"):
        from_function(broken, (0, 1))


@pytest.mark.parametrize(
    ("call", "text"),
    [
        (lambda: from_layers([5, 8, 5], [1e308, 0, 1e308]), "V must .* found 1e+308"),
        (lambda: from_layers([5, 8, 5], [1e-300, 0, 1e-300]), "V must .* found 1e-300"),
        (lambda: from_rows([0, 1e300, 2e300], [1, 0, 1]), "steps of x must .* found 2e+300"),
        (lambda: from_rows([0, 1e-200, 2e-200], [1, 0, 1]), "steps of x must .* found 1e-200"),
        (lambda: from_layers([5.0], [1.0], 1e300), "the mass must .* found 1e+300"),
    ],
)
def test_sizes_that_no_unit_gives_are_refused(call, text):
    """Their squares leave the range of doubles, which solvers would tell in riddles."""
    with pytest.raises(InputError, match=text.replace("+", r"\+") + r"\. Is the unit right\?"):
        call()


ALPHA_LIMIT = (
    "alpha is too large for this profile: m (1 + alpha (E - V)) is not positive at x = {x} nm for "
    "E near the least V; V rises {rise} eV there and alpha must stay below {limit} 1/eV"
)


def test_an_alpha_that_turns_the_mass_negative_is_refused():
    """No solver can count levels with such a mass; the limit named is the true one.

    m (1 + alpha (E - V)) > 0 for every E above min V: alpha < 1 / (max V - min V), by hand.
    """
    x, V = [0, 1, 2, 3], [0, -1, -0.3, 0]
    with pytest.raises(InputError) as caught:
        from_rows(x, V, alpha=1.0)
    assert str(caught.value) == ALPHA_LIMIT.format(x=0, rise=1, limit=1)
    allowed = from_rows(x, V, alpha=0.999)
    with pytest.raises(InputError) as caught:
        allowed.scaled(2)
    assert str(caught.value) == ALPHA_LIMIT.format(x=0, rise=2, limit=0.5)


def test_the_alpha_limit_looks_inside_cells():
    """A curved cell may be highest between its rows: the check must not sample rows only."""
    x, V = [0, 1, 2, 3, 4], [0, 1, -1, 1, 0]
    curved = from_rows(x, V, interpolation="smooth")
    rise = max(curved.V(np.linspace(0, 4, 4001))) - curved.V_min
    assert rise > max(V) - curved.V_min + 0.01  # what sampling the rows would see
    from_rows(x, V, alpha=0.999 / rise, interpolation="smooth")
    with pytest.raises(InputError, match="alpha is too large"):
        from_rows(x, V, alpha=1.001 / rise, interpolation="smooth")


def test_masked_values_are_not_taken_for_numbers():
    """What stands below a mask is a value somebody has ruled out."""
    V = np.ma.array([0.3, 99.0, 0.3], mask=[False, True, False])
    with pytest.raises(InputError, match="V has masked values, row 1 first; leave out these rows"):
        Profile.from_rows([0.0, 1.0, 2.0], V)
    unmasked = Profile.from_rows([0.0, 1.0, 2.0], np.ma.array([0.3, 0.0, 0.3]))
    assert unmasked.V(1.0) == 0.0
