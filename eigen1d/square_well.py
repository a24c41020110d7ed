"""Square wells solved exactly: the analytic oracle for the numerical solvers.

Nothing here knows a grid, a profile or a solver. A level is an angle: between the bottom of the
well and its lower rim V the wave number is k = K cos(phi), the decay constant there goes as
sin(phi), and K = sqrt(2 m V). Matching psi and psi'/m at both walls of a well of width L says

    k L = n pi + arctan(kappa_left m / (k m_left)) + arctan(kappa_right m / (k m_right)) .

Unlike the usual xi = eta tan(eta), xi = -eta cot(eta), this has no poles and rises smoothly with
the angle, so every n has one root and none can be missed. It is solved once with the angle
counted from the rim and once from the bottom, each time rearranged into a sum of positive terms,
because a small binding is only accurate from the one and a small energy only from the other.

Energies are measured from the bottom of the well unless called "binding". Hartree atomic units,
hbar = 1 throughout: H = -(1/2) d/dx (1/m) d/dx + V.

References
----------
.. [1] L. I. Schiff, Quantum Mechanics, 3rd ed. (1968), sec. 9: the well, its strength and count.
.. [2] D. J. BenDaniel, C. B. Duke, Phys. Rev. 152 (1966) 683: psi and psi'/m are continuous.
"""

import math
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

import numpy as np

from eigen1d.errors import InputError

# floor(pi 2^252). A double strength can come within 1e-16 of a multiple of pi/2; 156 bits of pi/2
# keep that distance, hence count and last binding (test_count_is_exact_beside_every_threshold).
_PI_BITS = 0x3243F6A8885A308D313198A2E03707344A4093822299F31D0082EFA98EC4E6C8
# Pieces of 26 bits, so that n times a piece is exact for n below 2^27.
_HALF_PI = [
    math.ldexp((_PI_BITS >> shift) & (2**26 - 1), shift - 253) for shift in range(228, 72, -26)
]
_LARGEST_STRENGTH = 1e8  # of z0; keeps n below 2^27


def bound_count(z0):
    """Count the bound states of the symmetric well: ceil(2 z0 / pi), in exact arithmetic.

    Parameters
    ----------
    z0 : float
        Strength (L/2) sqrt(2 m V0) of a well of width L and depth V0; 0 to 1e8.

    Returns
    -------
    int
        Number of n = 0, 1, ... with n pi/2 < z0. A state exactly at the rim would be constant
        outside, so it is not bound; but no double except 0 *is* a multiple of pi/2: each is
        compared with the true one. The double nearest to pi/2 lies below it.

    Raises
    ------
    InputError
        `z0` is negative, above 1e8 or not a number.

    References
    ----------
    .. [1] L. I. Schiff, Quantum Mechanics, 3rd ed. (1968), sec. 9.

    Examples
    --------
    >>> bound_count(1e-8), bound_count(5.0)
    (1, 4)
    >>> bound_count(np.pi / 2), bound_count(np.nextafter(np.pi / 2, 2))
    (1, 2)
    """
    return _count(_checked_strength(z0))


def roots(z0, n=None):
    """Solve xi = eta tan(eta) (even n), xi = -eta cot(eta) (odd n), eta^2 + xi^2 = z0^2.

    Parameters
    ----------
    z0 : float
        Strength, as in `bound_count`.
    n : int or array of int, optional
        Which levels; default all, 0 to `bound_count(z0)` - 1.

    Returns
    -------
    eta, xi : array of float, shape of `n`
        k L/2 and kappa L/2, each within 3 units in the last place, tiny xi included.

    Raises
    ------
    InputError
        `z0` is out of range, or the well does not bind a level `n`.

    Notes
    -----
    With eta = z0 cos(phi), xi = z0 sin(phi) both branches become eta = n pi/2 + phi, that is
    phi + 2 z0 sin^2(phi/2) = z0 - n pi/2: positive terms on the left, the height above the n-th
    threshold on the right.

    Examples
    --------
    >>> eta, xi = roots(5.0)
    >>> eta.round(6)
    array([1.30644 , 2.595739, 3.837467, 4.906295])
    >>> eta, xi = roots(1e-8)
    >>> xi / 1e-16                                  # a shallow well: xi = z0^2
    array([1.])
    """
    z0 = _checked_strength(z0)
    n = _checked_levels(n, _count(z0))

    def phase(phi):
        return phi + 2 * z0 * np.sin(phi / 2) ** 2, 1 + z0 * np.sin(phi)

    above = _above_threshold(z0, n)
    phi = _solve_increasing(phase, above, _quadratic_guess(1.0, z0, above))
    # eta = phi + n pi/2, by the same exact multiples of pi/2.
    return -_above_threshold(-phi, n), z0 * np.sin(phi)


