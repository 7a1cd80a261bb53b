"""Functions of frequency over a band, interpolated from Taylor series at a few nodes.

A node carries the value and several exact derivatives, so the interpolant is a Hermite
one; it is stored as a Chebyshev series in the scaled frequency, which makes values and
derivatives anywhere in the band a matter of one recurrence.

References
----------
L. N. Trefethen, Approximation Theory and Approximation Practice (SIAM, 2013), chapters
3 and 16. R. E. Caflisch and others use Leja points likewise: F. Leja, Ann. Polon. Math.
4, 8 (1957), for a sequence of nodes that can be stopped anywhere.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.polynomial import chebyshev
from scipy.fft import dct

__all__ = ["Band", "BandFunction", "leja_nodes"]


@dataclass(frozen=True, slots=True)
class Band:
    """A band of angular frequency, rad/ps."""

    low: float
    high: float

    @property
    def centre(self) -> float:
        """Middle of the band, rad/ps."""
        return 0.5 * (self.low + self.high)

    @property
    def half_width(self) -> float:
        """Half the band's width, rad/ps."""
        return 0.5 * (self.high - self.low)

    def scaled(self, omega: Any) -> Any:
        """Frequency on -1 .. 1."""
        return (np.asarray(omega) - self.centre) / self.half_width

    def frequency(self, t: Any) -> Any:
        """Angular frequency of a scaled one."""
        return self.centre + self.half_width * np.asarray(t)


@lru_cache(maxsize=1)
def leja_nodes(count: int = 33) -> tuple[float, ...]:
    """Nodes on -1 .. 1 in an order that may be cut anywhere: ends, centre, then widest gaps."""
    candidates = np.cos(np.pi * np.arange(count) / (count - 1))
    nodes = [-1.0, 1.0, 0.0]
    while len(nodes) < count:
        distance = np.prod([np.abs(candidates - t) for t in nodes], axis=0)
        nodes.append(float(candidates[int(np.argmax(distance))]))
    return tuple(nodes)


def _newton_coefficients(nodes: np.ndarray, taylor: np.ndarray) -> np.ndarray:
    """Confluent divided differences, each node repeated as often as it has orders.

    f[z_i .. z_j] is a Taylor coefficient where all of z_i .. z_j are one node, else
    (f[z_i+1 .. z_j] - f[z_i .. z_j-1]) / (z_j - z_i).
    """
    orders = taylor.shape[1]
    node_of = np.repeat(np.arange(len(nodes)), orders)
    z = nodes[node_of]
    column = taylor[node_of, 0]
    out = [column[0]]
    for width in range(1, z.size):
        first, last = node_of[:-width], node_of[width:]
        same = first == last
        gap = np.where(same, 1.0, z[width:] - z[:-width])
        exact = taylor[first, min(width, orders - 1)]
        column = np.where(same, exact, (column[1:] - column[:-1]) / gap)
        out.append(column[0])
    return np.array(out)


def _newton_value(
    nodes: np.ndarray, orders: int, coefficients: np.ndarray, t: np.ndarray
) -> np.ndarray:
    """Value of the Newton form (Horner)."""
    z = np.repeat(nodes, orders)
    value = np.full(t.shape, coefficients[-1])
    for c, point in zip(coefficients[-2::-1], z[-2::-1], strict=True):
        value = value * (t - point) + c
    return value


@dataclass(frozen=True, slots=True, eq=False)
class BandFunction:
    """One function of frequency and its derivatives, over a band.

    Attributes
    ----------
    band : Band
    coefficients : ndarray, shape (size,)
        Chebyshev coefficients in the scaled frequency.
    """

    band: Band
    coefficients: np.ndarray

    @classmethod
    def from_series(cls, band: Band, nodes: tuple[float, ...], taylor: np.ndarray) -> BandFunction:
        """Hermite interpolant.

        Parameters
        ----------
        band : Band
        nodes : tuple of float
            Scaled frequencies of the nodes.
        taylor : ndarray, shape (nodes, orders)
            Taylor coefficients in omega at the nodes.
        """
        orders = taylor.shape[1]
        scaled = taylor * band.half_width ** np.arange(orders)
        points = np.array(nodes)
        newton = _newton_coefficients(points, scaled)
        size = newton.size
        at = np.cos(np.pi * (np.arange(size) + 0.5) / size)
        values = _newton_value(points, orders, newton, at)
        coefficients = dct(values, type=2) / size
        coefficients[0] *= 0.5
        return cls(band, coefficients)

    def __call__(self, omega: Any, derivative: int = 0) -> np.ndarray:
        """d^k/domega^k at ``omega`` (rad/ps); any shape; not checked against the band."""
        coefficients = self.coefficients
        if derivative:
            coefficients = chebyshev.chebder(coefficients, derivative)
            coefficients = coefficients / self.band.half_width**derivative
        return chebyshev.chebval(self.band.scaled(omega), coefficients)
