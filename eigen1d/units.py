"""Units at the border: inside the package hbar = 1 and only the mass is ever converted.

Lengths and energies stay in the user's units, so no position and no energy is rounded on the way
in or out. An electron mass is then `Units.electron_mass` in hbar^2 / (energy unit * length unit^2):
the one factor that solvers need; with Units("bohr", "hartree") it is 1. The factors are ratios of
CODATA constants as scipy.constants gives them; none is typed here.
"""

from dataclasses import dataclass
from functools import cached_property

from .errors import InputError

LENGTH_UNITS = ("nm", "angstrom", "um", "m", "bohr")
ENERGY_UNITS = ("eV", "meV", "J", "hartree", "cm^-1", "K")


def length_in_bohr(unit):
    """Return how many bohr one `unit` of length is.

    Examples
    --------
    >>> round(length_in_bohr("nm"), 6)
    18.897261
    """
    if unit == "bohr":
        return 1.0
    # scipy.constants takes 50 ms to import and --help needs none of it.
    from scipy.constants import physical_constants

    bohr = physical_constants["atomic unit of length"][0]
    metre = {"nm": 1e-9, "angstrom": 1e-10, "um": 1e-6, "m": 1.0}
    return metre[_known(unit, LENGTH_UNITS, "length")] / bohr


def energy_in_hartree(unit):
    """Return how many hartree one `unit` of energy is.

    "cm^-1" is an energy over h c, "K" an energy over the Boltzmann constant.

    Examples
    --------
    >>> round(1 / energy_in_hartree("eV"), 6)
    27.211386
    """
    if unit == "hartree":
        return 1.0
    from scipy import constants

    hartree = constants.physical_constants["atomic unit of energy"][0]
    joule = {
        "eV": constants.e,
        "meV": 1e-3 * constants.e,
        "J": 1.0,
        "cm^-1": 100.0 * constants.h * constants.c,
        "K": constants.k,
    }
    return joule[_known(unit, ENERGY_UNITS, "energy")] / hartree


def _known(unit, units, kind):
    if unit not in units:
        raise InputError(f"unknown unit of {kind} {unit!r}; write one of: {', '.join(units)}")
    return unit


@dataclass(frozen=True)
class Units:
    """The user's units of length and energy; masses are always in electron masses.

    With ``Units("bohr", "hartree")`` the equation reads -psi''/(2 m) + V psi = E psi, so that a
    dimensionless problem -y'' + q y = lambda y is mass 0.5 in those units.

    Parameters
    ----------
    length : {"nm", "angstrom", "um", "m", "bohr"}
    energy : {"eV", "meV", "J", "hartree", "cm^-1", "K"}

    Raises
    ------
    InputError
        A name that is not in those lists.

    Examples
    --------
    >>> Units("nm", "meV")
    Units(length='nm', energy='meV')
    >>> round(Units("nm", "meV").bohr, 4)
    18.8973
    """

    length: str = "nm"
    energy: str = "eV"

    def __post_init__(self):
        _known(self.length, LENGTH_UNITS, "length")
        _known(self.energy, ENERGY_UNITS, "energy")

    @cached_property
    def bohr(self):
        """float: one unit of length, in bohr."""
        return length_in_bohr(self.length)

    @cached_property
    def hartree(self):
        """float: one unit of energy, in hartree."""
        return energy_in_hartree(self.energy)

    @cached_property
    def electron_mass(self):
        """float: the electron mass in units of hbar^2 / (energy unit * length unit^2).

        With masses multiplied by this factor, and lengths and energies left in the user's units,
        the equation has hbar = 1: nothing but the mass is ever converted, and no energy or
        position is rounded on the way in or out.
        """
        return self.hartree * self.bohr**2
