"""The readout's part in a coefficient: wavelength, index, amplifier, drive reading, channel delay.

Everything here comes from the bench file. The converter's scale is common to the fringe's extremes
and to a line, and cancels between them; in the drive's reading it does not.
"""

from dataclasses import dataclass
from functools import cached_property
from math import pi

from calibration.term import ADC_REFERENCE, DRIVE_SETTING, RULER, Term
from metro.bench import Bench
from metro.kernel.phase import phase_per_metre
from metro.readout import Pole
from metro.readout import Readout as Electronics

__all__ = ["Readout"]


@dataclass(frozen=True)
class Readout:
    """What the bench file says about light and electronics, as factors and budget terms."""

    bench: Bench

    @property
    def phase_per_metre(self) -> float:
        """Optical phase per differential displacement [rad/m]."""
        return phase_per_metre(
            self.bench.magnitude("laser.wavelength"),
            float(self.bench.index().magnitude),
            self.bench.magnitude("arms.round_trips", 1.0),
        )

    @cached_property
    def electronics(self) -> Electronics:
        """Amplifier, anti-alias filter, aperture and channel delay."""
        return Electronics.of(self.bench)

    def correction(self, frequency_hz: float, *, recorded: bool) -> complex:
        """Return the true over the measured ratio of photodiode to drive at one frequency.

        The amplifier's pole makes the photodiode late and small. A recorded drive passes filter
        and aperture like the photodiode's, which cancel, and is sampled later; against a drive
        that is only stated they stay.
        """
        electronics = self.electronics
        if not recorded:
            return 1.0 / electronics.response(frequency_hz)
        drive = electronics.drive_response(frequency_hz)
        return drive / electronics.voltage_response(frequency_hz)

    def photodiode_terms(self, frequency_hz: float) -> list[Term]:
        """Return the corners of the photodiode's channel at one frequency."""
        return [_pole_term(pole, frequency_hz) for pole in self.electronics.poles]

    def ruler_terms(self, sign: float) -> list[Term]:
        """Return wavelength and index; ``sign`` +1 for metres per volt, −1 for volts per metre."""
        wavelength_m = self.bench.magnitude("laser.wavelength")
        index = self.bench.index()
        n, u_n = float(index.magnitude), float(index.u_magnitude or 0.0)
        return [
            Term(
                RULER[0],
                wavelength_m,
                "m",
                self.bench.u("laser.wavelength"),
                relative=sign / wavelength_m,
                distribution=self.bench.distribution("laser.wavelength"),
            ),
            Term(RULER[1], n, "1", u_n, relative=-sign / n),
        ]

    def response_terms(self, frequency_hz: float, *, recorded: bool) -> list[Term]:
        """Return the readout's corners and, with a recorded drive, the channel delay."""
        if not recorded:
            return self.photodiode_terms(frequency_hz)
        amplifier = self.electronics.amplifier
        terms = [] if amplifier is None else [_pole_term(amplifier, frequency_hz)]
        if self.bench.get("adc.channel_delay") is not None:
            terms.append(
                self._stated("channel delay", "adc.channel_delay", "s", turn=2 * pi * frequency_hz)
            )
        return terms

    def drive_terms(self, *, recorded: bool) -> list[Term]:
        """Return the drive's divider and, where the converter reads it, the converter's scale."""
        terms = []
        divider = self.bench.magnitude("drive.divider", 1.0)
        if recorded and self.bench.get("drive.divider") is not None:
            terms.append(
                self._stated("drive reading", "drive.divider", "1", relative=-1.0 / divider)
            )
        if self.bench.get("drive.amplifier_gain") is not None and (
            self.bench.text("drive.point") not in (None, "actuator terminals")
        ):
            gain = self.bench.magnitude("drive.amplifier_gain")
            terms.append(
                self._stated("drive amplifier", "drive.amplifier_gain", "1", relative=-1.0 / gain)
            )
        return terms

    def reference_term(self, sign: float) -> list[Term]:
        """Return the converter's scale; +1 where it makes a reading large that divides."""
        if self.bench.get("adc.reference") is None:
            return []
        return [self._stated(ADC_REFERENCE, "adc.reference", "1", relative=sign)]

    def drive_setting_term(self, number: int) -> list[Term]:
        """Return a line's stated drive, where the drive was not recorded."""
        line = self.bench.lines[number]
        if not line.drive_v:
            return []
        return [
            Term(DRIVE_SETTING, line.drive_v, "V", line.drive_u_v, relative=-1.0 / line.drive_v)
        ]

    def _stated(
        self, name: str, key: str, unit: str, *, relative: float = 0.0, turn: float = 0.0
    ) -> Term:
        return Term(
            name,
            self.bench.magnitude(key),
            unit,
            self.bench.u(key),
            relative=relative,
            turn=turn,
            distribution=self.bench.distribution(key),
        )


_POLES = {"photodiode.bandwidth": "readout response", "adc.antialias": "anti-alias response"}


def _pole_term(pole: Pole, frequency_hz: float) -> Term:
    """Return what the uncertainty of a pole's corner does to a line corrected for it."""
    slope = pole.log_slope(frequency_hz)
    return Term(
        _POLES[pole.key],
        pole.corner_hz,
        "Hz",
        pole.u_hz,
        relative=-slope.real,
        turn=-slope.imag,
    )