def binding_fraction(z0, n=None):
    """How far each level lies below the rim, over the depth: (xi/z0)^2 = 1 - (eta/z0)^2.

    Parameters, errors, precision as in `roots`.

    Examples
    --------
    >>> binding_fraction(5.0).round(6)
    array([0.931729, 0.730486, 0.410954, 0.037131])
    """
    return (roots(z0, n)[1] / z0) ** 2


def height_fraction(z0, n=None):
    """How far each level lies above the bottom, over the depth: (eta/z0)^2.

    Parameters, errors and precision as in `roots`, relative to the height itself.

    Examples
    --------
    >>> height_fraction(5.0).round(6)
    array([0.068271, 0.269514, 0.589046, 0.962869])
    """
    return (roots(z0, n)[0] / z0) ** 2


def infinite_well_energies(width, count, mass=1.0):
    """Lowest levels between two walls: ((n+1) pi / width)^2 / (2 mass).

    Parameters
    ----------
    width, mass : float
        Positive; hartree atomic units.
    count : int
        How many levels.

    Returns
    -------
    array of float, shape (count,)

    Raises
    ------
    InputError
        A `width` or `mass` not positive, or a `count` that is not a whole number >= 0.

    Examples
    --------
    >>> infinite_well_energies(np.pi, 3)
    array([0.5, 2. , 4.5])
    """
    width, mass = _positive("width", width), _positive("mass", mass)
    if not isinstance(count, (int, np.integer)) or count < 0:
        raise InputError(f"count must be a whole number of levels, 0 or more; found {count!r}")
    return (np.arange(1, count + 1) * np.pi / width) ** 2 / (2 * mass)


