"""Line course: how a line's amplitude and phase run through the recording, and the noise beside it."""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.line_noise import UNSTEADY
from calibration.line_result import FittedChannel

if TYPE_CHECKING:
    from calibration.line_plan import LinePlan

__all__ = ["LineBeside", "LineCourse", "beside_of", "course_of"]

FloatArray = NDArray[np.float64]

_MOST_BINS = 24
_LEAST_CYCLES = 8.0  # in a bin: fewer, and the line's own mirror image leaks into it
_LEAST_SHARE = 0.02  # of a full bin's samples: a bin with less is nearly all gap


@dataclass(frozen=True, eq=False, slots=True)
class LineCourse:
    """A line's phasor in bins of time, each by itself.

    Parameters
    ----------
    time_s : ndarray, shape (n_bins,)
        Mean time of the samples in each bin [s], 0 at the recording's first sample.
    phasor : ndarray of complex, shape (n_bins,)
        A·e^(iφ), the phase at t = 0 as of the whole line, so that a steady line stands still.
    u : ndarray, shape (n_bins,)
        Standard uncertainty of its real and of its imaginary part.
    dof : float
        Degrees of freedom of ``u``.
    unit : str
        Coherent SI unit.
    """

    time_s: FloatArray
    phasor: NDArray[np.complex128]
    u: FloatArray
    dof: float
    unit: str

    @property
    def amplitude(self) -> FloatArray:
        """Amplitude, zero to peak, shape (n_bins,)."""
        return np.asarray(np.abs(self.phasor))

    @property
    def amplitude_u(self) -> FloatArray:
        """Its standard uncertainty."""
        return self.u

    @property
    def phase_rad(self) -> FloatArray:
        """Phase [rad], without jumps, shape (n_bins,)."""
        return np.asarray(np.unwrap(np.angle(self.phasor)))

    @property
    def phase_u_rad(self) -> FloatArray:
        """Its standard uncertainty [rad], π where there is no line."""
        size = np.maximum(np.abs(self.phasor), np.finfo(float).tiny)
        return np.asarray(np.minimum(self.u / size, np.pi))

    def to_dict(self) -> dict[str, Any]:
        """Return the course as the JSON output has it."""
        return {
            "time": {"value": self.time_s, "unit": "s"},
            "amplitude": {"value": self.amplitude, "unit": self.unit, "u": self.amplitude_u},
            "phase": {"value": self.phase_rad, "unit": "rad", "u": self.phase_u_rad},
        }


@dataclass(frozen=True, eq=False, slots=True)
class LineBeside:
    """What the fit leaves over beside a line.

    Parameters
    ----------
    frequency_hz : ndarray, shape (n_bins,)
        In the recording's own clock [Hz].
    density : ndarray, shape (n_bins,)
        Amplitude spectral density of one look, unit/√Hz.
    used : ndarray of bool, shape (n_bins,)
        The bins that the line's u comes from.
    """

    frequency_hz: FloatArray
    density: FloatArray
    used: NDArray[np.bool_]


def course_of(channel: FittedChannel, line: int, plan: "LinePlan") -> LineCourse | None:
    """Return how a line's phasor runs through the recording.

    Parameters
    ----------
    channel : FittedChannel
        Fitted.
    line : int
        Which line.
    plan : LinePlan
        For the sampling rate.

    Returns
    -------
    LineCourse or None
        Up to 24 bins; None where the recording is too short for two.

    Notes
    -----
    In each bin the residual phasor is put back on the fitted one: least squares of that bin alone,
    everything else as fitted over the whole.
    """
    fit = channel.fit
    middles, counts, residual = fit.middles, fit.counts, fit.residual[:, line]
    span = float(middles[-1] - middles[0] + fit.group)
    bins = int(min(_MOST_BINS, len(middles), plan.cycles[line] * span / _LEAST_CYCLES))
    if bins < 2:
        return None
    which = np.minimum(((middles - middles[0]) / span * bins).astype(np.int64), bins - 1)
    samples = np.bincount(which, counts, bins)
    held = samples > _LEAST_SHARE * samples.max()
    sums = np.bincount(which, residual.real, bins) + 1j * np.bincount(which, residual.imag, bins)
    time = np.bincount(which, counts * middles, bins)
    factor, noise = channel.factor(line), fit.noise[line]
    local = fit.coefficients[line] + 2.0 * sums[held] / samples[held]
    variance, dof = noise.variance, noise.dof
    if noise.near > UNSTEADY:
        variance, dof = _variance_between(counts, residual, plan.cycles[line] * fit.group)
    return LineCourse(
        time[held] / samples[held] / plan.rate_hz,
        np.asarray(local * factor),
        np.sqrt(2.0 * variance / samples[held]) * abs(factor),
        dof,
        channel.unit,
    )


def _variance_between(
    counts: NDArray[np.int64], residual: NDArray[np.complex128], cycles: float
) -> tuple[float, float]:
    """Return the variance of a sample from what neighbouring groups do not share, and its freedom.

    The u of a whole line that is not steady holds its own changes; that of a bin must not. Second
    differences leave out what grows evenly; ``cycles`` are those of the line in a full group.
    """
    size = max(1, int(np.ceil(_LEAST_CYCLES / cycles)))
    edges = np.arange(0, len(counts), size)
    samples, sums = np.add.reduceat(counts, edges), np.add.reduceat(residual, edges)
    held = samples > 0.5 * samples.max()
    whole = sums[held] / np.sqrt(samples[held])
    if len(whole) < 4:
        return float((np.abs(whole) ** 2).mean()), 2.0
    second = np.diff(whole, 2)
    return float((np.abs(second) ** 2).mean()) / 6.0, max(2.0, len(second))


def beside_of(channel: FittedChannel, line: int, plan: "LinePlan") -> LineBeside:
    """Return the noise beside a line, bin by bin.

    Parameters
    ----------
    channel : FittedChannel
        Fitted.
    line : int
        Which line.
    plan : LinePlan
        For the sampling rate.

    Returns
    -------
    LineBeside
        Bins of 1/T on both sides.
    """
    fit, noise = channel.fit, channel.fit.noise[line]
    span = float(fit.middles[-1] - fit.middles[0] + fit.group)
    scale = abs(channel.factor(line)) * np.sqrt(2.0 / plan.rate_hz)
    return LineBeside(
        (plan.cycles[line] + noise.offsets / span) * plan.rate_hz,
        np.asarray(np.abs(noise.bins) * scale),
        noise.used,
    )
