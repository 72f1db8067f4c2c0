"""One driven recording read, fitted and shown by every route: what ``midfringe fringe`` answers."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from calibration.driven_fringe import fit_driven_fringe_si
from calibration.errors import CalibrationError
from calibration.found_extremes import Level
from calibration.fringe_fit import FringeFit
from calibration.route import Agreement, Route, agreement_of
from calibration.routes import fringe_routes
from calibration.ruler import Ruler
from calibration.scan import ScanFit, fit_scan
from firmware_bridge.trace import Trace

__all__ = ["FringeReading", "read_fringe"]


_CLEAR_DISAGREEMENT = 1.5  # three standard uncertainties; 1 is passed by chance once in 22 times


@dataclass(frozen=True)
class FringeReading:
    """A fit with its routes.

    Attributes
    ----------
    fit : FringeFit
        The driven fringe.
    frequencies_hz : tuple of float
        Lines [Hz].
    routes : list of Route
        What each route gave.
    agreement : Agreement or None
        How well they agree; None where only one may be trusted.
    extremes_from : str
        Where the extremes came from.
    reasons : list of str
        Why the result must not be trusted; empty where nothing was found.
    """

    fit: FringeFit
    frequencies_hz: tuple[float, ...]
    routes: list[Route]
    agreement: Agreement | None
    extremes_from: str
    reasons: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON document.

        Returns
        -------
        dict
            With the keys that programs rely on.
        """
        fit = self.fit
        return {
            "low": fit.low,
            "high": fit.high,
            "contrast": fit.contrast,
            "slope": fit.slope,
            "slope_per_metre": fit.slope_per_metre,
            "working_phase": fit.working_phase,
            "phase_amplitude": fit.phase_amplitude,
            "displacement_amplitude": fit.displacement_amplitude,
            "line_phase": fit.phase,
            "frequency": {"value": list(self.frequencies_hz), "unit": "Hz", "u": None},
            "clock_offset": fit.clock_offset,
            "residual_rms": fit.residual_rms,
            "extremes_from": self.extremes_from,
            "routes": [route.to_dict() for route in self.routes],
            "agreement": None if self.agreement is None else self.agreement.to_dict(),
            "trustworthy": not self.reasons,
            "reasons": self.reasons,
        }


def _undetermined(fit: FringeFit) -> bool:
    return any(reason.startswith("depth not determined") for reason in fit.reasons)


def _scan_of_rest(trace: Trace, whole: Trace | None) -> ScanFit | None:
    """Return the extremes from the rest of the same recording, where that is a sound scan."""
    if whole is None or len(whole.values) <= len(trace.values):
        return None
    rest = whole.values.copy()
    begin = trace.start_index - whole.start_index
    rest[begin : begin + len(trace.values)] = np.nan
    try:
        scan = fit_scan(rest, trace.rate_hz)
    except CalibrationError:
        return None
    return scan if scan.is_trustworthy else None


def read_fringe(
    trace: Trace,
    frequencies_hz: Sequence[float],
    *,
    low: Level | None = None,
    high: Level | None = None,
    scan: ScanFit | None = None,
    whole: Trace | None = None,
    dark: Level | None = None,
    ruler: Ruler | None = None,
) -> FringeReading:
    """Fit a driven recording and compare the routes to metres.

    Parameters
    ----------
    trace : Trace
        Photodiode over the stretch asked for.
    frequencies_hz : sequence of float
        Lines [Hz].
    low, high : Level, optional
        Given extremes.
    scan : ScanFit, optional
        Extremes found in another recording, where none are given.
    whole : Trace, optional
        The whole recording; where the stretch alone does not determine the depth, the rest of it is
        searched for whole fringes.
    dark : Level, optional
        Level without light.
    ruler : Ruler, optional
        Metres per radian.

    Returns
    -------
    FringeReading
        Fit, routes, agreement and reasons.

    Raises
    ------
    CalibrationError
        If lines, extremes or the number of samples break a rule.
    """
    reasons: list[str] = []
    source = "the record itself"
    if low is not None or high is not None:
        source = "given"
    elif scan is not None:
        low, high, source = Level(scan.low, scan.low_u), Level(scan.high, scan.high_u), "a scan"
        reasons += [f"extremes: {reason}" for reason in scan.reasons]
    fit = _fit(trace, frequencies_hz, low, high, dark, ruler)
    if low is None and high is None and _undetermined(fit):
        rest = _scan_of_rest(trace, whole)
        if rest is not None:
            low, high = Level(rest.low, rest.low_u), Level(rest.high, rest.high_u)
            source = "whole fringes elsewhere in the recording"
            fit = _fit(trace, frequencies_hz, low, high, dark, ruler)
    reasons += fit.reasons
    routes = fringe_routes(
        trace.values, trace.rate_hz, frequencies_hz, fit, ruler, trace.start_index
    )
    agreement = agreement_of(routes)
    if agreement is not None and agreement.normalised_error > _CLEAR_DISAGREEMENT:
        reasons.append(
            f"the routes disagree: normalised error {agreement.normalised_error:.2g} between the "
            f"driven fringe and {' or '.join(agreement.compared)}"
        )
    return FringeReading(fit, tuple(frequencies_hz), routes, agreement, source, reasons)


def _fit(
    trace: Trace,
    frequencies_hz: Sequence[float],
    low: Level | None,
    high: Level | None,
    dark: Level | None,
    ruler: Ruler | None,
) -> FringeFit:
    return fit_driven_fringe_si(
        trace.values,
        trace.rate_hz,
        frequencies_hz,
        low=None if low is None else low.value,
        high=None if high is None else high.value,
        low_u=low.u if low else 0.0,
        high_u=high.u if high else 0.0,
        start_index=trace.start_index,
        value_unit=trace.unit,
        ruler=ruler,
        dark=None if dark is None else dark.value,
        dark_u=dark.u if dark else 0.0,
    )
