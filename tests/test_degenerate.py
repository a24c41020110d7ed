"""Wells so far apart that their levels agree to the last digit, and barriers without end."""

import numpy as np
import pytest

from eigen1d import Profile, solve


def wells(count, apart, last=8.0):
    """Invented: wells of 8 nm in barriers of 0.3 eV, some nm apart, the last of another width."""
    thickness, V, mass = [20.0], [0.3], [0.09]
    for i in range(count):
        thickness += [8.0 if i < count - 1 else last, apart if i < count - 1 else 20.0]
        V += [0.0, 0.3]
        mass += [0.067, 0.09]
    return Profile.from_layers(thickness, V, mass)


def overlaps(levels):
    """Integrals of psi_i psi_j."""
    return levels.matrix(lambda x: np.ones_like(x))


@pytest.mark.parametrize("apart", [20, 30, 35, 40, 45, 50, 55, 60, 80, 100, 1000])
@pytest.mark.parametrize("count", [2, 3, 5])
def test_states_are_orthonormal_however_far_wells_are_apart(count, apart):
    """Doublets split by 1e-5, by rounding, by 1e-300: no state may come twice or be lost.

    The splitting passes through the spacing of doubles near 45 nm, where states are mixtures that
    rounding decides; orthonormal they must be all the same, and each well must hold its share.
    """
    levels = solve(wells(count, apart))
    assert list(levels.n) == list(range(2 * count))
    np.testing.assert_allclose(overlaps(levels), np.eye(2 * count), atol=1e-9)
    for i in range(count):
        start = 20 + i * (8 + apart)
        for group in (slice(0, count), slice(count, 2 * count)):
            share = levels.probability(start - apart / 2, start + 8 + apart / 2)[group].sum()
            assert share == pytest.approx(1.0, abs=0.05)


def test_far_wells_are_single_wells():
    """100 nm apart each state is that of one well: the same energy, spread and place in it."""
    alone, both = solve(wells(1, 0)), solve(wells(2, 100))
    for n in range(2):
        pair = [2 * n, 2 * n + 1]
        np.testing.assert_allclose(both.energy[pair], alone.energy[n], rtol=4e-15)  # a bracket
        np.testing.assert_allclose(both.spread_x[pair], alone.spread_x[n], rtol=1e-9)
        places = sorted(both.mean_x[pair])
        np.testing.assert_allclose(places, alone.mean_x[n] + np.array([0, 108]), rtol=1e-9)
    assert any("agree to the last digit" in note for note in both.notes)
    assert alone.notes == ()


def test_unequal_wells_need_no_help():
    """Wells of 8 and 7.9 nm have levels of their own; nothing is mixed and nothing is said."""
    levels = solve(wells(2, 100, last=7.9))
    assert levels.notes == ()
    np.testing.assert_allclose(overlaps(levels), np.eye(4), atol=1e-12)


def test_waves_are_smooth_in_the_barrier():
    """From one end of a barrier alone a decaying state loses its digits on the way, and jumps."""
    x = np.linspace(0, 156, 40001)
    step = np.abs(np.diff(solve(wells(2, 100)).psi(x), axis=1)).max()
    assert step < 1e-3  # the steepest psi' in a well times the distance of points: 7e-4


@pytest.mark.parametrize(
    ("thickness", "V", "place"),
    [
        ([1000, 8, 1000], [0.3, 0, 0.3], 1004.0),
        ([20, 8, 1500], [0.3, 0, 0.3], 24.0),
        ([8, 8, 8], [1e4, 0, 1e4], 12.0),
        ([8, 8, 8], [1e12, 0, 1e12], 12.0),
    ],
)
def test_barriers_of_thousands_of_decay_lengths(thickness, V, place):
    """exp(-745) is the least double: psi behind a barrier is none, and must not turn into nan."""
    levels = solve(Profile.from_layers(thickness, V, [0.09, 0.067, 0.09]), count=2)
    np.testing.assert_allclose(levels.mean_x, place, rtol=1e-12)
    np.testing.assert_allclose(overlaps(levels), np.eye(2), atol=1e-12)
    psi = levels.psi(np.linspace(0, sum(thickness), 501))
    assert np.isfinite(psi).all() and abs(psi[:, -1]).max() < 1e-6
