"""Potentials whose levels have a closed form, or one transcendental equation, each with its source.

Every function returns energies in ascending order; the potential beside it is the same V(x) for
a solver to be fed with. None of them knows a grid or a solver. Hartree atomic units, hbar = 1:
H = -(1/(2 m)) d^2/dx^2 + V. All values are within a few units in the last place.
"""

import math
from fractions import Fraction
from typing import NamedTuple

import numpy as np
from scipy.optimize import brentq
from scipy.special import ai_zeros, airy

from eigen1d.errors import InputError


def harmonic(omega, count):
    """Levels omega (n + 1/2) of the harmonic oscillator; the mass does not enter.

    Parameters
    ----------
    omega : float
        Angular frequency, positive.
    count : int
        How many levels.

    Returns
    -------
    array of float, shape (count,)

    Raises
    ------
    InputError
        An `omega` that is not positive or a `count` that is not a whole number >= 0.

    References
    ----------
    .. [1] E. Schroedinger, Ann. Phys. 384 (1926) 489.

    Examples
    --------
    >>> harmonic(2.0, 3)
    array([1., 3., 5.])
    """
    return _positive("omega", omega) * (np.arange(_whole(count)) + 0.5)


def harmonic_potential(x, omega, mass=1.0):
    """V(x) = mass omega^2 x^2 / 2.

    Examples
    --------
    >>> harmonic_potential(3.0, 2.0)
    18.0
    """
    return 0.5 * mass * omega**2 * x**2


def morse(depth, a, mass=1.0):
    """Bound levels of `morse_potential`, counted from the dissociation limit.

    Parameters
    ----------
    depth, a, mass : float
        Depth D, inverse range a, mass m; positive.

    Returns
    -------
    array of float, shape (number of bound levels,)
        -(a^2 / 2 m) (lambda - n - 1/2)^2 with lambda = sqrt(2 m D) / a, for n + 1/2 < lambda. A
        state at exactly zero energy is not bound. The comparison is exact, and each energy is
        accurate relative to itself. May be empty.

    Raises
    ------
    InputError
        An argument that is not positive.

    References
    ----------
    .. [1] P. M. Morse, Phys. Rev. 34 (1929) 57.

    Examples
    --------
    >>> morse(4.5, 1.0)                              # lambda = 3
    array([-3.125, -1.125, -0.125])
    """
    depth, a, mass = _positive("depth", depth), _positive("a", a), _positive("mass", mass)
    # (2 lambda)^2 exactly, for its distance to (2 n + 1)^2 may be small.
    square = 8 * Fraction(mass) * Fraction(depth) / Fraction(a) ** 2
    twice = math.sqrt(square)
    energies = []
    odd = 1
    while odd**2 < square:
        distance = float((square - odd**2) / 2) / (twice + odd)  # lambda - n - 1/2
        energies.append(-((a * distance) ** 2) / (2 * mass))
        odd += 2
    return np.array(energies)


def morse_potential(x, depth, a, center=0.0):
    """V(x) = depth (exp(-2 a (x - center)) - 2 exp(-a (x - center))).

    Examples
    --------
    >>> float(morse_potential(1.5, 4.5, 1.0, center=1.5))
    -4.5
    """
    decay = np.exp(-a * (x - center))
    return depth * decay * (decay - 2)


def sech_squared(lambda_, alpha=1.0, mass=1.0):
    """Bound levels of `sech_squared_potential`.

    Parameters
    ----------
    lambda_ : float
        Strength; the well is lambda (lambda + 1) alpha^2 / (2 mass) deep. Need not be whole.
    alpha, mass : float
        Inverse width and mass. All three positive.

    Returns
    -------
    array of float, shape (ceil(lambda),)
        -(alpha^2 / 2 m) (lambda - n)^2 for n < lambda. For a whole lambda the state n = lambda
        has zero energy and a constant tail; it is not bound and not listed.

    Raises
    ------
    InputError
        An argument that is not positive.

    References
    ----------
    .. [1] G. Poeschl, E. Teller, Z. Phys. 83 (1933) 143.

    Examples
    --------
    >>> sech_squared(2), sech_squared(2.5)
    (array([-2. , -0.5]), array([-3.125, -1.125, -0.125]))
    """
    lambda_, alpha = _positive("lambda_", lambda_), _positive("alpha", alpha)
    n = np.arange(math.ceil(lambda_))
    return -((alpha * (lambda_ - n)) ** 2) / (2 * _positive("mass", mass))