@dataclass(frozen=True)
class SquareWell:
    """A flat well between two flat regions, each with its own rim height and mass.

    Parameters
    ----------
    width : float
        The well is -width/2 < x < width/2, with V = 0.
    left, right : float
        Height of the rim on either side; `right` defaults to `left`. One of them may be inf.
    mass : float
        Mass inside.
    mass_left, mass_right : float, optional
        Masses outside; `mass_left` defaults to `mass`, `mass_right` to `mass_left`.

    Raises
    ------
    InputError
        A value that is not positive, two infinite rims, or a strength
        (width/2) sqrt(2 mass min(left, right)) above 1e8.

    Notes
    -----
    `count` is exact for equal rims. With unequal ones it depends on an arctangent, and a level
    within about 1e-16 of the lower rim's height may be counted either way.

    References
    ----------
    .. [1] D. J. BenDaniel, C. B. Duke, Phys. Rev. 152 (1966) 683.

    Examples
    --------
    Rims 3 and 10 high, then equal barriers of a heavier mass:

    >>> SquareWell(2.0, 3.0, 10.0).energies.round(6)
    array([0.701434, 2.593521])
    >>> well = SquareWell(190.0, 0.011, mass=0.067, mass_left=0.1)
    >>> well.energies.round(6), well.probability_inside([0, 1, 2]).round(3)
    (array([0.001144, 0.004543, 0.009726]), array([0.974, 0.89 , 0.64 ]))
    """

    width: float
    left: float
    right: float | None = None
    mass: float = field(default=1.0, kw_only=True)
    mass_left: float | None = field(default=None, kw_only=True)
    mass_right: float | None = field(default=None, kw_only=True)

    def __post_init__(self):
        defaults = {"right": "left", "mass_left": "mass", "mass_right": "mass_left"}
        for name in ("width", "left", "right", "mass", "mass_left", "mass_right"):
            value = getattr(self, name)
            value = getattr(self, defaults[name]) if value is None and name in defaults else value
            number = _positive(name, value, infinite=name in ("left", "right"))
            object.__setattr__(self, name, number)
        if math.isinf(self.rim):
            raise InputError(
                "left and right are both inf; write infinite_well_energies(width, count, mass)"
            )
        self._strength  # noqa: B018  refuses an overlarge well here, not at first use

    @property
    def rim(self):
        """The lower of the two rims; levels lie below it."""
        return min(self.left, self.right)

    @cached_property
    def count(self):
        """Number of bound levels; 0 is possible when the rims differ."""
        return _count(*self._strength, self._rim_phase / 2)

    @cached_property
    def energies(self):
        """Levels above the bottom, ascending; shape (count,)."""
        return self.rim * self._cos_phi**2

    @cached_property
    def binding(self):
        """Distance of each level to the lower rim; shape (count,)."""
        return self.rim * np.sin(self._phi) ** 2

    @cached_property
    def wave_number(self):
        """k inside; shape (count,)."""
        return math.sqrt(2 * self.mass * self.rim) * self._cos_phi

    @cached_property
    def kappa(self):
        """Decay constants to the left and to the right; shape (2, count). Inf behind a wall."""
        s = np.sin(self._phi)
        full = [math.sqrt(2 * side.mass * side.height) for side in self._sides]
        return np.array([top * side.decay(s) for top, side in zip(full, self._sides, strict=True)])

    def probability_inside(self, n):
        """Probability to be found between the walls, for level `n` (int or array of int)."""
        return (self._inside / self._norm)[_checked_levels(n, self.count)]

    def psi(self, n, x):
        """Normalised wave functions; positive in the leftmost lobe.

        Parameters
        ----------
        n : int or array of int
            Which levels.
        x : float or array of float
            Positions, 0 in the middle of the well.

        Returns
        -------
        array of float, shape of `n` + shape of `x`

        Raises
        ------
        InputError
            The well does not bind a level `n`.

        Examples
        --------
        >>> SquareWell(2.0, 12.5).psi([0, 1], [-0.5, 0.5]).round(6)
        array([[ 0.722775,  0.722775],
               [ 0.866885, -0.866885]])
        """
        n, x = _checked_levels(n, self.count), np.asarray(x, float)
        level, position = n.reshape(-1, 1), x.ravel()
        # Counting from the nearer wall halves the rounding of the phase and keeps parity exact.
        side = (position > 0).astype(int)
        distance = np.abs(position) - self.width / 2
        phase, kappa = self._wall_phase[side, level], self.kappa[side, level]
        # Only outside: behind a wall kappa is inf, and inf times 0 is no number.
        decay = np.multiply(kappa, distance, out=np.zeros_like(kappa), where=distance > 0)
        psi = np.sin(phase - self.wave_number[level] * np.minimum(distance, 0)) * np.exp(-decay)
        sign = 1 - 2 * (side * level % 2)
        return (sign * psi / np.sqrt(self._norm[level])).reshape(n.shape + x.shape)

    @cached_property
    def _strength(self):
        """(width/2) sqrt(2 mass rim) as a double and what its rounding left over."""
        square = Fraction(self.mass) * Fraction(self.rim) * Fraction(self.width) ** 2 / 2
        if square > _LARGEST_STRENGTH**2:
            raise InputError(
                f"the strength (width/2) sqrt(2 mass rim) of this well is above 1e8: {self}; "
                "make it narrower, shallower or lighter"
            )
        strength = math.sqrt(square)
        return strength, float((square - Fraction(strength) ** 2) / (2 * Fraction(strength)))

    @cached_property
    def _sides(self):
        return tuple(
            _Side(self.rim, height, self.mass, mass)
            for height, mass in ((self.left, self.mass_left), (self.right, self.mass_right))
        )

    @property
    def _rim_phase(self):  # what the higher side takes from the phase at the lower rim
        return sum(side.rim_phase for side in self._sides)

    @cached_property
    def _phi(self):
        """Angle from the rim: binding = rim sin^2(phi)."""
        strength, leftover = self._strength

        def phase(phi):
            s, c = np.sin(phi), np.cos(phi)
            value = 4 * strength * np.sin(phi / 2) ** 2
            slope = 2 * strength * s
            for side in self._sides:
                value, slope = value + side.below_rim(s, c), slope + side.slope(s, c)
            return value, slope

        n = np.arange(self.count)
        above = 2 * _above_threshold(strength, n, leftover - self._rim_phase / 2)
        ratio = max(side.ratio for side in self._sides)
        return _solve_increasing(phase, above, _quadratic_guess(ratio, 2 * strength, above))

    @cached_property
    def _cos_phi(self):
        """cos(phi) from its complement, so that energy = rim cos^2(phi) is accurate when small."""
        strength = self._strength[0]

        def phase(theta):
            s, c = np.cos(theta), np.sin(theta)
            value, slope = 2 * strength * c, 2 * strength * s
            for side in self._sides:
                value, slope = value + side.wall_phase(s, c), slope + side.slope(s, c)
            return value, slope

        turns = np.arange(1, self.count + 1) * np.pi
        guess = np.arcsin(np.minimum(turns / (2 * strength + np.pi), 1.0))
        return np.sin(_solve_increasing(phase, turns, guess))

    @cached_property
    def _wall_phase(self):
        """Phase of sin(k x + ...) at each wall, counted inwards from it; shape (2, count)."""
        s = np.sin(self._phi)
        return np.array([side.wall_phase(s, self._cos_phi) for side in self._sides])

    @cached_property
    def _inside(self):
        """Integral of the unnormalised psi^2 between the walls; its crest is 1."""
        return self.width / 2 + np.sin(2 * self._wall_phase).sum(axis=0) / (4 * self.wave_number)

    @cached_property
    def _norm(self):
        return self._inside + (np.sin(self._wall_phase) ** 2 / (2 * self.kappa)).sum(axis=0)


