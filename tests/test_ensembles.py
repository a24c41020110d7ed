"""Many profiles at once are what `solve` finds one by one, whatever else is in the stack."""

import math

import numpy as np
import pytest
from interpreted import interpreted
from scipy.interpolate import PPoly

from eigen1d import (
    Ensemble,
    InputError,
    Profile,
    Units,
    _ensemble,
    _search,
    ensembles,
    solve,
    solve_many,
    square_well,
)

NM_EV, BOHR = Units("nm", "eV"), Units("bohr", "hartree")
# Rows with jumps inside and at both ends.
JUMPS = np.array([0, 0, 2, 3.5, 3.5, 6, 7, 9, 9, 11, 14, 15, 15.0])
WELL = np.array([1, 1, 0, 0, 1, 1.0])  # of one material in another, at these places:
PLACES = np.array([0, 6, 6, 14, 14, 20.0])


def rough(seed, profiles=7):
    """V of wells on JUMPS: noise between high ends, a few levels each."""
    V = np.random.default_rng(seed).uniform(0, 0.3, (profiles, JUMPS.size))
    V[:, [0, 1, -2, -1]] += 0.3
    return V


def masses(kind, profiles=7, seed=5):
    """One mass, one for each row, for each profile, or for each row of each profile."""
    shape = {"one": (), "row": JUMPS.size, "profile": (profiles, 1)}.get(
        kind, (profiles, JUMPS.size)
    )
    mass = np.random.default_rng(seed).uniform(0.05, 0.2, shape)
    if kind == "some":  # graded in some members only
        mass[::2] = mass[::2, :1]
    return mass


def tables(V, mass, x=JUMPS, **keywords):
    """The members of a stack as profiles."""
    mass = np.broadcast_to(mass, V.shape)
    return [Profile.from_rows(x, *rows, **keywords) for rows in zip(V, mass, strict=True)]


def assert_same(one, other):
    """Two ensembles have the same bits and the same words."""
    np.testing.assert_array_equal(one.energy, other.energy)
    np.testing.assert_array_equal(one.bracket, other.bracket)
    np.testing.assert_array_equal(one.found, other.found)
    assert (one.failures, one.notes, one.units) == (other.failures, other.notes, other.units)


def assert_as_solved(found, profiles, exact=True):
    """Each member has the levels of `solve`, to the last bit or by a part of the bracket."""
    count = found.energy.shape[1]
    assert len(found) == len(profiles) and found.bracket.shape == (*found.energy.shape, 2)
    assert not found.failures
    for i, profile in enumerate(profiles):
        levels = solve(profile, count=count)
        k = len(levels)
        assert found.found[i] == k
        part = 0.0 if exact else 0.3
        half = levels.budget.numeric
        assert (np.abs(found.energy[i, :k] - levels.energy) <= part * half).all()
        assert (np.abs(found.bracket[i, :k] - levels.bracket) <= part * half[:, None]).all()
        assert np.isnan(found.energy[i, k:]).all() and np.isnan(found.bracket[i, k:]).all()


# --- the same levels ---------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["one", "row", "profile", "each", "some"])
@pytest.mark.parametrize("interpolation", ["linear", "step", "smooth", "monotone"])
def test_members_of_a_stack_have_the_levels_that_solve_finds(interpolation, kind):
    """To the last bit: the kernel sees the very cells that a profile has."""
    V, mass = rough(1), masses(kind)
    words = {"interpolation": interpolation}
    found = solve_many(x=JUMPS, V=V, mass=mass, count=6, **words)
    assert 1 < found.found.min() < 6
    assert_as_solved(found, tables(V, mass, **words))


@pytest.mark.parametrize("kind", ["one", "some"])
def test_tables_of_many_rows_do_too(kind):
    """Short cells of constant mass are crossed in a way of their own, in any company."""
    x = np.linspace(0, 15, 150)
    mass = masses("some" if kind == "some" else "profile")
    V, mass = (np.array([np.interp(x, JUMPS, row) for row in np.broadcast_to(rows, rough(1).shape)])
               for rows in (rough(1), mass))  # fmt: skip
    V += 1e-3 * np.random.default_rng(0).normal(size=V.shape)
    found = solve_many(x=x, V=V, mass=mass, count=6)
    assert_as_solved(found, tables(V, mass, x))


