"""Finite differences against closed forms and reference levels; their wave functions."""

import numpy as np
import pytest
from hard_problems import HARD
from problems import ATOMIC, SOLVABLE
from scipy import special
from test_finite_difference import (
    WALLS,
    WELLS,
    assert_honest,
    differences,
    height,
    profile_of,
    random_profile,
)

from eigen1d import Profile, closed_forms, solve
from eigen1d.square_well import infinite_well_energies


def test_infinite_well():
    """((n + 1) pi / L)^2 / (2 m), n = 0 to 39."""
    box = Profile.from_layers([3.7], [0.0], 0.2, **WALLS)
    assert_honest(differences(box, count=40), infinite_well_energies(3.7, 40, 0.2))


def from_function(V, span, mass, *parameters):
    return Profile.from_function(lambda x: V(x, *parameters), span, mass, units=ATOMIC)


# What a profile made from a function leaves out, 1e-13 of the height, is far below the estimates.
FUNCTIONS = {
    "harmonic": (
        from_function(closed_forms.harmonic_potential, (-14, 13), 0.6, 1.7, 0.6),
        closed_forms.harmonic(1.7, 15),
    ),
    "Morse": (
        from_function(closed_forms.morse_potential, (-2.6, 59), 1.7, 20.0, 0.8),
        closed_forms.morse(20.0, 0.8, 1.7),
    ),
    "sech^2": (
        from_function(closed_forms.sech_squared_potential, (-40, 40), 0.7, 4.7, 1.3, 0.7),
        closed_forms.sech_squared(4.7, 1.3, 0.7),
    ),
    "triangular": (
        Profile.from_rows([0, 60], [0, 78.0], 0.8, left="wall", units=ATOMIC),
        closed_forms.triangular_wall(1.3, 15, 0.8),
    ),
}


@pytest.mark.parametrize("name", FUNCTIONS)
def test_functions_with_closed_forms(name):
    """Smooth V, which no grid follows exactly: Schroedinger, Morse, Poeschl-Teller, Airy."""
    profile, exact = FUNCTIONS[name]
    assert_honest(differences(profile, count=len(exact)), exact)


@pytest.mark.parametrize("name", WELLS)
def test_square_wells(name):
    """Jumps of V and of the mass, and tails that a box cuts: one equation for an angle."""
    assert_honest(differences(profile_of(WELLS[name])), WELLS[name].energies)


@pytest.mark.parametrize("case", SOLVABLE, ids=lambda case: case.id)
def test_reference_levels(case):
    """Published and computed levels, up to n = 20; sources in tests/reference/README.md."""
    count = case.count and min(case.count, 21)
    levels = differences(case.profile(), count=count)
    if case.bound is not None:
        assert len(levels) == case.bound
    recorded = case.n < len(levels)
    n = case.n[recorded]
    assert n.size >= 1
    exact = np.array([float(E) for E in case.energy])[recorded]
    # The digits that a double keeps of what is recorded, and the tolerance of a function.
    slack = 4 * np.spacing(np.abs(exact)) + 1e-13 * (exact - levels.profile.V_min)
    assert (np.abs(levels.energy[n] - exact) <= levels.budget.numeric[n] + slack).all()
    assert (levels.budget.numeric <= 1e-6 * height(levels)).all()


# --- wave functions -------------------------------------------------------------------------------


@pytest.mark.parametrize("name", WELLS)
def test_states_of_square_wells(name):
    """psi and its tails to 3e-4 of the closed form (9e-6 to 1.5e-4 measured), with its sign.

    Of order 2, on the finest grid worth its memory: good for pictures and mean values, and no
    extrapolation of psi is claimed.
    """
    square = WELLS[name]
    levels = differences(profile_of(square))
    x = np.linspace(-2.5 * square.width, 2.5 * square.width, 601)
    np.testing.assert_allclose(levels.psi(x), square.psi(levels.n, x), rtol=0, atol=3e-4)
    np.testing.assert_allclose(
        levels.probability(-square.width / 2, square.width / 2),
        square.probability_inside(levels.n),
        rtol=0,
        atol=2e-4,
    )


