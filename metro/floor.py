"""The floor of a coefficient: what no drive and no time can lower, from the bench's stated u.

The terms are those of metres per volt at a line, read at mid-fringe on both slopes, so that what
adds to the photodiode without motion drops out.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.budget import Budget, Contribution
from metro.readout import Readout

if TYPE_CHECKING:
    from metro.bench import Bench
    from metro.bench_entry import BenchLine

__all__ = ["ASSUMED_DRIFT", "Floor", "floor_of"]

ASSUMED_DRIFT = 0.002
"""Half-width of the change of high − low between recordings where [fringe] drift says nothing."""


@dataclass(frozen=True)
class Floor:
    """The floor at one line.

    Parameters
    ----------
    budget : Budget
        Relative contributions.
    unstated : tuple of str
        Keys without a u that were counted as exactly known.
    """

    budget: Budget
    unstated: tuple[str, ...]

    @property
    def relative_u(self) -> float:
        """The combined relative standard uncertainty."""
        return self.budget.combined()[0]

    @property
    def largest(self) -> Contribution:
        """The largest contribution."""
        return max(self.budget.contributions, key=lambda c: abs(c.effect))


def floor_of(bench: Bench, line: BenchLine, swing_v: float | None = None) -> Floor:
    """Return the floor of metres per volt at a line.

    Parameters
    ----------
    bench : Bench
        What is stated, with its u.
    line : BenchLine
        The line.
    swing_v : float, optional
        (high − low)/2 of the fringe [V], for the converter's curvature.

    Returns
    -------
    Floor
        Relative contributions, and what has no stated u.
    """
    drive_is_read = is_drive_read(bench)
    index = bench.index()
    terms = [
        _stated(bench, "laser wavelength", "laser.wavelength"),
        Contribution(
            "refractive index", 1.0, float(index.u_magnitude or 0.0) / float(index.magnitude), -1.0
        ),
        *_drive_terms(bench, line, drive_is_read=drive_is_read),
        _extremes_term(bench),
        _drift_term(bench),
        *_curvature_terms(bench, swing_v, drive_is_read=drive_is_read),
        _pole_term(bench, line.frequency_hz),
    ]
    wanted = ["laser.wavelength"]
    wanted += ["drive.divider", "adc.reference"] if drive_is_read else []
    wanted += ["fringe.drift"]
    unstated = tuple(key for key in wanted if not bench.u(key))
    return Floor(Budget([term for term in terms if term.effect], unit="1"), unstated)


def is_drive_read(bench: Bench) -> bool:
    """Return whether the drive is read by the converter, beside the photodiode.

    Parameters
    ----------
    bench : Bench
        Its ``[drive]``.

    Returns
    -------
    bool
        False only for a generator's setting without a drive channel.
    """
    if bench.text("drive.channel") is not None:
        return True
    return bench.text("drive.point") != "generator setting"


def _stated(bench: Bench, name: str, key: str, sensitivity: float = 1.0) -> Contribution:
    """Return the relative contribution of a value with its stated u."""
    value = bench.get(key)
    u = 0.0 if value is None else bench.u(key)
    share = u / abs(float(value.magnitude)) if value is not None and value.magnitude else u
    return Contribution(name, 1.0, share, sensitivity, distribution=bench.distribution(key))


def _drive_terms(bench: Bench, line: BenchLine, *, drive_is_read: bool) -> list[Contribution]:
    terms = []
    if drive_is_read:
        terms = [
            _stated(bench, "drive reading", "drive.divider"),
            _stated(bench, "ADC reference", "adc.reference"),
        ]
    elif line.drive_v:
        terms = [Contribution("drive setting", 1.0, line.drive_u_v / line.drive_v, -1.0)]
    if bench.text("drive.point") not in (None, "actuator terminals"):
        terms.append(_stated(bench, "drive amplifier", "drive.amplifier_gain", -1.0))
    return terms


def _extremes_term(bench: Bench) -> Contribution:
    """Return stated extremes; those of a scan scatter far less than the power drifts."""
    low, high = bench.get("fringe.low"), bench.get("fringe.high")
    if low is None or high is None:
        return Contribution("fringe extremes", 1.0, 0.0, 1.0)
    u = math.hypot(bench.u("fringe.low"), bench.u("fringe.high"))
    return Contribution("fringe extremes", 1.0, u / (high.magnitude - low.magnitude), 1.0)


def _drift_term(bench: Bench) -> Contribution:
    """Return the drift of high − low: two recordings and two scans, each with its own."""
    if bench.u("fringe.drift"):
        return _stated(bench, "power drift between recordings", "fringe.drift")
    name = "power drift between recordings (assumed)"
    return Contribution(name, 1.0, ASSUMED_DRIFT / math.sqrt(3), 1.0, distribution="rectangular")


def _curvature_terms(
    bench: Bench, swing_v: float | None, *, drive_is_read: bool
) -> list[Contribution]:
    """Return the converter's curvature in a line at mid-fringe, between the extremes.

    Against the chord between the extremes at m ± s of half the range the slope of q·(1 − x²) is the
    same, and that of c·(x³ − x) differs by 2(3m² − 1) − 2(3m² + s² − 1) = −2s². The drive, read
    about 0 V, has the slope −2c.
    """
    if swing_v is None or bench.get("adc.range") is None:
        return []
    s = 2.0 * swing_v / bench.magnitude("adc.range")
    cubic = 2.0 * (1.0 - s * s) if drive_is_read else -2.0 * s * s
    return [_stated(bench, "ADC curvature (cubic)", "adc.cubic", cubic)]


def _pole_term(bench: Bench, frequency_hz: float) -> Contribution:
    amplifier = Readout.of(bench).amplifier
    u = 0.0 if amplifier is None else amplifier.relative_effect(frequency_hz)
    return Contribution("readout response", 1.0, u, 1.0)