@pytest.mark.parametrize("units", [Units("angstrom", "meV"), Units("um", "K")], ids=str)
@pytest.mark.parametrize("right", ["open", "wall"])
@pytest.mark.parametrize("left", ["open", "wall"])
def test_edges_and_units_are_those_of_profiles(left, right, units):
    """Between two walls there are always as many levels as wanted; energies are in the unit."""
    x = JUMPS * NM_EV.bohr / units.bohr
    V, mass = rough(2) * NM_EV.hartree / units.hartree, masses("row")
    words = {"left": left, "right": right, "units": units}
    found = solve_many(x=x, V=V, mass=mass, count=6, **words)
    assert found.units == units
    assert (found.found == 6).all() == (left == right == "wall")
    assert_as_solved(found, tables(V, mass, x, **words))
    in_eV = solve_many(x=JUMPS, V=rough(2), mass=mass, count=6, left=left, right=right)
    np.testing.assert_allclose(
        found.energy * units.hartree / NM_EV.hartree, in_eV.energy, rtol=1e-12
    )


@pytest.mark.parametrize("interpolation", ["linear", "step"])
def test_cells_that_a_profile_joins_change_rounding_alone(interpolation):
    """Layers sampled in many equal rows are a few cells to `solve`, and many in a stack."""
    x = np.linspace(0, 30, 151)
    layer = np.searchsorted([4, 9.1, 13, 13.7, 25], x)
    random = np.random.default_rng(3)
    V, mass = random.uniform(0, 0.4, (8, 6)), random.uniform(0.05, 0.2, 6)[layer]
    V[:, [0, -1]] = 0.5
    words = {"interpolation": interpolation}
    found = solve_many(x=x, V=V[:, layer], mass=mass, count=20, **words)
    profiles = tables(V[:, layer], mass, x, **words)
    assert profiles[0].cells < 30 and found.found.min() > 2
    assert_as_solved(found, profiles, exact=False)


@pytest.mark.parametrize("interpolation", ["linear", "step"])
def test_square_wells_of_many_depths_agree_with_the_closed_form(interpolation):
    """The analytic oracle: every level inside its bracket, none missed, none too many."""
    depth = np.geomspace(1e-4, 3, 60)
    x, shape = (PLACES, WELL) if interpolation == "linear" else ([0, 6, 14, 20], [1, 0, 1, 1])
    V = np.outer(depth, shape)
    found = solve_many(
        x=x, V=V, mass=0.3, count=40, units=BOHR, interpolation=interpolation, workers=2
    )
    wells = [square_well.SquareWell(8.0, d, mass=0.3).energies for d in depth]
    np.testing.assert_array_equal(found.found, [well.size for well in wells])
    assert found.found.min() == 1 and found.found.max() == 4
    for i, well in enumerate(wells):
        low, high = found.bracket[i, : well.size].T
        half = 0.5 * (high - low)
        assert ((low <= well) & (well <= high)).all()
        assert (np.abs(found.energy[i, : well.size] - well) <= half).all()


def test_lists_hold_profiles_of_any_kind():
    """Functions, layers, nonparabolic and graded rows, splines: each as `solve` does it."""
    profiles = [
        Profile.from_function(lambda x: -np.exp(-(x**2)), (-9, 9), units=BOHR),
        Profile.from_layers([5, 8, 5], [0.3, 0, 0.2], [0.09, 0.067, 0.09], alpha=[0.6, 0.6, 0.6]),
        Profile.from_layers([1.0], [0.0], left="wall", right="wall"),
        Profile.from_rows(PLACES, 0.3 * WELL, 0.067, sigma_V=0.01),
        Profile.from_ppoly(PPoly([[1.0], [-2.0], [0.0]], [0, 2]), units=BOHR),
        Profile.from_rows([0, 10], [0.1, 0.1]),
    ]
    found = solve_many(profiles, count=4)
    assert found.found[2] == 4 and found.found[5] == 0
    assert_as_solved(found, profiles)
    assert_same(solve_many(iter(profiles), count=4), found)


