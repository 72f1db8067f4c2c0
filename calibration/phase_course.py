"""Phase course: how the phase of the lines runs away from the frequencies they were given.

A board whose clock is off sees every line at f·(1 + offset); the offset drifts with temperature. Or
each line has a frequency of its own to be found. Both are phases that are linear in a few parameters.
"""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

__all__ = ["PhaseCourse", "clock_course", "free_course"]


@dataclass(frozen=True, slots=True)
class PhaseCourse:
    """Phase functions of the lines, Σ_m θ_m·Φ_m(n), in radians.

    Parameters
    ----------
    middle, half : float
        Middle and half length of the recording [samples].
    scales : ndarray, shape (n_parameters, n_lines)
        Factor of the Legendre polynomial in each line [rad per unit of θ].
    degrees : tuple of int
        Degree of the polynomial of each parameter.
    theta : ndarray, shape (n_parameters,)
        Present value: relative frequency offset for a clock, Hz for free lines.
    """

    middle: float
    half: float
    scales: NDArray[np.float64]
    degrees: tuple[int, ...]
    theta: NDArray[np.float64]

    def at(self, samples: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the phase functions [rad], shape (n_parameters, n_samples, n_lines)."""
        x = self._x(samples)
        return self._scaled([legendre.legval(x, _unit(d)) for d in self.degrees])

    def change(self, samples: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return their change per sample [rad], shape (n_parameters, n_samples, n_lines)."""
        slopes = [
            legendre.legval(self._x(samples), legendre.legder(_unit(d))) for d in self.degrees
        ]
        return self._scaled(slopes) / self.half

    def phase(self, samples: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the phase [rad] of each line, shape (n_samples, n_lines)."""
        return np.asarray(np.tensordot(self.theta, self.at(samples), axes=1))

    def moved(self, theta: NDArray[np.float64]) -> "PhaseCourse":
        """Return the course with other parameters."""
        return replace(self, theta=theta)

    def only(self, kept: NDArray[np.bool_]) -> "PhaseCourse":
        """Return the course with some of its parameters."""
        degrees = tuple(d for d, k in zip(self.degrees, kept, strict=True) if k)
        return replace(self, scales=self.scales[kept], degrees=degrees, theta=self.theta[kept])

    def _x(self, samples: NDArray[np.float64]) -> NDArray[np.float64]:
        return (np.asarray(samples, dtype=np.float64) - self.middle) / self.half

    def _scaled(self, functions: list[Any]) -> NDArray[np.float64]:
        if not functions:
            return np.zeros((0, 1, self.scales.shape[1]))
        return np.stack(functions)[:, :, None] * self.scales[:, None, :]


def _unit(degree: int) -> NDArray[np.float64]:
    return np.asarray(np.eye(degree + 1)[degree])


def clock_course(
    cycles: NDArray[np.float64], first: float, length: float, order: int
) -> PhaseCourse:
    """Return the course of a clock that is off and drifts.

    Parameters
    ----------
    cycles : ndarray, shape (n_lines,)
        Lines in cycles a sample.
    first, length : float
        First sample of the recording and its length.
    order : int
        Degree of the phase: 1 for an offset, 2 for one that drifts.

    Returns
    -------
    PhaseCourse
        θ is the relative frequency offset; the sum of the odd ones is its mean over the recording.
    """
    half = 0.5 * length
    scales = np.tile(2 * np.pi * cycles * half, (order, 1))
    degrees = tuple(range(1, order + 1))
    return PhaseCourse(first + half - 0.5, half, scales, degrees, np.zeros(order))


def free_course(lines: int, first: float, length: float, rate_hz: float) -> PhaseCourse:
    """Return the course of lines with frequencies of their own.

    Parameters
    ----------
    lines : int
        Number of lines.
    first, length : float
        First sample of the recording and its length.
    rate_hz : float
        Sampling rate [Hz].

    Returns
    -------
    PhaseCourse
        θ is the frequency of each line less the one it was given [Hz].
    """
    half = 0.5 * length
    scales = np.eye(lines) * (2 * np.pi * half / rate_hz)
    return PhaseCourse(first + half - 0.5, half, scales, (1,) * lines, np.zeros(lines))
