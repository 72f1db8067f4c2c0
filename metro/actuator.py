"""What is known of the actuator before it is calibrated: rough gain, resonance, and how it is driven."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.drive import peak_factor, point_factor

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["ASSUMED_Q", "Actuator"]

ASSUMED_Q = 20.0  # of a mounted mirror on a piezo, where nothing is stated: common practice


@dataclass(frozen=True, slots=True)
class Actuator:
    """The actuator of a bench as its file describes it.

    Parameters
    ----------
    gain_m_v : float
        Size of the differential displacement per volt at the terminals, slow drive [m/V].
    resonance_hz : float or None
        Mechanical resonance [Hz]; None where not stated.
    q : float
        Its quality.
    limit_v : float or None
        Highest voltage at the terminals [V].
    terminal_factor : float
        Volts at the terminals per volt at the point where the drive is set and read.
    reading_factor : float
        The drive's reading per zero-to-peak amplitude.
    """

    gain_m_v: float
    resonance_hz: float | None
    q: float
    limit_v: float | None
    terminal_factor: float
    reading_factor: float

    @classmethod
    def of(cls, bench: Bench) -> Actuator:
        """Return the actuator of a bench.

        Parameters
        ----------
        bench : Bench
            Needs ``actuator.gain``.

        Returns
        -------
        Actuator
            Without a resonance it is taken to follow at every frequency.

        Raises
        ------
        BenchError
            If the gain is not given.
        """
        resonance, limit = bench.get("actuator.resonance"), bench.get("actuator.drive_limit")
        return cls(
            abs(bench.magnitude("actuator.gain")),
            None if resonance is None else float(resonance.magnitude),
            bench.magnitude("actuator.q", ASSUMED_Q),
            None if limit is None else float(limit.magnitude),
            abs(point_factor(bench)) or 1.0,
            1.0 / peak_factor(bench),
        )

    def response(self, frequency_hz: float) -> float:
        """Return the size of the response at a frequency, relative to a slow drive.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        float
            |1/(1 − r² + ir/Q)|, r = f/f₀; 1 without a resonance.
        """
        if self.resonance_hz is None:
            return 1.0
        r = frequency_hz / self.resonance_hz
        return 1.0 / abs(complex(1.0 - r * r, r / self.q))

    def terminals_v(self, displacement_m: float, frequency_hz: float) -> float:
        """Return the drive that makes a displacement.

        Parameters
        ----------
        displacement_m : float
            Amplitude, zero to peak [m].
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        float
            Amplitude at the terminals, zero to peak [V].
        """
        return displacement_m / (self.gain_m_v * self.response(frequency_hz))

    def reading_v(self, terminals_v: float) -> float:
        """Return what is set and read for an amplitude at the terminals.

        Parameters
        ----------
        terminals_v : float
            Zero to peak [V].

        Returns
        -------
        float
            At ``[drive] point``, as ``[drive] reading`` says [V].
        """
        return terminals_v / self.terminal_factor * self.reading_factor