def test_a_stack_and_the_list_of_its_profiles_agree():
    """Which form is given is a matter of speed alone."""
    V, mass = rough(4), masses("each")
    stack = solve_many(x=JUMPS, V=V, mass=mass, count=3)
    assert_same(stack, solve_many(tables(V, mass), count=3))


def test_arrays_may_come_in_any_layout():
    """Lists, views, columns first, read only, single precision: all read, none changed."""
    V, mass = rough(6).astype(np.float32), masses("each").astype(np.float32)
    first = solve_many(x=JUMPS, V=V.astype(float), mass=mass.astype(float), count=3)
    wide = np.zeros((7, 2 * JUMPS.size))
    wide[:, ::2] = V
    V.flags.writeable = False
    for form in (V, V.tolist(), np.asfortranarray(V), wide[:, ::2], V.astype(">f8")):
        assert_same(solve_many(x=JUMPS.tolist(), V=form, mass=mass, count=3), first)
    one = np.broadcast_to(V[0], V.shape)
    assert (solve_many(x=JUMPS, V=one, count=2).energy == solve(tables(V, 1.0)[0], 2).energy).all()


# --- one member does not touch another ---------------------------------------------------------


def test_workers_order_and_company_change_no_bit():
    """What a member gets depends on that member alone."""
    V, mass = rough(7, 2000), masses("some", 2000)
    V[11, 3], mass[30, 2] = np.nan, -1.0
    assert V.size > 5 * ensembles._WORTH  # so that there are parts to share out
    first = solve_many(x=JUMPS, V=V, mass=mass, count=3, workers=1)
    assert list(first.failures) == [11, 30]
    for workers in (2, 5, 10**9):
        assert_same(solve_many(x=JUMPS, V=V, mass=mass, count=3, workers=workers), first)
    order = np.random.default_rng(8).permutation(2000)
    shuffled = solve_many(x=JUMPS, V=V[order], mass=mass[order], count=3)
    np.testing.assert_array_equal(shuffled.energy, first.energy[order])
    np.testing.assert_array_equal(shuffled.bracket, first.bracket[order])
    assert {int(order[i]): text for i, text in shuffled.failures.items()} == first.failures
    for i in (0, 1, 2, 1999):
        alone = solve_many(x=JUMPS, V=V[i : i + 1], mass=mass[i : i + 1], count=3)
        np.testing.assert_array_equal(alone.energy[0], first.energy[i])
        np.testing.assert_array_equal(alone.bracket[0], first.bracket[i])


def test_a_list_gives_the_same_bits_with_any_number_of_workers():
    """A profile may stand in a list twice, and be solved by two threads at once."""
    profiles = tables(rough(9), masses("each")) * 3
    first = solve_many(profiles, count=3, workers=1)
    for workers in (2, 5):
        assert_same(solve_many(profiles, count=3, workers=workers), first)


FAULTS = {
    "nan": ("V", 3, np.nan),
    "inf": ("V", 0, np.inf),
    "minus-inf": ("V", -1, -np.inf),
    "large-V": ("V", 4, 1e101),
    "tiny-V": ("V", slice(None), 1e-255),
    "no-mass": ("mass", 2, 0.0),
    "negative-mass": ("mass", -1, -0.1),
    "mass-nan": ("mass", 6, np.nan),
    "mass-inf": ("mass", 6, np.inf),
    "light": ("mass", 1, 1e-101),
    "heavy": ("mass", slice(None), 1e305),
}


