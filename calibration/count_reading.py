"""A swept recording read: extremes, fringes and metres pass by pass, the shape of the fringe."""

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.found_extremes import Level
from calibration.fringe_count import FringeCount, count_fringes
from calibration.fringe_pass import Pass
from calibration.fringe_shape import FringeShape, fringe_shape
from calibration.passes import number_passes
from calibration.ruler import Ruler
from firmware_bridge.trace import Trace
from metro.measured import Measured

__all__ = ["CountReading", "read_count"]

_TWO_PI = 2.0 * math.pi


@dataclass(frozen=True)
class CountReading:
    """Fringes of a swept recording.

    Attributes
    ----------
    count : FringeCount
        Passes and phase.
    shape : FringeShape or None
        Harmonics of the law; None where the extremes cannot be relied on.
    low, high : Measured
        Extremes, in the record's unit.
    contrast : Measured or None
        (high − low)/(high + low − 2·dark); None without a dark level.
    ruler : Ruler or None
        Metres per radian.
    trace : Trace
        What was counted.
    has_drive : bool
        Whether a drive told the direction.
    extremes_from : str
        Where the extremes came from.
    reasons : list of str
        Why it must not be trusted; empty where nothing was found.
    """

    count: FringeCount
    shape: FringeShape | None
    low: Measured
    high: Measured
    contrast: Measured | None
    ruler: Ruler | None
    trace: Trace
    has_drive: bool
    extremes_from: str
    reasons: list[str] = field(default_factory=list)

    def metres(self, fringes: float, fringes_u: float) -> Measured | None:
        """Return a number of fringes in metres.

        Parameters
        ----------
        fringes, fringes_u : float
            Fringes and their standard uncertainty.

        Returns
        -------
        Measured or None
            None without a wavelength.
        """
        if self.ruler is None:
            return None
        scale = _TWO_PI * self.ruler.metres_per_rad
        u = math.hypot(fringes_u * scale, fringes * scale * self.ruler.relative_u)
        return Measured.of(fringes * scale, "m", u)

    @property
    def direction(self) -> str:
        """What is known of the direction.

        Returns
        -------
        str
            A sentence.
        """
        if not self.has_drive:
            return (
                "unknown: one photodiode without a drive cannot tell it, nor a turn within 40° of a "
                "fringe's extreme"
            )
        return (
            "from the drive: up is where it makes the phase grow, by its polarity as declared or +1"
        )

    @property
    def fringes(self) -> Measured:
        """Fringes of all passes together.

        Returns
        -------
        Measured
            Dimensionless.
        """
        return Measured.of(self.count.fringes, "1", self.count.fringes_u)

    @property
    def amplitude(self) -> Measured | None:
        """Displacement amplitude after ISO 16063-11, method 1, λ/8 a fringe per period.

        Returns
        -------
        Measured or None
            Zero to peak [m]; None without a wavelength or without two whole passes.
        """
        per_period = self.count.per_period
        return None if per_period is None else self.metres(per_period[0] / 4.0, per_period[1] / 4.0)

    def pass_dict(self, one: Pass) -> dict[str, Any]:
        """Return the JSON form of one pass.

        Parameters
        ----------
        one : Pass
            Of this count.

        Returns
        -------
        dict
            Plain values and Measured.
        """
        rate = self.trace.rate_hz
        return {
            "start": _seconds((self.trace.start_index + one.start_index) / rate),
            "end": _seconds((self.trace.start_index + one.stop_index) / rate),
            "fringes": Measured.of(one.fringes, "1", one.fringes_u),
            "displacement": self.metres(one.fringes, one.fringes_u),
            "direction": {1: "up", -1: "down", 0: None}[one.direction],
            "fastest": {"value": one.fastest, "unit": "1", "u": None},
        }

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON document.

        Returns
        -------
        dict
            With the keys that programs rely on.
        """
        count = self.count
        per_period = count.per_period
        net = Measured.of(count.net_fringes, "1", count.net_u) if self.has_drive else None
        return {
            "low": self.low,
            "high": self.high,
            "contrast": self.contrast,
            "slope": None,
            "slope_per_metre": None,
            "working_phase": None,
            "phase_amplitude": [],
            "displacement_amplitude": None if self.ruler is None else [],
            "fringes": self.fringes,
            "displacement": self.metres(count.fringes, count.fringes_u),
            "net_fringes": net,
            "net_displacement": None
            if net is None
            else self.metres(count.net_fringes, count.net_u),
            "direction": self.direction,
            "passes": [self.pass_dict(one) for one in count.passes],
            "fringes_per_period": None
            if per_period is None
            else Measured.of(per_period[0], "1", per_period[1]),
            "vibration_amplitude": self.amplitude,
            "span": {"value": list(count.span_range), "unit": self.trace.unit, "u": None},
            "shape": None if self.shape is None else self.shape.to_dict(),
            "extremes_from": self.extremes_from,
            "routes": [
                {
                    "route": "fringe counting",
                    "displacement_amplitude": None if self.amplitude is None else [self.amplitude],
                    "valid_range": "two fringes a pass and more, at most a third of a fringe per sample",
                    "reasons": self.reasons,
                }
            ],
            "agreement": None,
            "trustworthy": not self.reasons,
            "reasons": self.reasons,
        }


def _seconds(value: float) -> dict[str, Any]:
    return {"value": value, "unit": "s", "u": None}


def _extremes(
    count: FringeCount, unit: str, low: Level | None, high: Level | None
) -> tuple[Measured, Measured]:
    if low is not None and high is not None:
        return Measured.of(low.value, unit, low.u), Measured.of(high.value, unit, high.u)
    scan = count.scan
    return (
        Measured.of(scan.low, unit, scan.low_u, scan.dof),
        Measured.of(scan.high, unit, scan.high_u, scan.dof),
    )


def _contrast(low: Measured, high: Measured, dark: Level | None) -> Measured | None:
    if dark is None:
        return None
    bottom, top = float(low.magnitude) - dark.value, float(high.magnitude) - dark.value
    total = bottom + top
    if total <= 0.0:
        return None
    parts = (
        2.0 * top / total**2 * float(low.u_magnitude),
        2.0 * bottom / total**2 * float(high.u_magnitude),
        2.0 * (top - bottom) / total**2 * dark.u,
    )
    return Measured.of((top - bottom) / total, "1", math.hypot(*parts), low.dof)


def _shape(
    values: NDArray[np.float64], count: FringeCount, clipped: bool
) -> FringeShape | None:  # private
    """Return the law's harmonics, where the span is even enough to speak of one fringe."""
    low, high = count.scan.low, count.scan.high
    good = np.flatnonzero(np.isfinite(values))
    if not high > low or count.span_range[0] < 0.5 * count.span_range[1]:
        return None
    direction = np.zeros(len(values), dtype=np.int64)
    for one in count.passes:
        direction[one.start_index : one.stop_index] = one.direction
    clean = np.interp(np.arange(len(values)), good, values[good])
    passes = number_passes(clean, low, high)
    return fringe_shape(clean, passes, low, high, direction, clipped=clipped)


