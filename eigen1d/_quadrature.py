"""Integrals of products of wave functions: Gauss-Legendre on cells, Gauss-Laguerre on tails."""

from dataclasses import dataclass

import numpy as np
from numpy.polynomial.laguerre import laggauss
from numpy.polynomial.legendre import leggauss

# Points a piece, and the largest phase sqrt(2 m |V - E|) h of a wave function on it. A product of
# two wave functions varies as exp(2 i phase): with these pairs the rule's own error term,
# (2 phase)^(2q) (q!)^4 / ((2q + 1) (2q)!^3), is 4e-20 for 12 points and 1e-15 for 4.
_FINE = 12, 3.0
_COARSE = 4, 0.1
_CHUNK = 1 << 16  # pieces evaluated at once: bounds memory for tables of millions of rows
_VALUES = 1 << 22  # pieces times levels at once, at most
_THICK = 30.0  # decay lengths of a barrier whose inside is not worth a piece for each
_TAIL_POINTS = 40  # exact for polynomials up to degree 79 times the exponential


def pieces(profile, energies, breaks=(), span=None):
    """Yield points and weights of a quadrature over the cells, a chunk at a time, left to right.

    Parameters
    ----------
    profile : Profile
    energies : ndarray
        Every piece is short against the wavelength and the decay length at all of them.
    breaks : array_like, optional
        Further places that no piece may straddle.
    span : (float, float), optional
        Only this part of the cells.

    Yields
    ------
    x, weight : ndarray
        The integral of f is the sum over all chunks of weight @ f(x).
    """
    if energies.size == 0:
        return
    ends = profile.x if len(breaks) == 0 else np.union1d(profile.x, breaks)
    if span is not None:
        ends = np.concatenate([[span[0]], ends[(ends > span[0]) & (ends < span[1])], [span[1]]])
    ends, barrier = _with_skins(profile, ends, energies)
    chunk = int(np.clip(_VALUES // energies.size, 64, _CHUNK))
    for start in range(0, ends.size - 1, chunk):
        part = ends[start : start + chunk + 1]
        left, width, phase = part[:-1], np.diff(part), _phase(profile, part, energies)
        phase[barrier[start : start + chunk]] = 0.0
        short = (phase <= _COARSE[1]) & ~barrier[start : start + chunk]
        for points, chosen, limit in (
            (_COARSE[0], short, _COARSE[1]),
            (_FINE[0], ~short, _FINE[1]),
        ):
            yield from _gauss(points, left[chosen], width[chosen], phase[chosen] / limit, chunk)


def _with_skins(profile, ends, energies):
    """Cut long cells that all levels tunnel into; return the ends, and which pieces are of those.

    There psi falls off from both ends, and pieces may grow with the distance d from the nearer one:
    on a piece from d to 2 d the integrand falls by exp(-2 kappa d), so where a piece is long
    nothing is left. A barrier of a million decay lengths takes 40 pieces.
    """
    phase = _phase(profile, ends, energies)
    barrier = phase > _THICK
    if barrier.any():
        cell, _ = profile.cell_of(0.5 * (ends[:-1] + ends[1:]))
        V = profile.V_cells[cell]
        barrier &= V[:, 0] - np.abs(V[:, 1:]).sum(axis=1) > energies.max()
    if not barrier.any():
        return ends, barrier
    doublings = np.ceil(np.log2(phase[barrier] / _FINE[1])).astype(int)
    share = 0.5 ** np.arange(1, doublings.max() + 1)
    owner, step = np.nonzero(np.arange(share.size) < doublings[:, None])
    left, width = ends[:-1][barrier][owner], np.diff(ends)[barrier][owner]
    cuts = np.concatenate([left + width * share[step], left + width * (1 - share[step])])
    inner = np.union1d(ends, cuts)
    return inner, barrier[np.searchsorted(ends, inner[:-1], side="right") - 1]


def _gauss(points, left, width, parts, chunk):
    parts = np.maximum(np.ceil(parts), 1).astype(int)
    node, weight = leggauss(points)
    node, weight = 0.5 * (node + 1), 0.5 * weight
    stop = np.cumsum(parts)
    for low in range(0, int(stop[-1]) if stop.size else 0, chunk):
        index = np.arange(low, min(low + chunk, stop[-1]))
        piece = np.searchsorted(stop, index, side="right")
        h = width[piece] / parts[piece]
        start = left[piece] + (index - (stop[piece] - parts[piece])) * h
        yield (start[:, None] + node * h[:, None]).ravel(), (weight * h[:, None]).ravel()


def _phase(profile, ends, energies):
    """Upper bound of sqrt(2 m |V - E|) h over each piece between `ends` and all energies."""
    cell, _ = profile.cell_of(0.5 * (ends[:-1] + ends[1:]))
    V, mass = profile.V_cells[cell], profile.mass_cells[cell]
    spread = np.abs(V[:, 1:]).sum(axis=1)
    reach = np.maximum(np.abs(V[:, 0] - energies.min()), np.abs(V[:, 0] - energies.max())) + spread
    heaviest = np.abs(mass).sum(axis=1) * profile.units.electron_mass
    if profile.alpha_cells is not None:
        heaviest = heaviest * (1 + np.abs(profile.alpha_cells[cell]).sum(axis=1) * reach)
    return np.sqrt(2 * heaviest * reach) * np.diff(ends)


@dataclass(frozen=True, eq=False)
class Tail:
    """The exponential tails of all levels beyond one open edge: psi = amplitude exp(-kappa depth).

    Attributes
    ----------
    x : float
        Where the tail begins.
    side : {-1, 1}
        -1 on the left, 1 on the right.
    kappa, amplitude : ndarray, shape (count,)
    alpha_weight : ndarray, shape (count,)
        (m alpha / 2) (phi / psi)^2: what an energy-dependent mass adds to psi^2 in `slope_V`.
    """

    x: float
    side: int
    kappa: np.ndarray
    amplitude: np.ndarray
    alpha_weight: np.ndarray

    @classmethod
    def beyond(cls, edge, x, side, electron_mass, energies, amplitude):
        """Make the tails from an edge: kappa = sqrt(2 m (V - E))."""
        own = edge.mass * electron_mass
        mass = own * (1 + edge.alpha * (energies - edge.V))
        kappa = np.sqrt(2 * mass * np.maximum(edge.V - energies, 0.0))
        # A level at the edge to the last digit would give a tail without end: it is bound by less
        # than the spacing of doubles there, which stands for what it is bound by.
        kappa = np.maximum(kappa, np.sqrt(mass * max(np.spacing(abs(edge.V)), 1e-300)))
        return cls(x, side, kappa, amplitude, 0.5 * own * edge.alpha * (kappa / mass) ** 2)

    def depth(self, x):
        """How far x lies beyond the edge; negative inside."""
        return self.side * (x - self.x)

    def psi(self, x):
        """Wave functions at x beyond the edge, shape (count, points)."""
        return self.amplitude[:, None] * np.exp(-np.outer(self.kappa, self.depth(x)))

    def squares(self, a=-np.inf, b=np.inf):
        """Integral of psi^2 over the part of the tail between a and b, shape (count,)."""
        near, far = sorted((self.depth(a), self.depth(b)))
        near, far = max(near, 0.0), max(far, 0.0)
        rate = 2 * self.kappa
        # exp(-r near) - exp(-r far), without cancellation when the stretch is short.
        share = -np.exp(-rate * near) * np.expm1(-rate * (far - near)) if far > near else 0.0
        return self.amplitude**2 * share / rate

    def weighted_squares(self):
        """Integral of psi^2 + (m alpha / 2) phi^2, shape (count,)."""
        return self.squares() * (1 + self.alpha_weight)

    def expect(self, f):
        """Integral of psi^2 f, shape (count,)."""
        return self.amplitude**2 * self._integral(f, 2 * self.kappa)

    def matrix(self, f):
        """Integral of psi_i f psi_j, shape (count, count)."""
        rate = self.kappa[:, None] + self.kappa
        return np.outer(self.amplitude, self.amplitude) * self._integral(f, rate)

    def _integral(self, f, rate):
        """Integral of f exp(-rate depth) over the tail, for an array of rates."""
        node, weight = laggauss(_TAIL_POINTS)
        x = self.x + self.side * node / rate[..., None]
        values = np.broadcast_to(np.asarray(f(x.ravel()), dtype=float), x.size).reshape(x.shape)
        return values @ weight / rate