@pytest.mark.parametrize("interpolation", ["linear", "step"])
@pytest.mark.parametrize("name", FAULTS)
def test_a_member_that_fails_says_what_from_rows_says(name, interpolation):
    """And stops no other: all the rest has the bits it has without that member."""
    which, rows, value = FAULTS[name]
    arrays = {"V": rough(10), "mass": masses("each")}
    good = solve_many(x=JUMPS, **arrays, count=3, interpolation=interpolation)
    arrays[which][4, rows] = value
    found = solve_many(x=JUMPS, **arrays, count=3, interpolation=interpolation)
    with pytest.raises(InputError) as fault:
        Profile.from_rows(JUMPS, arrays["V"][4], arrays["mass"][4], interpolation=interpolation)
    assert found.failures == {4: str(fault.value)}
    assert [type(i) for i in found.failures] == [int]
    assert found.found[4] == 0
    assert np.isnan(found.energy[4]).all() and np.isnan(found.bracket[4]).all()
    others = np.arange(7) != 4
    np.testing.assert_array_equal(found.energy[others], good.energy[others])
    np.testing.assert_array_equal(found.bracket[others], good.bracket[others])
    np.testing.assert_array_equal(found.found[others], good.found[others])


def test_sizes_at_the_limits_are_solved_or_refused_as_profiles_are():
    """The kernel takes what is far from the limits; near them a profile decides."""
    sizes = [1e-251, 1e-250, 1e-245, 1e-239, 0.0, 1e95, 4e99, 9e99, 0.9e100, 2e100]
    V = np.outer(sizes, [1, 0.2, 0.7, 1])
    V[7, 1] *= -1  # a rise that is not allowed between rows that are
    x, walls = [0, 1e-40, 3e-40, 4e-40], {"left": "wall", "right": "wall"}
    found = solve_many(x=x, V=V, mass=1e-20, count=2, **walls)
    for i, profile in enumerate(V):
        try:
            levels = solve(Profile.from_rows(x, profile, 1e-20, **walls), count=2)
        except InputError as fault:
            assert found.failures[i] == str(fault)
        else:
            assert (np.abs(found.energy[i] - levels.energy) <= 0.3 * levels.budget.numeric).all()
    assert list(found.failures) == [0, 7, 9]


def test_what_solve_refuses_is_a_failure_of_that_member():
    """A flat one of any length is solved; a million wavelengths of a slope are not."""
    x = [0, 1e9]
    V = np.array([[0.0, 0.0], [0.0, 0.3], [0.1, 0.1]])
    found = solve_many(x=x, V=V, count=2, left="wall", right="wall")
    with pytest.raises(InputError) as fault:
        solve(Profile.from_rows(x, V[1], left="wall", right="wall"), count=2)
    assert found.failures == {1: str(fault.value)}
    np.testing.assert_array_equal(found.found, [2, 0, 2])
    as_list = solve_many(tables(V, 1.0, x, left="wall", right="wall"), count=2)
    assert_same(as_list, found)


# --- doubtful members --------------------------------------------------------------------------


def test_a_level_at_the_very_edge_is_left_out_and_noted():
    """A wall and a well of depth V and width a bind one more level each time sqrt(2 m V) a passes
    pi/2 (common practice, no source); here a = m = 1.
    """
    depth = math.pi**2 / 8 * np.array([0.5, 1 - 1e-9, 1.0, 1 + 1e-9, 2.0, 9.0])
    V = np.outer(depth, [0, 0, 1, 1.0])
    words = {"left": "wall", "units": BOHR}
    found = solve_many(x=[0, 1, 1, 2], V=V, count=3, **words)
    np.testing.assert_array_equal(found.found, [0, 0, 0, 1, 1, 1])
    profiles = tables(V, 1.0, [0, 1, 1, 2], **words)
    assert_as_solved(found, profiles)
    assert found.notes == {i: solve(profiles[i]).notes for i in (2, 5)}
    assert "continuum's edge" in found.notes[2][0]


def test_wells_that_double_precision_cannot_part_share_brackets():
    """Equal wells far apart: levels in pairs, both kept, as `solve` keeps them."""
    x = [0, 5, 5, 13, 13, 213, 213, 221, 221, 226]
    shape = np.array([1, 1, 0, 0, 1, 1, 0, 0, 1, 1.0])
    V = np.outer([0.2, 0.3, 0.4], shape)
    V[1, 6:8] += 1e-15
    found = solve_many(x=x, V=V, mass=0.067, count=6)
    assert (np.diff(found.energy[:, :4])[:, ::2] < 1e-14).all()
    assert_as_solved(found, tables(V, 0.067, x))


