"""The readout's part in a coefficient: wavelength, index, converter, amplifier, channel delay.

Everything here comes from the bench file. The converter's scale is common to the fringe's extremes
and to a line, and cancels between them; in the drive's reading it does not.
"""

from dataclasses import dataclass
from math import pi

import numpy as np

from calibration.extremes import Extremes
from calibration.term import Term
from metro.bench import Bench
from metro.kernel.phase import phase_per_metre
from metro.kernel.photodiode import delay_response, one_pole_response

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

    def correction(self, frequency_hz: float, *, recorded: bool) -> complex:
        """Return the true over the measured ratio of photodiode to drive at one frequency.

        The amplifier's pole makes the photodiode late and small. A recorded drive passes an
        anti-alias filter like the photodiode's, which cancels, and is sampled ``channel_delay``
        after it; against a drive that is only stated the filter stays.
        """
        if not recorded:
            return 1.0 / self.photodiode_response(frequency_hz)
        gain = 1.0 + 0.0j
        if self.bench.get("photodiode.bandwidth") is not None:
            gain = one_pole_response(frequency_hz, self.bench.magnitude("photodiode.bandwidth"))
        delay_s = self.bench.magnitude("adc.channel_delay", 0.0)
        return 1.0 / (gain * delay_response(frequency_hz, delay_s))

    def photodiode_response(self, frequency_hz: float) -> complex:
        """Return the photodiode channel's response: amplifier and anti-alias filter.

        A recording alone has both in it; in the ratio to a drive that passes the same anti-alias
        filter only the amplifier stays (`correction`).
        """
        response = 1.0 + 0.0j
        for key in _POLES:
            if self.bench.get(key) is not None:
                response *= one_pole_response(frequency_hz, self.bench.magnitude(key))
        return response

    def photodiode_terms(self, frequency_hz: float) -> list[Term]:
        """Return the corners of the photodiode channel at one frequency."""
        stated = [key for key in _POLES if self.bench.get(key) is not None]
        return [self._pole_term(key, frequency_hz) for key in stated]

    def ruler_terms(self, sign: float) -> list[Term]:
        """Return wavelength and index; ``sign`` +1 for metres per volt, −1 for volts per metre."""
        wavelength_m = self.bench.magnitude("laser.wavelength")
        index = self.bench.index()
        n, u_n = float(index.magnitude), float(index.u_magnitude or 0.0)
        return [
            Term(
                "wavelength",
                wavelength_m,
                "m",
                self.bench.u("laser.wavelength"),
                relative=sign / wavelength_m,
                distribution=self.bench.distribution("laser.wavelength"),
            ),
            Term("refractive index", n, "1", u_n, relative=-sign / n),
        ]

    def response_terms(self, frequency_hz: float, *, recorded: bool) -> list[Term]:
        """Return the readout's corners and, with a recorded drive, the channel delay."""
        if not recorded:
            return self.photodiode_terms(frequency_hz)
        terms = []
        if self.bench.get("photodiode.bandwidth") is not None:
            terms.append(self._pole_term("photodiode.bandwidth", frequency_hz))
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
                self._stated("drive reading", "drive.divider", "1", relative=1.0 / divider)
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
        return [self._stated("ADC reference", "adc.reference", "1", relative=sign)]

    def line_nonlinearity_terms(
        self, extremes: Extremes, cosine: float, *, drive_read: bool
    ) -> list[Term]:
        """Return the converter's curvature in a line at a working point, against the extremes."""
        level_v = extremes.mid_v + cosine * extremes.swing_v
        terms = []
        for key, shape in _SHAPES.items():
            if self.bench.get(key) is None:
                continue
            bend = _Bend(shape, self._half_range_v)
            relative = bend.slope(level_v) - bend.sine_change(extremes, level_v)
            if drive_read:
                relative -= bend.slope(0.0)
            terms.append(self._stated(_NAMES[key], key, "1", relative=relative))
        return terms

    def swing_nonlinearity_terms(self, extremes: Extremes) -> list[Term]:
        """Return the converter's curvature in high − low."""
        terms = []
        for key, shape in _SHAPES.items():
            if self.bench.get(key) is not None:
                bend = _Bend(shape, self._half_range_v)
                relative = -bend.swing_change_v(extremes) / extremes.swing_v
                terms.append(self._stated(_NAMES[key], key, "1", relative=relative))
        return terms

    def contrast_nonlinearity_terms(self, extremes: Extremes, dark_v: float) -> list[Term]:
        """Return the converter's curvature in (high − low)/(high + low − 2·dark)."""
        terms = []
        for key, shape in _SHAPES.items():
            if self.bench.get(key) is not None:
                bend = _Bend(shape, self._half_range_v)
                relative = -bend.swing_change_v(extremes) / extremes.swing_v
                level_v = bend.mid_change_v(extremes) - bend.volts(dark_v)
                relative += level_v / (extremes.mid_v - dark_v)
                terms.append(self._stated(_NAMES[key], key, "1", relative=relative))
        return terms

    def _pole_term(self, key: str, frequency_hz: float) -> Term:
        """Return what the uncertainty of a pole's corner does to a line corrected for it."""
        corner_hz = self.bench.magnitude(key)
        ratio = frequency_hz / corner_hz
        return self._stated(
            _POLES[key],
            key,
            "Hz",
            relative=-(ratio**2) / (1 + ratio**2) / corner_hz,
            turn=-ratio / (1 + ratio**2) / corner_hz,
        )

    @property
    def _half_range_v(self) -> float:
        return self.bench.magnitude("adc.range") / 2

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
# Curvature of the converter as a fraction of its range, at x = V/(range/2): zero at both ends.
_SHAPES = {
    "adc.quadratic": np.poly1d([-1.0, 0.0, 1.0]),
    "adc.cubic": np.poly1d([1.0, 0.0, -1.0, 0.0]),
}
_NAMES = {"adc.quadratic": "ADC curvature (quadratic)", "adc.cubic": "ADC curvature (cubic)"}


@dataclass(frozen=True)
class _Bend:
    """One shape of curvature: volts added per unit of its coefficient."""

    shape: "np.poly1d"
    half_range_v: float

    def volts(self, level_v: float) -> float:
        return 2 * self.half_range_v * float(self.shape(level_v / self.half_range_v))

    def slope(self, level_v: float) -> float:
        return 2 * float(self.shape.deriv()(level_v / self.half_range_v))

    def swing_change_v(self, extremes: Extremes) -> float:
        return (self.volts(extremes.high_v) - self.volts(extremes.low_v)) / 2

    def mid_change_v(self, extremes: Extremes) -> float:
        return (self.volts(extremes.high_v) + self.volts(extremes.low_v)) / 2

    def sine_change(self, extremes: Extremes, level_v: float) -> float:
        """Relative change of swing·|sin φ|, by which a line is divided."""
        offset_v = level_v - extremes.mid_v
        shift_v = self.volts(level_v) - self.mid_change_v(extremes)
        push = extremes.swing_v * self.swing_change_v(extremes) - offset_v * shift_v
        return push / (extremes.swing_v**2 - offset_v**2)