def read_count(
    trace: Trace,
    drive: Trace | None = None,
    *,
    low: Level | None = None,
    high: Level | None = None,
    dark: Level | None = None,
    ruler: Ruler | None = None,
) -> CountReading:
    """Count the fringes of a swept recording and look at their shape.

    Parameters
    ----------
    trace : Trace
        Photodiode.
    drive : Trace, optional
        What moves the mirror, over the same stretch.
    low, high : Level, optional
        Given extremes, both or neither.
    dark : Level, optional
        Level without light.
    ruler : Ruler, optional
        Metres per radian.

    Returns
    -------
    CountReading
        Passes, metres, shape and reasons.

    Raises
    ------
    CalibrationError
        If there are too few samples, the record does not change, or the extremes do not rise.
    """
    given = None
    if low is not None and high is not None:
        if not high.value > low.value:
            raise CalibrationError(
                f"high must be above low, got low {low.value:g} and high {high.value:g}"
            )
        given = (low.value, high.value)
    elif low is not None or high is not None:
        raise CalibrationError("low and high must be given together")
    count = count_fringes(
        trace.values, trace.rate_hz, None if drive is None else drive.values, extremes=given
    )
    shape = _shape(trace.values, count, any("clipped" in one for one in count.scan.reasons))
    reasons = list(count.reasons)
    if shape is not None:
        named = any("no cosine" in one for one in reasons)
        reasons += [one for one in shape.causes if not (named and "no cosine" in one)]
    low_m, high_m = _extremes(count, trace.unit, low, high)
    source = "given" if given else "the recording itself"
    return CountReading(
        count,
        shape,
        low_m,
        high_m,
        _contrast(low_m, high_m, dark),
        ruler,
        trace,
        drive is not None,
        source,
        reasons,
    )