@pytest.mark.parametrize("doubt", ["too long", "not sure", "wide"])
def test_what_the_kernel_cannot_settle_is_solved_one_by_one(doubt, monkeypatch):
    """-1 means a closer look, not a result."""

    def doubtful(*given):
        state = np.array([1, 1, 1, 1, 1, doubt != "wide"])
        below = -1 if doubt == "too long" else 6
        return below, doubt != "not sure", np.zeros(6), np.zeros((6, 2)), state

    many = interpreted(_ensemble, find=doubtful)["find_many"]
    monkeypatch.setattr(_ensemble, "find_many", many)
    V = rough(1)
    assert_as_solved(solve_many(x=JUMPS, V=V, mass=0.1, count=6), tables(V, 0.1))


def test_sound_members_cost_no_profile(monkeypatch):
    """One is made of a stack, to check what all share; each of the others is a closer look."""
    made, from_rows = [], Profile.from_rows

    def counted(*given, **words):
        made.append(given)
        return from_rows(*given, **words)

    monkeypatch.setattr(ensembles.Profile, "from_rows", counted)
    V = np.concatenate([rough(13, 30), np.zeros((1, JUMPS.size))])
    assert solve_many(x=JUMPS, V=V, mass=0.1, count=3).found[:30].all()
    assert len(made) == 1
    V[17, 0] = np.nan
    assert solve_many(x=JUMPS, V=V, mass=0.1, count=3).failures
    assert len(made) == 3


def test_the_kernel_is_what_its_python_says():
    """Compiled and interpreted, the same bits; the search inside has a test of its own."""
    plain = interpreted(_ensemble, find=_search.found)["find_many"]
    row = np.flatnonzero(np.diff(JUMPS) > 0)
    width = np.diff(JUMPS)[row]
    V = np.concatenate([rough(14), np.full((1, JUMPS.size), np.nan), np.ones((1, JUMPS.size))])
    for kind in ("one", "row", "profile", "some"):
        mass = np.atleast_2d(masses(kind, 9))
        for flags in ((False, True, True), (True, False, True), (False, False, False)):
            results = []
            for run in (_ensemble.find_many, plain):
                energy, bracket = np.full((9, 3), np.nan), np.full((9, 3, 2), np.nan)
                found = np.full(9, 7)
                run(width, row, V, mass, 13.0, flags, 4e-15, energy, bracket, found)
                results.append((energy, bracket, found))
            assert results[0][2][7] == -1 and results[0][2][:7].min() > 0
            for one, other in zip(*results, strict=True):
                np.testing.assert_array_equal(one, other)


# --- what is given and what comes back ---------------------------------------------------------


def test_no_profiles_give_an_empty_ensemble():
    """A sweep may have no points."""
    for found in (solve_many([], count=3), solve_many(x=PLACES, V=np.empty((0, 6)), count=3)):
        assert len(found) == 0 and not found.failures
        assert found.energy.shape == (0, 3) and found.bracket.shape == (0, 3, 2)


def test_an_ensemble_says_what_it_is_and_cannot_be_changed():
    """The unit stands beside the numbers; a list of several units has none."""
    V = np.outer([0.1, 0.3, np.nan], WELL)
    found = solve_many(x=PLACES, V=V, mass=0.067, count=9)
    assert isinstance(found, Ensemble)
    assert repr(found) == "<Ensemble: 3 profiles, at most 2 levels each, in eV, 1 failed>"
    for array in (found.energy, found.bracket, found.found):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 0
    milli = Profile.from_rows(PLACES, 300 * WELL, 0.067, units=Units("nm", "meV"))
    alone = solve_many([milli], count=1)
    assert alone.units == milli.units
    assert repr(alone) == "<Ensemble: 1 profile, at most 1 level each, in meV>"
    assert solve_many([milli, Profile.from_rows(PLACES, WELL)], count=1).units is None