def sech_squared_potential(x, lambda_, alpha=1.0, mass=1.0):
    """V(x) = -lambda (lambda + 1) alpha^2 / (2 mass) / cosh^2(alpha x).

    Examples
    --------
    >>> float(sech_squared_potential(0.0, 2))
    -3.0
    """
    # 1/cosh through the decaying exponential: cosh itself overflows from alpha x = 710.
    decay = np.exp(-np.abs(alpha * x))
    sech = 2 * decay / (1 + decay**2)
    return -lambda_ * (lambda_ + 1) * alpha**2 / (2 * mass) * sech**2


def triangular_wall(slope, count, mass=1.0):
    """Levels of V = slope x for x > 0 behind a wall at x = 0: the zeros of the Airy function.

    Parameters
    ----------
    slope, mass : float
        Positive.
    count : int
        How many levels.

    Returns
    -------
    array of float, shape (count,)
        -a_(n+1) (slope^2 / 2 mass)^(1/3), with Ai(a_k) = 0.

    Raises
    ------
    InputError
        A `slope` or `mass` that is not positive, or a `count` that is not a whole number >= 0.

    References
    ----------
    .. [1] F. Stern, Phys. Rev. B 5 (1972) 4891: the triangular well of an inversion layer.
    .. [2] M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions (1964), sec. 10.4.

    Examples
    --------
    >>> triangular_wall(1.0, 3, mass=0.5).round(6)
    array([2.338107, 4.087949, 5.52056 ])
    """
    scale = np.cbrt(_positive("slope", slope) ** 2 / (2 * _positive("mass", mass)))
    if _whole(count) == 0:
        return np.empty(0)
    zeros = ai_zeros(int(count))[0]  # off by up to 1e-12; Newton's method squares that
    value, derivative = airy(zeros)[:2]
    return scale * -(zeros - value / derivative)


class Doublets(NamedTuple):
    """Levels of a symmetric double well.

    `energies`, shape (count,): ascending, above the bottom; even and odd alternate.
    `splittings`, shape (count // 2,): odd level 2 j + 1 less even level 2 j, accurate relative to
    itself even where both energies are the same double.
    """

    energies: np.ndarray
    splittings: np.ndarray


def double_square_well(well_width, barrier_width, height, mass=1.0):
    """Bound levels of two equal square wells with a barrier as high as the outside.

    Parameters
    ----------
    well_width, barrier_width : float
        Width w of each well and b of the barrier between them; positive.
    height : float
        V of the barrier and of both outer regions; V = 0 in the wells.
    mass : float
        The same everywhere.

    Returns
    -------
    Doublets
        The levels below `height`, and their splittings.

    Raises
    ------
    InputError
        An argument that is not positive.

    Notes
    -----
    With k = K cos(phi), kappa = K sin(phi), K = sqrt(2 m V), psi in the barrier is cosh(kappa x)
    or sinh(kappa x), so with T = tanh(kappa b/2) for even and its inverse for odd states

        k w = n pi + arctan(kappa / k) + arctan(T kappa / k) .

    Even n bound: K w > n pi. Odd: K w > n pi + arctan(2 / (K b)), as T kappa tends to 2/b at the
    rim. The splitting comes from the difference of the two equations, written so that only tiny
    positive terms of order exp(-kappa b) are left. Its precision is that of exp(-kappa b), a
    relative kappa b times the double spacing; for a doublet that emerges from the rim it is that
    of K w - n pi.

    References
    ----------
    .. [1] C. Cohen-Tannoudji, B. Diu, F. Laloe, Quantum Mechanics (1977), complement G_IV: the
       square double well by parity, there between infinite outer walls.

    Examples
    --------
    >>> double_square_well(2.0, 2.0, 10.0).splittings.round(8)
    array([0.00010807, 0.0011817 , 0.01743694])
    >>> energies, splittings = double_square_well(2.0, 60.0, 10.0)
    >>> energies[:2], f"{splittings[0]:.6e}"
    (array([0.81974007, 0.81974007]), '1.260624e-112')
    """
    width = _positive("well_width", well_width)
    wave_number = math.sqrt(2 * _positive("mass", mass) * _positive("height", height))
    well = _HalfDoubleWell(
        wave_number * width, wave_number * _positive("barrier_width", barrier_width) / 2
    )
    energies, splittings = [], []
    n = 0
    while well.above_threshold(n, odd=False) > 0:
        even = well.solve(n, odd=False)
        energies.append(height * math.sin(even.theta) ** 2)
        if well.above_threshold(n, odd=True) > 0:
            splittings.append(height * well.splitting(even, well.solve(n, odd=True)))
            energies.append(energies[-1] + splittings[-1])
        n += 1
    return Doublets(np.array(energies), np.array(splittings))