class _Side:
    """What one side adds to the phase, as a function of s = sin(phi), c = cos(phi).

    kappa m / (k m_side) = ratio sqrt(excess + share s^2) / (sqrt(share) c), with
    ratio = sqrt(m / m_side), share = rim / height, excess = 1 - share. All of it stays finite for
    a wall, where share = 0.
    """

    def __init__(self, rim, height, mass_inside, mass):
        self.height, self.mass = height, mass
        self.ratio = math.sqrt(mass_inside / mass)
        self.share = rim / height
        self.excess = 1.0 if math.isinf(height) else (height - rim) / height
        self.rim_phase = math.atan2(self.ratio * math.sqrt(self.excess), math.sqrt(self.share))

    def decay(self, s):
        """kappa over its value at the bottom of the well."""
        return np.sqrt(self.excess + self.share * s**2)

    def wall_phase(self, s, c):
        """arctan(k m_side / (kappa m)), 0 at the bottom of the well."""
        return np.arctan2(math.sqrt(self.share) * c, self.ratio * self.decay(s))

    def below_rim(self, s, c):
        """arctan(kappa m / (k m_side)) less its value at the rim, 0 at the rim.

        The difference of the two arctangents is written as one, without cancellation.
        """
        at_rim, here = self.ratio * math.sqrt(self.excess), self.ratio * self.decay(s)
        return np.arctan2(
            math.sqrt(self.share) * (self.ratio * s) ** 2,
            (here + at_rim * c) * (self.share * c + here * at_rim),
        )

    def slope(self, s, c):
        """Derivative of `below_rim` by phi, which is also that of `wall_phase` by pi/2 - phi."""
        here, weighted = self.ratio * self.decay(s), self.share * c**2
        turn = (self.ratio**2 * weighted + here**2) / (weighted + here**2)
        return math.sqrt(self.share) * s / here * turn


def _above_threshold(z, n, leftover=0.0):
    """z + leftover - n pi/2 to full relative precision; n below 2^27, shape of `n`."""
    for piece in _HALF_PI:
        # The product is exact, and so is a difference of nearly equal numbers (P. H. Sterbenz,
        # Floating-Point Computation, 1974): nothing is lost where it would count.
        z = z - n * piece
    return z + leftover


def _count(strength, leftover=0.0, rim_phase=0.0):
    """Number of n >= 0 with n pi/2 + rim_phase < strength + leftover."""
    nearest = round((strength - rim_phase) / (np.pi / 2))
    return nearest + int(_above_threshold(strength, nearest, leftover - rim_phase) > 0)


def _quadratic_guess(slope, curvature, target):
    """Root of slope phi + curvature phi^2/2 = target, in the form that does not cancel."""
    return np.minimum(2 * target / (slope + np.sqrt(slope**2 + 2 * curvature * target)), 1.5)


def _solve_increasing(phase, target, angle):
    """Angles in (0, pi/2) where a rising `phase` meets `target`: Newton kept inside a bracket.

    `phase` returns value and slope. Once a step is below 1e-10 of the angle, the next one would
    be below rounding, since Newton's error is squared by each.
    """
    low, high = np.zeros_like(angle), np.full_like(angle, np.pi / 2)
    for _ in range(200):
        value, slope = phase(angle)
        excess = value - target
        low, high = np.where(excess <= 0, angle, low), np.where(excess >= 0, angle, high)
        step = angle - excess / slope
        # A step to the edge of the bracket is allowed: at convergence it stays where it is.
        step = np.where((step >= low) & (step <= high), step, (low + high) / 2)
        done, angle = np.abs(step - angle) <= 1e-10 * angle, step
        if np.all(done):
            return angle
    raise ArithmeticError("the phase condition of a square well did not converge")


def _checked_strength(z0):
    number = _number(z0)
    if 0 <= number <= _LARGEST_STRENGTH:
        return number
    raise InputError(f"z0 must be a strength between 0 and 1e8; found {z0!r}")


def _checked_levels(n, count):
    """`n` as an array of int, every one a bound level."""
    n = np.arange(count) if n is None else np.asarray(n)
    if n.size and (n.dtype.kind not in "iu" or n.min() < 0 or n.max() >= count):
        allowed = f"be whole numbers from 0 to {count - 1}" if count else "be left out: none bound"
        raise InputError(f"n must {allowed}; found {n}")
    return n.astype(int)


def _positive(name, value, infinite=False):
    number = _number(value)
    if number > 0 and (infinite or number < math.inf):
        return number
    raise InputError(f"{name} must be a positive number; found {value!r}")


def _number(value):
    try:
        return float(value)
    except (TypeError, ValueError):
        return math.nan  # refused by every range check
