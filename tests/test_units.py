"""Units: one factor at the border, and it is the right one for every pair of units."""

import dataclasses
import itertools

import numpy as np
import pytest
from scipy import constants

from eigen1d import InputError, Profile, Units, solve
from eigen1d.units import ENERGY_UNITS, LENGTH_UNITS, energy_in_hartree, length_in_bohr

PAIRS = list(itertools.product(LENGTH_UNITS, ENERGY_UNITS))
METRE = {"nm": 1e-9, "angstrom": 1e-10, "um": 1e-6, "m": 1.0}
METRE["bohr"] = constants.value("Bohr radius")
JOULE = {
    "eV": constants.e,
    "meV": constants.e / 1000,
    "J": 1.0,
    "hartree": constants.value("Hartree energy"),
    "cm^-1": constants.h * constants.c / 0.01,
    "K": constants.k,
}


@pytest.mark.parametrize(
    ("function", "unit", "digits"),
    [
        # CODATA 2022, table of P. J. Mohr et al., Rev. Mod. Phys. 97 (2025) 025002. The 2018 set,
        # which an older scipy holds, differs in the tenth digit: hence 1e-9.
        (length_in_bohr, "m", 1 / 5.29177210544e-11),
        (energy_in_hartree, "eV", 1 / 27.211386245981),
        (energy_in_hartree, "cm^-1", 1 / 219474.63136314),
        (energy_in_hartree, "K", 1 / 315775.02480398),
        (energy_in_hartree, "J", 1 / 4.3597447222060e-18),
    ],
)
def test_factors_are_the_published_ones(function, unit, digits):
    """A wrong constant shifts every level of every user by the same unnoticed part."""
    assert function(unit) == pytest.approx(digits, rel=1e-9, abs=0)


def test_prefixes_are_exact_ratios():
    """10 angstrom are a nanometre: a table in either unit must mean the same profile."""
    assert length_in_bohr("nm") / length_in_bohr("angstrom") == pytest.approx(10, rel=4e-16)
    assert length_in_bohr("um") / length_in_bohr("nm") == pytest.approx(1000, rel=4e-16)
    assert energy_in_hartree("eV") / energy_in_hartree("meV") == pytest.approx(1000, rel=4e-16)


@pytest.mark.parametrize(("length", "energy"), PAIRS)
def test_electron_mass_is_m_over_hbar_squared(length, energy):
    """The one factor that solvers use, by another route: m_e and hbar in SI, not hartree and bohr.

    The constants fulfil E_h a_0^2 = hbar^2 / m_e to about 1e-10, the digits that are published.
    """
    expected = constants.m_e * JOULE[energy] * METRE[length] ** 2 / constants.hbar**2
    assert Units(length, energy).electron_mass == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize(("length", "energy"), PAIRS)
def test_the_same_well_in_every_pair_of_units(length, energy):
    """A 3 nm box holds an electron at hbar^2 pi^2 / (2 m L^2), whatever its sheet is written in.

    Closed form: every text on quantum mechanics. From metres and joules to bohr and kelvin the
    numbers range over 10^60, so nothing inside may assume that lengths and energies are near one.
    """
    box = Profile.from_layers(
        [3e-9 / METRE[length]], [0.0], 0.2, left="wall", right="wall", units=Units(length, energy)
    )
    exact = (constants.hbar * np.pi / 3e-9) ** 2 / (2 * 0.2 * constants.m_e)
    levels = solve(box, count=2)
    assert levels.energy * JOULE[energy] == pytest.approx([exact, 4 * exact], rel=1e-9, abs=0)
    assert levels.mean_x * METRE[length] == pytest.approx([1.5e-9] * 2, rel=1e-12, abs=0)


def test_atomic_units_convert_nothing():
    """In bohr and hartree every factor is 1, not 1 to rounding: pure numbers stay exact."""
    units = Units("bohr", "hartree")
    assert (units.bohr, units.hartree, units.electron_mass) == (1.0, 1.0, 1.0)


def test_default_is_nm_and_eV():
    """The units of most growth sheets; a change would reinterpret every script silently."""
    assert Units() == Units("nm", "eV")
    assert Units() != Units("nm", "meV")
    assert len({Units(), Units("nm", "eV")}) == 1


def test_units_cannot_be_changed():
    """Profiles share them; a change to one would reinterpret the others."""
    with pytest.raises(dataclasses.FrozenInstanceError):
        Units().length = "m"


LENGTHS = "write one of: nm, angstrom, um, m, bohr"
ENERGIES = "write one of: eV, meV, J, hartree, cm^-1, K"


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (lambda: Units("ft"), f"unknown unit of length 'ft'; {LENGTHS}"),
        (lambda: Units("eV", "nm"), f"unknown unit of length 'eV'; {LENGTHS}"),
        (lambda: Units("nm", "ev"), f"unknown unit of energy 'ev'; {ENERGIES}"),
        (lambda: Units("nm", None), f"unknown unit of energy None; {ENERGIES}"),
        (lambda: length_in_bohr("Bohr"), f"unknown unit of length 'Bohr'; {LENGTHS}"),
        (lambda: energy_in_hartree("Ry"), f"unknown unit of energy 'Ry'; {ENERGIES}"),
    ],
)
def test_unknown_units_are_refused_with_the_list(call, message):
    """Units are written by hand: the message must show what would have been right."""
    with pytest.raises(InputError) as caught:
        call()
    assert str(caught.value) == message
