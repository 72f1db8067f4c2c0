"""Line results: phasors at t = 0 in the unit of the samples, and the ratio of response to drive."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import ChannelFit
from calibration.clock import Followed
from calibration.phasor_estimate import PhasorEstimate
from calibration.whitening import tap_response

__all__ = ["FittedChannel", "ratio_estimate"]

_ROUNDING = 1e-15  # float64: what is left of a constant is no line


@dataclass(frozen=True, slots=True)
class FittedChannel:
    """A channel's fit with what leads back to its samples.

    Parameters
    ----------
    fit : ChannelFit
        At the phase course that is applied.
    followed : Followed
        That course.
    cycles : ndarray, shape (n_lines,)
        Carrier frequencies, cycles a sample.
    taps : tuple of float
        The whitening filter.
    unit : str
        Of the samples.
    mean_functions : ndarray, shape (n_parameters, n_lines)
        Mean of the phase functions over the samples used.
    """

    fit: ChannelFit
    followed: Followed
    cycles: NDArray[np.float64]
    taps: tuple[float, ...]
    unit: str
    mean_functions: NDArray[np.float64]

    @property
    def responses(self) -> NDArray[np.complex128]:
        """Response of the filter at each line."""
        return tap_response(self.taps, self.cycles)

    def estimate(self, line: int) -> PhasorEstimate:
        """Return a line's phasor at t = 0, with what is uncertain about the frequency in its u."""
        phasor, covariance = self.steady(line)
        turned = self._phase_covariance(line) * np.outer(_parts(1j * phasor), _parts(1j * phasor))
        return PhasorEstimate(phasor, covariance + turned, self.fit.noise[line].dof, self.unit)

    def factor(self, line: int) -> complex:
        """Return what leads from a filtered phasor to that at t = 0 in the unit of the samples."""
        applied = self.followed.applied
        turn = np.exp(1j * applied.phase(np.zeros(1))[0, line]) if len(applied.theta) else 1.0
        return complex(turn / self.responses[line])

    def steady(self, line: int) -> tuple[complex, NDArray[np.float64]]:
        """Return a line's phasor at t = 0 and its covariance if the phase course were exact."""
        factor = self.factor(line)
        phasor = complex(self.fit.coefficients[line]) * factor
        rotation = _rotation(factor)
        return phasor, rotation @ self.fit.line_covariance(line) @ rotation.T

    def density(self, line: int, rate_hz: float) -> float:
        """Return the one-sided amplitude spectral density beside a line, unit/√Hz."""
        variance = self.fit.noise[line].variance
        return float(np.sqrt(2 * variance / rate_hz) / abs(self.responses[line]))

    def floor(self, line: int, rate_hz: float, largest: float) -> float:
        """Return what stands for a line's amplitude where there is none: √(S/T), or rounding.

        Parameters
        ----------
        line : int
            Number of the line.
        rate_hz : float
            Samples a second [Hz].
        largest : float
            Largest absolute value of the samples: what is left of a constant is its rounding.

        Returns
        -------
        float
            In the unit of the samples.
        """
        floor = self.density(line, rate_hz) / np.sqrt(self.fit.used / rate_hz)
        return float(max(floor, _ROUNDING * largest))

    def _phase_covariance(self, line: int) -> float:
        course = self.followed.course
        if not len(course.theta):
            return 0.0
        lever = course.at(np.zeros(1))[:, 0, line] - self.mean_functions[:, line]
        return float(lever @ self.followed.left_covariance() @ lever)


def _parts(value: complex) -> NDArray[np.float64]:
    return np.array([value.real, value.imag])


def _rotation(factor: complex) -> NDArray[np.float64]:
    return np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])


def ratio_estimate(response: FittedChannel, drive: FittedChannel, line: int) -> PhasorEstimate:
    """Return response over drive at a line.

    Parameters
    ----------
    response, drive : FittedChannel
        Of the same recording.
    line : int
        Which line.

    Returns
    -------
    PhasorEstimate
        NaN where the drive is exactly zero. What the two channels' noise has in common, and the clock, cancel in it.

    Notes
    -----
    The error of the ratio ρ is (δR − ρ·δD)/D, so its u is that of a line in the series r − ρ·d: the
    residual bins of both channels beside the line are subtracted before they are squared.
    """
    top, covariance = response.steady(line)
    bottom, _ = drive.steady(line)
    unit = _ratio_unit(response.unit, drive.unit)
    if bottom == 0:
        return PhasorEstimate(complex(np.nan, np.nan), np.full((2, 2), np.nan), 1.0, unit)
    ratio = top / bottom
    own, other = response.fit.noise[line], drive.fit.noise[line]
    used = own.used & other.used if (own.used & other.used).any() else own.used
    first = own.bins[used] * response.factor(line)
    second = other.bins[used] * drive.factor(line)
    second = second * np.sqrt(response.fit.used / drive.fit.used)
    power = float((np.abs(first) ** 2).mean())
    left = float((np.abs(first - ratio * second) ** 2).mean())
    # The geometry is the response's; its noise is exchanged for that of the difference.
    scale = left / power if power > 0 else 1.0
    rotation = _rotation(1 / bottom)
    dof = own.dof * float(used.sum()) / max(1.0, float(own.used.sum()))
    return PhasorEstimate(ratio, scale * rotation @ covariance @ rotation.T, dof, unit)


def _ratio_unit(top: str, bottom: str) -> str:
    if top == bottom:
        return "1"
    return top if bottom == "1" else f"{top}/{bottom}"
