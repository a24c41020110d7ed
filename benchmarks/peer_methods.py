"""Four other ways to bound levels, some twenty lines each, with numpy and scipy alone.

Each takes pieces (a list of `Piece` from left to right, psi = 0 at both ends), a number of
intervals or points n, and how many levels are wanted; none knows eigen1d. They are as good as so
few lines allow: jumps lie on grid points, where V is averaged and the mass is never asked; matrices
are symmetric where the method has them so; each solver is the fastest of numpy's and scipy's.
"""

from typing import NamedTuple

import numpy as np
from scipy.linalg import eigh_tridiagonal, toeplitz


class Piece(NamedTuple):
    """V and the mass between two places, each a function of an array of positions; hbar = 1."""

    low: float
    high: float
    V: object
    mass: object


def shared(pieces, n):
    """Share n intervals out among the pieces, by their widths; one or more each."""
    width = np.array([piece.high - piece.low for piece in pieces])
    return np.maximum(1, np.rint(n * width / width.sum()).astype(int))


# Three-point differences --------------------------------------------------------------------------


def tridiagonal(pieces, counts):
    """Three-point differences of the flux psi'/m: diagonal and off-diagonal, symmetric."""
    first, stiffness = 0, []
    weight, weighted = np.zeros(counts.sum() + 1), np.zeros(counts.sum() + 1)
    for piece, count in zip(pieces, counts, strict=True):
        x, h = np.linspace(piece.low, piece.high, count + 1, retstep=True)
        share = np.full(count + 1, h)
        share[[0, -1]] /= 2
        weight[first : first + count + 1] += share
        weighted[first : first + count + 1] += share * piece.V(x)
        stiffness.append(0.5 / (h * piece.mass(x[:-1] + h / 2)))
        first += count
    k, w = np.concatenate(stiffness), weight[1:-1]
    return (k[:-1] + k[1:] + weighted[1:-1]) / w, -k[1:-1] / np.sqrt(w[:-1] * w[1:])


def lowest(matrix, count, driver="stebz", precision=0.0):
    """Lowest eigenvalues of a tridiagonal matrix by a driver of scipy; precision 0 is full."""
    some = {} if driver == "sterf" else {"select": "i", "select_range": (0, count - 1)}
    return eigh_tridiagonal(
        *matrix, eigvals_only=True, check_finite=False, lapack_driver=driver, tol=precision, **some
    )[:count]


def differences(pieces, n, count, driver="stebz", precision=0.0):
    """Three-point differences on n intervals: error of order 1 / n^2."""
    return lowest(tridiagonal(pieces, shared(pieces, n)), count, driver, precision)


def extrapolated(pieces, n, count, first=1, grids=4, driver="stebz", precision=0.0):
    """The same on grids of n times first, first + 1, ... intervals, extrapolated to h^2 = 0."""
    base, multiples = shared(pieces, n), first + np.arange(grids)
    energies = [lowest(tridiagonal(pieces, base * k), count, driver, precision) for k in multiples]
    h2 = 1.0 / multiples**2  # weights of Lagrange's polynomial at h = 0
    others = [np.delete(h2, i) for i in range(grids)]
    weights = [np.prod(other / (other - own)) for other, own in zip(others, h2, strict=True)]
    return np.array(weights) @ np.array(energies)


# Sinc functions -----------------------------------------------------------------------------------


def sinc(pieces, n, count):
    """A basis of n sinc functions, V on its points; by first derivatives if the mass varies."""
    low, high = pieces[0].low, pieces[-1].high
    h = (high - low) / (n + 1)
    x = low + h * np.arange(1, n + 1)
    V, mass = sampled(pieces, x, "V"), sampled(pieces, x, "mass")
    i = np.arange(1, n)
    sign = 1.0 - 2.0 * (i % 2)
    if (mass == mass[0]).all():
        matrix = toeplitz(np.append(np.pi**2 / 6, sign / i**2) / (h**2 * mass[0]))
    else:
        slope = toeplitz(np.append(0.0, sign / i), np.append(0.0, -sign / i)) / h
        matrix = (slope.T / (2 * mass)) @ slope
    matrix[np.arange(n), np.arange(n)] += V
    return np.linalg.eigvalsh(matrix)[:count]  # faster than scipy's by index for all n below 200


def sampled(pieces, x, name):
    """V or the mass at ascending positions."""
    cut = np.searchsorted(x, [piece.high for piece in pieces[:-1]])
    parts = zip(pieces, np.split(x, cut), strict=True)
    return np.concatenate([getattr(piece, name)(part) for piece, part in parts])


# Chebyshev collocation ----------------------------------------------------------------------------


def chebyshev(pieces, n, count):
    """Collocation on n Chebyshev intervals a piece; psi and psi'/m continuous between pieces."""
    D, t = derivative(n)
    size = n * len(pieces) + 1
    matrix, jump = np.zeros((size, size)), np.zeros((size, size))
    for i, piece in enumerate(pieces):
        at, scale = slice(i * n, i * n + n + 1), 2 / (piece.high - piece.low)
        x = piece.low + (t + 1) / scale
        flux = scale * D / piece.mass(x)[:, None]
        matrix[at, at] = -0.5 * scale * D @ flux
        matrix[at, at][np.diag_indices(n + 1)] += piece.V(x)
        jump[i * n, at] -= flux[0]
        jump[i * n + n, at] += flux[-1]
    joints = n * np.arange(1, len(pieces))
    inside = np.delete(np.arange(size), n * np.arange(len(pieces) + 1))
    reduced = matrix[np.ix_(inside, inside)]
    if joints.size:  # no jump of the flux: psi at the joints follows from psi inside
        follows = np.linalg.solve(jump[np.ix_(joints, joints)], jump[np.ix_(joints, inside)])
        reduced -= matrix[np.ix_(inside, joints)] @ follows
    return np.sort(np.linalg.eigvals(reduced).real)[:count]


def chebyshev_whole(pieces, n, count):
    """The same with one polynomial across all pieces, the mass and V taken on its points."""
    whole = Piece(
        pieces[0].low,
        pieces[-1].high,
        lambda x: sampled(pieces, x, "V"),
        lambda x: sampled(pieces, x, "mass"),
    )
    return chebyshev([whole], n, count)


def derivative(n):
    """Matrix of the derivative at the Chebyshev points, ascending, and the points.

    L. N. Trefethen, Spectral Methods in MATLAB (2000), ch. 6.
    """
    t = -np.cos(np.pi * np.arange(n + 1) / n)
    c = np.where(np.arange(n + 1) % n == 0, 2.0, 1.0) * (-1.0) ** np.arange(n + 1)
    D = np.outer(c, 1 / c) / (t[:, None] - t + np.eye(n + 1))
    return D - np.diag(D.sum(axis=1)), t
