"""Frequency response of the readout: amplifier, anti-alias filter, converter."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.kernel import photodiode

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["Pole", "Readout"]


@dataclass(frozen=True, slots=True)
class Pole:
    """One pole of the readout.

    Parameters
    ----------
    key : str
        The bench's key, ``section.key``.
    corner_hz : float
        −3 dB frequency [Hz].
    u_hz : float
        Standard uncertainty of the corner [Hz].
    """

    key: str
    corner_hz: float
    u_hz: float

    def response(self, frequency_hz: float) -> complex:
        """Return the pole's response.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        complex
            1 at frequency zero.
        """
        return photodiode.one_pole_response(frequency_hz, self.corner_hz)

    def log_slope(self, frequency_hz: float) -> complex:
        """Return the derivative of the response's logarithm by the corner.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        complex
            Relative change of the size a hertz, and change of the phase [rad/Hz]:
            (ir/(1+ir))/f₀ with r = f/f₀, since the response is 1/(1+ir).
        """
        turned = 1j * frequency_hz / self.corner_hz
        return turned / (1.0 + turned) / self.corner_hz

    def relative_effect(self, frequency_hz: float) -> float:
        """Return the relative change of the response's size for one u of the corner.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        float
            r²/(1+r²) · u/f₀ with r = f/f₀.
        """
        return self.log_slope(frequency_hz).real * self.u_hz


@dataclass(frozen=True, slots=True)
class Readout:
    """What lies between photocurrent and counts, as a frequency sees it.

    Parameters
    ----------
    amplifier : Pole or None
        The transimpedance amplifier's bandwidth.
    antialias : Pole or None
        The filter before the converter.
    aperture_s : float
        Time over which the converter averages [s]; 0 if it samples.
    drive_delay_s : float
        How much later the drive channel is read than the photodiode [s].
    """

    amplifier: Pole | None = None
    antialias: Pole | None = None
    aperture_s: float = 0.0
    drive_delay_s: float = 0.0

    @classmethod
    def of(cls, bench: Bench) -> Readout:
        """Return the readout of a bench.

        Parameters
        ----------
        bench : Bench
            What is known; what it does not give is taken as perfect.

        Returns
        -------
        Readout
            Poles, aperture and delay.
        """
        return cls(
            _pole(bench, "photodiode.bandwidth"),
            _pole(bench, "adc.antialias"),
            bench.magnitude("adc.aperture", 0.0),
            bench.magnitude("adc.channel_delay", 0.0),
        )

    @property
    def poles(self) -> tuple[Pole, ...]:
        """The poles there are, in the order of the signal."""
        return tuple(pole for pole in (self.amplifier, self.antialias) if pole is not None)

    def voltage_response(self, frequency_hz: float) -> complex:
        """Return the response from photocurrent to the amplifier's voltage.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        complex
            1 at frequency zero.
        """
        return 1.0 + 0.0j if self.amplifier is None else self.amplifier.response(frequency_hz)

    def counts_response(self, frequency_hz: float) -> complex:
        """Return the response from the amplifier's voltage to what the converter reads.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        complex
            Filter times aperture; 1 at frequency zero.
        """
        filtered = 1.0 + 0.0j if self.antialias is None else self.antialias.response(frequency_hz)
        return filtered * photodiode.aperture_response(frequency_hz, self.aperture_s)

    def response(self, frequency_hz: float) -> complex:
        """Return the response from photocurrent to what the converter reads.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        complex
            1 at frequency zero.
        """
        return self.voltage_response(frequency_hz) * self.counts_response(frequency_hz)

    def drive_response(self, frequency_hz: float) -> complex:
        """Return what the drive channel's later reading does to it, against the photodiode's.

        Parameters
        ----------
        frequency_hz : float
            Frequency [Hz].

        Returns
        -------
        complex
            exp(2πifτ): a later reading is ahead in phase, when taken as simultaneous.
        """
        return photodiode.delay_response(frequency_hz, -self.drive_delay_s)


def _pole(bench: Bench, key: str) -> Pole | None:
    if bench.get(key) is None:
        return None
    return Pole(key, bench.magnitude(key), bench.u(key))
