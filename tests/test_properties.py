"""What every list of levels must obey, whatever the profile: on seeded random profiles."""

from dataclasses import replace

import numpy as np
import pytest
from problems import ATOMIC

from eigen1d import Profile, solve
from eigen1d._cells import reexpanded

INTERPOLATIONS = ("linear", "step", "smooth", "monotone")
EPS = np.finfo(float).eps


def random_rows(seed):
    """Arguments of Profile.from_rows: jumps, mass, alpha and edges drawn by chance.

    V is a multiple of 1/1024, so that a shift by a whole number is exact.
    """
    random = np.random.default_rng(seed)
    count = int(random.integers(4, 14))
    x = np.cumsum(random.uniform(0.1, 1.2, count)) + random.uniform(-20, 20)
    jumps = random.choice(np.arange(1, count - 1), size=count // 4, replace=False)
    x = np.sort(np.concatenate([x, x[jumps]]))
    V = np.round(random.uniform(0, 14, x.size) * 1024) / 1024
    V[[0, -1]] += 8
    edges = random.choice(["open", "open", "wall"], 2)
    return {
        "x": x,
        "V": V,
        "mass": random.uniform(0.3, 2.0, x.size) if seed % 3 else 0.7,
        # 1 + alpha (E - V) must stay positive down to the least V; splines may swing below 0.
        "alpha": random.uniform(0.0, 0.02, x.size) if seed % 5 == 1 else None,
        "interpolation": INTERPOLATIONS[seed % 4],
        "left": str(edges[0]),
        "right": str(edges[1]),
        "units": ATOMIC,
    }


def random_profile(seed, **changes):
    return Profile.from_rows(**(random_rows(seed) | changes))


SEEDS = range(24)  # six of each interpolation
every_profile = pytest.mark.parametrize("seed", SEEDS)


def assert_same(levels, others, slack=0.0):
    """The same levels as far as both brackets tell, plus `slack` of the height."""
    np.testing.assert_array_equal(levels.n, others.n)
    height = levels.energy - levels.profile.V_min
    allowed = levels.budget.numeric + others.budget.numeric + slack * height
    np.testing.assert_array_less(np.abs(levels.energy - others.energy), allowed)


def test_the_random_profiles_are_varied():
    """Every interpolation, edge, jump, mass column and alpha occurs, and there are levels."""
    profiles = [random_profile(seed) for seed in SEEDS]
    assert {p.rows.interpolation for p in profiles} == set(INTERPOLATIONS)
    assert {(p.left.kind, p.right.kind) for p in profiles} == {
        (a, b) for a in ("open", "wall") for b in ("open", "wall")
    }
    assert 0 < sum(p.alpha_cells is not None for p in profiles) < len(profiles)
    assert all(len(p.rows.stretches()) > 1 for p in profiles)
    counts = [len(solve(p)) for p in profiles]
    assert min(counts) >= 1
    assert sum(counts) > 120


# --- symmetries -------------------------------------------------------------------------------


@every_profile
def test_mirror_image(seed):
    """Left and right are treated alike: the mirror image has the same levels, psi reversed."""
    profile = random_profile(seed)
    levels, mirrored = solve(profile), solve(profile.mirrored())
    # Cells seen from their other end are rounded to a few eps of their coefficients.
    assert_same(levels, mirrored, slack=1e-14)
    np.testing.assert_allclose(levels.mean_x, -mirrored.mean_x, rtol=0, atol=1e-10)


@every_profile
def test_shift_of_energy(seed):
    """Adding a constant to V adds it to every level: nothing depends on the zero of energy."""
    profile = random_profile(seed)
    levels, shifted = solve(profile), solve(profile.shifted(-32.0))
    np.testing.assert_array_equal(levels.n, shifted.n)
    # Exact in V; E - V is rounded at the size of V, and alpha is multiplied by V beforehand.
    size = np.abs(profile.V_cells).max() + 32.0
    assert (np.abs(shifted.energy + 32.0 - levels.energy) <= 16 * EPS * size).all()


@every_profile
def test_change_of_length(seed):
    """x -> s x with m -> m / s^2, and for alpha = 0 also with V -> V / s^2, E -> E / s^2."""
    profile, s = random_profile(seed), 3.7

    def lighter(edge):
        return replace(edge, mass=edge.mass / s**2)

    stretched = profile.stretched(s)
    light = replace(
        stretched,
        mass_cells=stretched.mass_cells / s**2,
        left=lighter(stretched.left),
        right=lighter(stretched.right),
    )
    levels = solve(profile)
    # Rounding of s x moves breakpoints by eps |x|, up to 200 eps of a cell here.
    assert_same(levels, solve(light), slack=1e-13)
    if profile.alpha_cells is None:
        shallow = solve(stretched.scaled(1 / s**2))
        np.testing.assert_array_equal(levels.n, shallow.n)
        height = levels.energy - profile.V_min
        assert (np.abs(s**2 * shallow.energy - levels.energy) <= 1e-13 * height + 32 * EPS).all()


@every_profile
def test_cuts_change_nothing(seed):
    """Cells cut at random places are the same profile: energies may not depend on the cells."""
    profile = random_profile(seed)
    random = np.random.default_rng(seed)
    pieces = 4
    cut = np.sort(random.uniform(0.05, 0.95, (profile.cells, pieces - 1)), axis=1)
    start = np.column_stack([np.zeros(profile.cells), cut]).ravel()
    end = np.column_stack([cut, np.ones(profile.cells)]).ravel()
    owner = np.repeat(np.arange(profile.cells), pieces)

    def finer(cells):
        return None if cells is None else reexpanded(cells[owner], start, end - start)

    fine = replace(
        profile,
        x=np.append(profile.x[owner] + start * np.diff(profile.x)[owner], profile.x[-1]),
        V_cells=finer(profile.V_cells),
        mass_cells=finer(profile.mass_cells),
        alpha_cells=finer(profile.alpha_cells),
    )
    assert fine.cells == pieces * profile.cells
    # Breakpoints are rounded to eps |x|, |x| up to 30 and a hundredth of that a cell.
    assert_same(solve(profile), solve(fine), slack=1e-13)


@pytest.mark.parametrize("seed", [s for s in SEEDS if INTERPOLATIONS[s % 4] == "linear"])
def test_rows_added_on_the_line_change_nothing(seed):
    """A table says no more when it repeats what its straight lines already say."""
    given = random_rows(seed) | {"alpha": None}
    profile = Profile.from_rows(**given)
    middle = 0.5 * (profile.x[:-1] + profile.x[1:])
    added = {"x": np.concatenate([given["x"], middle])}
    order = np.argsort(added["x"], kind="stable")
    added["V"] = np.concatenate([given["V"], profile.V(middle)])
    added["mass"] = np.concatenate([given["mass"] + 0 * given["V"], profile.m(middle)])
    denser = {key: values[order] for key, values in added.items()}
    assert_same(solve(profile), solve(Profile.from_rows(**(given | denser))), slack=1e-13)


# --- order ------------------------------------------------------------------------------------


@every_profile
def test_raising_V_raises_every_level(seed):
    """V1 <= V2 everywhere gives E1 <= E2 level by level (minimax), and no more levels."""
    given = random_rows(seed)
    # A cubic through higher rows may be lower between them: straight lines are in order.
    given["interpolation"] = ("linear", "step")[seed % 2]
    bump = np.random.default_rng(seed).uniform(0.001, 0.3, given["V"].size)
    bump[[0, -1]] = 0.0
    low = solve(Profile.from_rows(**given))
    high = solve(Profile.from_rows(**(given | {"V": given["V"] + bump})))
    assert 1 <= len(high) <= len(low)
    assert (high.bracket[:, 0] > low.bracket[: len(high), 1]).all()


@every_profile
def test_raising_the_mass_lowers_every_level(seed):
    """A heavier particle has less kinetic energy in every state (minimax), and no fewer levels."""
    given = random_rows(seed)
    heavier = given["mass"] * np.random.default_rng(seed).uniform(1.01, 2.0, given["V"].size)
    given["interpolation"] = ("linear", "step")[seed % 2]
    light = solve(Profile.from_rows(**given))
    heavy = solve(Profile.from_rows(**(given | {"mass": heavier})))
    assert len(heavy) >= len(light)
    assert (heavy.bracket[: len(light), 1] < light.bracket[:, 0]).all()


@every_profile
def test_window_and_count_are_cuts_of_the_full_list(seed):
    """window= and count= return the very levels of the full list that lie within."""
    profile = random_profile(seed)
    full = solve(profile)
    for size in (1, len(full) // 2 + 1, len(full)):
        assert_same(solve(profile, count=size), _cut(full, slice(size)))
    first, last = len(full) // 3, 2 * len(full) // 3
    low = full.bracket[first, 0] - 1e-9
    high = full.bracket[last, 1] + 1e-9
    chosen = slice(first, last + 1)
    assert_same(solve(profile, window=(low, high)), _cut(full, chosen))
    # A window that ends just below a level leaves it out.
    below = solve(profile, window=(profile.V_min, full.bracket[last, 0] - 1e-9))
    np.testing.assert_array_equal(below.n, np.arange(last))
    assert len(solve(profile, window=(profile.V_min - 2, profile.V_min))) == 0


def _cut(levels, part):
    budget = replace(levels.budget, numeric=levels.budget.numeric[part])
    return replace(
        levels,
        n=levels.n[part],
        energy=levels.energy[part],
        bracket=levels.bracket[part],
        budget=budget,
    )


# --- wave functions ---------------------------------------------------------------------------


@every_profile
def test_psi_has_n_zeros(seed):
    """psi sampled finely changes sign n times and starts positive: an index check of its own.

    The counting of the solver looks at nodes and phases; this looks at the result as a user does.
    """
    profile = random_profile(seed)
    levels = solve(profile)
    # 40 points to the shortest half wave.
    heaviest = np.abs(profile.mass_cells).sum(axis=1).max() * 1.5
    wave = np.pi / np.sqrt(2 * heaviest * (levels.energy[-1] - profile.V_min))
    x = np.linspace(profile.x[0], profile.x[-1], int(40 * (profile.x[-1] - profile.x[0]) / wave))
    for n, psi in zip(levels.n, levels.psi(x[1:-1]), strict=True):
        signs = np.sign(psi[psi != 0])
        assert signs[0] > 0
        assert np.count_nonzero(np.diff(signs)) == n


@every_profile
def test_states_are_orthonormal(seed):
    """Integrals of psi_i psi_j, tails included, are those of a unit matrix.

    Not for alpha, where each state has a mass, hence an operator, of its own.
    """
    given = random_rows(seed) | {"alpha": None}
    overlap = solve(Profile.from_rows(**given)).matrix(lambda x: np.ones_like(x))
    # Rounding of psi over a gap of levels of some hundredths of the depth.
    np.testing.assert_allclose(overlap, np.eye(len(overlap)), rtol=0, atol=1e-12)


@pytest.mark.parametrize("power", [2, 4])
def test_virial_theorem(power):
    """2 <T> = <x V'> = p <V> for V = x^p, with <T> = E - <V>: psi and E know of each other.

    From any textbook: common practice, no source.
    """
    trap = Profile.from_function(lambda x: x**power, (-9, 9), 0.8, units=ATOMIC)
    levels = solve(trap, count=12)
    V = levels.expect(lambda x: x**power)
    np.testing.assert_allclose(2 * (levels.energy - V), power * V, rtol=1e-12)


_STEPS, _WEIGHTS = np.array([-2, -1, 1, 2]), np.array([1, -8, 8, -1]) / 12


def slope(energies, step):
    """Derivative at 0 of a function that returns an array of energies, to fourth order."""
    return sum(w * energies(k * step) for k, w in zip(_STEPS, _WEIGHTS, strict=True)) / step


@every_profile
def test_field_slope_is_mean_position(seed):
    """dE/dF = <x> for a tilt F x (Hellmann, Feynman): checks <x> without any wave function.

    Between walls, for an open edge keeps its end value instead of tilting on; without alpha, where
    V also acts on the mass.
    """
    given = random_rows(seed) | {"alpha": None, "left": "wall", "right": "wall"}
    profile = Profile.from_rows(**given)
    energy = solve(profile, count=7).energy
    levels = solve(profile, count=6)
    # A step that moves no level by more than 1/300 of a gap, so that levels about to cross do not
    # bend: its fourth power is 1e-10. What rounding of the energies then does stays below 1e-8.
    step = np.diff(energy).min() / (300 * (profile.x[-1] - profile.x[0]))
    found = slope(lambda F: solve(profile.tilted(F), count=6).energy, step)
    np.testing.assert_allclose(found, levels.mean_x, rtol=0, atol=1e-8)


@every_profile
def test_slope_V_is_the_change_with_one_row(seed):
    """dE/dV_row from psi^2 equals differences of energies, for every interpolation, alpha, edge.

    slope_V carries the noise of a table to its levels: a wrong slope is a wrong error bar.
    """
    given = random_rows(seed)
    profile = Profile.from_rows(**given)
    count = min(len(solve(profile)), 4)
    levels = solve(profile, count=count)
    random = np.random.default_rng(seed)
    chosen = {0, given["x"].size - 1, *random.integers(given["x"].size, size=2).tolist()}
    for row in chosen:

        def energies(step, row=row):
            V = given["V"].copy()
            V[row] += step
            return solve(Profile.from_rows(**(given | {"V": V})), count=count).energy

        # With steps of 1e-3, truncation and rounding both stay below the tolerance.
        np.testing.assert_allclose(
            slope(energies, 1e-3), levels.slope_V[:, row], rtol=0, atol=1e-8, err_msg=f"row {row}"
        )
