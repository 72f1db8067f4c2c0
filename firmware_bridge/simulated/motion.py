"""Random motion: a sum of damped random processes with real or complex poles.

Each component is x[k] = a·x[k-1] + w[k] with a = exp((−1/τ + 2πif)·dt): a real pole wanders, a
complex pole rings like a table resonance. Their sum falls with frequency as the ground does.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["Component", "Motion", "spectral_density"]

FloatArray = NDArray[np.float64]

_LONGEST_DECAY = 300.0  # exp(300) = 2e130: the scaled sum below stays far inside double range


@dataclass(frozen=True)
class Component:
    """One damped random process: rms size (any unit), correlation time [s], frequency [Hz]."""

    rms: float
    correlation_s: float
    frequency_hz: float = 0.0


def spectral_density(components: Sequence[Component], rate_hz: float, frequency_hz: float) -> float:
    """Return the one-sided spectral density of a sum of components at one frequency.

    Parameters
    ----------
    components : sequence of Component
        Independent processes.
    rate_hz : float
        Samples a second [Hz].
    frequency_hz : float
        Frequency [Hz], up to half the rate.

    Returns
    -------
    float
        Squared unit of the components a hertz.

    Notes
    -----
    A process x[k] = a·x[k−1] + w[k] of rms r has the two-sided density
    r²(1 − |a|²)/(rate·|1 − a·exp(−2πif/rate)|²); the real part of a complex one the mean of that at
    f and at −f. Any textbook on time series, for an autoregressive process of first order.
    """
    turns = 2 * np.pi * frequency_hz / rate_hz
    total = 0.0
    for part in components:
        pole = np.exp(complex(-1.0 / part.correlation_s, 2 * np.pi * part.frequency_hz) / rate_hz)
        sides = [1.0 / abs(1.0 - pole * np.exp(-1j * side * turns)) ** 2 for side in (1.0, -1.0)]
        total += part.rms**2 * (1.0 - abs(pole) ** 2) / rate_hz * sum(sides)
    return float(total)


class Motion:
    """The running sum of several components; the same numbers whatever the block lengths.

    Parameters
    ----------
    components : sequence of Component
        Processes to add.
    rate_hz : float
        Samples a second [Hz].
    rng : numpy.random.Generator
        Source of the draws; each component gets a child of its own.
    """

    def __init__(
        self, components: Sequence[Component], rate_hz: float, rng: np.random.Generator
    ) -> None:
        self._runs = [
            _Run(part, rate_hz, child)
            for part, child in zip(components, rng.spawn(len(components)), strict=True)
        ]

    def block(self, count: int) -> FloatArray:
        """Return the next ``count`` values, shape (count,)."""
        total = np.zeros(count)
        for run in self._runs:
            total += run.block(count)
        return total


class _Run:
    """One component with its state between blocks."""

    def __init__(self, part: Component, rate_hz: float, rng: np.random.Generator) -> None:
        self._rng = rng
        self._log_pole = complex(-1.0 / part.correlation_s, 2 * np.pi * part.frequency_hz) / rate_hz
        self._ring = part.frequency_hz != 0.0
        decay = float(np.exp(2 * self._log_pole.real))
        self._step = part.rms * float(np.sqrt(1.0 - decay))
        if self._ring:  # the real part carries half the complex power: √2 restores the rms
            start = complex(*rng.normal(0.0, part.rms, 2))
        else:
            start = complex(float(rng.normal(0.0, part.rms)), 0.0)
        self._state = start
        self._longest = max(1, int(_LONGEST_DECAY / max(-self._log_pole.real, 1e-12)))
        self._powers = np.empty(0, dtype=complex if self._ring else float)

    def block(self, count: int) -> FloatArray:
        out = np.empty(count)
        for begin in range(0, count, self._longest):  # one turn unless the pole is very fast
            end = min(count, begin + self._longest)
            out[begin:end] = self._piece(end - begin)
        return out

    def _piece(self, count: int) -> FloatArray:
        steps = self._rng.normal(0.0, self._step, (count, 2) if self._ring else (count, 1))
        push = steps[:, 0] + 1j * steps[:, 1] if self._ring else steps[:, 0]
        state = self._state if self._ring else self._state.real
        power = self._powers_to(count)
        run = power * (state + np.cumsum(push / power))
        self._state = complex(run[-1])
        return np.real(run)

    def _powers_to(self, count: int) -> NDArray[Any]:
        """Return a, a², … a^count; kept, since blocks mostly have one length."""
        if self._powers.size < count:
            log_pole = self._log_pole if self._ring else self._log_pole.real
            self._powers = np.exp(log_pole * np.arange(1, count + 1))
        return self._powers[:count]