def test_states_of_the_harmonic_oscillator():
    """Hermite functions to 2e-4 (5e-5 measured for n = 0 to 9)."""
    levels = differences(FUNCTIONS["harmonic"][0], count=10)
    x = np.linspace(-7, 7, 301)
    xi = np.sqrt(0.6 * 1.7) * x
    for n, psi in zip(levels.n, levels.psi(x), strict=True):
        norm = (0.6 * 1.7 / np.pi) ** 0.25 / np.sqrt(2.0**n * special.factorial(n))
        wave = (-1.0) ** n * norm * special.eval_hermite(n, xi) * np.exp(-(xi**2) / 2)
        np.testing.assert_allclose(psi, wave, rtol=0, atol=2e-4)


@pytest.mark.parametrize("seed", [0, 1, 2, 4, 5, 7, 8, 13])
def test_states_are_those_of_shooting(seed):
    """Point by point, tails included, on random profiles; n changes of sign; unit overlaps.

    The most that psi is off by here is 2.4e-4 of its largest value; overlaps, 1.5e-5.
    """
    profile = random_profile(seed)
    levels, exact = differences(profile), solve(profile)
    span = profile.x[-1] - profile.x[0]
    x = np.linspace(profile.x[0] - span / 4, profile.x[-1] + span / 4, 4001)
    psi, wave = levels.psi(x), exact.psi(x)
    assert len(levels) == len(exact) >= 1
    assert np.abs(psi - wave).max() < 1e-3 * np.abs(wave).max()
    for n, values in zip(levels.n, psi, strict=True):
        seen = values[np.abs(values) > 1e-9 * np.abs(values).max()]  # the rest is rounding
        assert seen[0] > 0
        assert np.count_nonzero(np.diff(np.sign(seen))) == n
    overlap = levels.matrix(np.ones_like)
    np.testing.assert_allclose(np.diag(overlap), 1, rtol=0, atol=1e-12)
    if profile.alpha_cells is None:
        np.testing.assert_allclose(overlap, np.eye(len(levels)), rtol=0, atol=1e-4)


def test_states_with_an_energy_dependent_mass():
    """The slope between nodes is that of the mass at each level's own energy.

    alpha E up to 1 here: with the mass of E = min V, psi between nodes would be off by far more
    than it is.
    """
    profile = Profile.from_layers(
        [1, 3, 1], [9, 0, 7], [0.5, 0.3, 0.6], alpha=[0.05, 0.1, 0.05], units=ATOMIC
    )
    levels, exact = differences(profile), solve(profile)
    assert len(levels) == len(exact) >= 3
    x = np.linspace(-1, 6, 2001)
    np.testing.assert_allclose(levels.psi(x), exact.psi(x), rtol=0, atol=2e-4)
    np.testing.assert_allclose(levels.mean_x, exact.mean_x, rtol=0, atol=1e-3)


def test_phi_is_continuous_across_a_mass_step():
    """psi' jumps by 100 at the interface, phi = psi'/m does not."""
    square = WELLS["mass 100:1"]
    levels = differences(profile_of(square))
    x = square.width / 2 + np.array([-1e-4, 1e-4])
    psi, phi = levels.states.sample(x)
    scale = np.abs(phi).max(axis=1)
    assert (np.abs(np.diff(phi)[:, 0]) < 3e-2 * scale).all()
    slope = [np.diff(levels.states.sample(at + np.array([0, 1e-6]))[0])[:, 0] for at in x]
    np.testing.assert_allclose(slope[1] / slope[0], 100, rtol=3e-2)


def test_states_of_a_doublet_are_orthogonal():
    """Levels that no double can tell apart: any mixture solves the equation, but not the same one.

    Without LAPACK's orthogonalisation both would come out as the same state.
    """
    problem = next(problem for problem in HARD if problem.name == "doublet-1e-40")
    levels = differences(problem.make())
    overlap = levels.matrix(np.ones_like)
    np.testing.assert_allclose(overlap, np.eye(6), rtol=0, atol=1e-5)
    np.testing.assert_allclose(levels.budget.numeric / height(levels), 0, atol=1e-8)