class _Angles(NamedTuple):
    phi: float  # from the rim: binding / height = sin^2(phi)
    theta: float  # pi/2 - phi, from the bottom: energy / height = sin^2(theta)


class _HalfDoubleWell:
    """The right half of a double well: `strength` K w, `barrier` K b/2."""

    def __init__(self, strength, barrier):
        self.strength, self.barrier = strength, barrier

    def above_threshold(self, n, odd):
        """K w less the least value that binds the state."""
        at_rim = math.atan2(1.0, self.barrier) if odd else 0.0
        return self.strength - n * math.pi - at_rim

    def solve(self, n, odd):
        """Both angles of one level, each from an equation with only positive terms."""

        def from_rim(phi):
            s, c = math.sin(phi), math.cos(phi)
            well = 2 * self.strength * math.sin(phi / 2) ** 2 + phi
            return well + self._barrier_phase(s, c, odd) - self.above_threshold(n, odd)

        def from_bottom(theta):
            s, c = math.cos(theta), math.sin(theta)
            into_barrier = s / math.tanh(self.barrier * s) if odd else s * self._tanh(s)
            return self.strength * c + theta + math.atan2(c, into_barrier) - (n + 1) * math.pi

        phi = _root(from_rim, math.pi / 2)
        # In the upper half of the well the complement of phi is just as accurate.
        return _Angles(
            phi, math.pi / 2 - phi if phi < math.pi / 4 else _root(from_bottom, math.pi / 2)
        )

    def splitting(self, even, odd):
        """(E_odd - E_even) / height = cos^2(phi_odd) - cos^2(phi_even), without cancellation.

        With d = phi_even - phi_odd and the mean angle s, the two phase conditions differ by
        2 K w sin(s) sin(d/2) + 2 d = arctan(t (1/T - 1) / (1 + t^2 / T)) at the odd angle
        + arctan(t (1 - T) / (1 + t^2 T)) at the even one, t = tan(phi).
        """

        def correction(phi, sign):
            # 1 - tanh(y) = 2/(exp(2y) + 1), coth(y) - 1 = 2/(exp(2y) - 1); expm1 because a barrier
            # can be so thin that exp(2y) rounds to 1 (1e-17 in the tests).
            s, c = math.sin(phi), math.cos(phi)
            decay = math.exp(-2 * self.barrier * s)
            whole = 1 + decay if sign > 0 else -math.expm1(-2 * self.barrier * s)
            small = 2 * decay / whole
            ratio = 1 - sign * small
            return math.atan2(s * c * small, c * c + s * s * ratio)

        right = correction(odd.phi, -1) + correction(even.phi, 1)
        slope = 2 * self.strength * math.sin((even.phi + odd.phi) / 2)
        difference = _root(lambda d: slope * math.sin(d / 2) + 2 * d - right, right)
        return math.sin(even.theta + odd.theta) * math.sin(difference)

    def _tanh(self, s):
        return math.tanh(self.barrier * s)

    def _barrier_phase(self, s, c, odd):
        """arctan(T s / c) less its value at the rim."""
        if not odd:
            return math.atan2(s * self._tanh(s), c)
        at_rim = 1 / self.barrier
        rise = _coth_excess(self.barrier * s) * at_rim  # s coth(barrier s) less its value at s = 0
        here = at_rim + rise
        # at_rim s^2 / (1 + c) is at_rim (1 - c): here - at_rim c without cancellation.
        return math.atan2(rise + at_rim * s * s / (1 + c), c + here * at_rim)


def _root(rising, end):
    """Where a rising function is 0 between 0 and `end`, to a relative 1e-15."""
    return brentq(rising, 0.0, end, xtol=1e-300, rtol=1e-15)


def _coth_excess(y):
    """y coth(y) - 1 for y >= 0, accurate when small.

    Lambert's continued fraction y coth(y) = 1 + y^2/(3 + y^2/(5 + ...)): positive terms only, and
    exact to rounding with 20 of them for y below 3.
    """
    if y > 3:
        return y / math.tanh(y) - 1
    fraction = 41.0
    for odd in range(39, 1, -2):
        fraction = odd + y * y / fraction
    return y * y / fraction


def _positive(name, value):
    try:
        number = float(value)
    except (TypeError, ValueError):
        number = math.nan
    if 0 < number < math.inf:
        return number
    raise InputError(f"{name} must be a positive number; found {value!r}")


def _whole(count):
    if isinstance(count, (int, np.integer)) and count >= 0:
        return int(count)
    raise InputError(f"count must be a whole number of levels, 0 or more; found {count!r}")