A_PROFILE = Profile.from_rows(PLACES, 0.3 * WELL, 0.067)
STACK = {"x": PLACES, "V": np.outer([0.1, 0.2, 0.3], WELL), "mass": 0.067, "count": 2}
REFUSED = [
    ({"count": 2}, "give a list of profiles, or x and V of a stack of tables"),
    ({"count": 2, "V": STACK["V"]}, "a stack needs both x, shape (rows,), and V, shape (prof"),
    ({"count": 2, "x": PLACES}, "a stack needs both x"),
    (STACK | {"profiles": [A_PROFILE]}, "not both; found profiles and x, V, mass"),
    ({"profiles": [A_PROFILE], "count": 2, "left": "wall"}, "not both; found profiles and left"),
    ({"profiles": A_PROFILE, "count": 2}, "profiles must be a list of them; solve(profile, count)"),
    ({"profiles": 5, "count": 2}, "profiles must be a list of Profiles; found 5"),
    ({"profiles": [A_PROFILE, None], "count": 2}, "a list of Profiles; number 1 is None"),
    ({"profiles": STACK["V"], "count": 2}, "go by name: solve_many(x=..., V=..., count=...)"),
    (STACK | {"V": STACK["V"][0]}, "with 6 rows as in x; found (6,)"),
    (STACK | {"V": STACK["V"].T}, "V must have the shape (profiles, rows), with 6 rows as in x; f"),
    (STACK | {"V": [[1, 2], [1]]}, "V must be numbers, as many in each profile; found [[1, 2], [1"),
    (STACK | {"V": STACK["V"] * 1j}, "V must be numbers"),
    (STACK | {"x": PLACES[::-1]}, "x must ascend; row 1 has 14 after 20"),
    (STACK | {"x": PLACES * 1e-120}, "steps of x must be of a size from 1e-100"),
    (STACK | {"x": [PLACES]}, "x must be one row of numbers; found shape (1, 6)"),
    (STACK | {"x": [0.0], "V": [[1.0]]}, "x and V need two or more rows, equally many; found 1, 1"),
    (STACK | {"mass": [1, 2, 3]}, "have the shape (6,), (3, 1) or (3, 6); found (3,)"),
    (STACK | {"mass": "heavy"}, "mass must be numbers"),
    (STACK | {"mass": -1}, "mass must be positive; row 0 has -1"),
    (STACK | {"mass": [1, 1, np.nan, 1, 1, 1]}, "mass must be finite; row 2 has nan"),
    (STACK | {"mass": 1e300}, "the mass must be of a size from"),
    (STACK | {"left": "opne"}, "unknown left edge 'opne'; write one of: open, wall"),
    (STACK | {"right": None}, "unknown right edge None"),
    (STACK | {"interpolation": "cubic"}, "unknown interpolation 'cubic'; write one of: linear"),
    (STACK | {"units": "eV"}, 'units must be Units("nm", "eV") or the like; found \'eV\''),
    *((STACK | {"count": n}, f"count must be a whole number from 1; found {n}")
      for n in (0, True, 2.5, None)),
    *((STACK | {"workers": n}, f"workers must be a whole number from 1; found {n}")
      for n in (0, True, 2.5)),
]  # fmt: skip


@pytest.mark.parametrize(("given", "message"), REFUSED, ids=[text for _, text in REFUSED])
def test_what_is_wrong_with_all_members_is_refused(given, message):
    """One clear message, and no list of a thousand failures that all say the same."""
    with pytest.raises(InputError) as fault:
        solve_many(**given)
    assert message in str(fault.value)


def test_a_masked_value_fails_its_member_alone():
    """The number below a mask is not solved in silence."""
    V = np.ma.array([[0.3, 0.0, 0.3], [0.3, 9.0, 0.3]], mask=[[False] * 3, [False, True, False]])
    found = solve_many(x=[0.0, 10.0, 20.0], V=V, mass=0.067, count=1)
    assert found.found.tolist() == [1, 0]
    assert list(found.failures) == [1] and "must be finite" in found.failures[1]
