"""What a session lets one check: scans against each other, the sign, and what was left out."""

from collections.abc import Sequence
from dataclasses import replace
from math import hypot, pi, sqrt
from pathlib import Path
from typing import Any

import numpy as np

from calibration.line_fit import LineFit
from calibration.record import ActuatorEntry
from calibration.scan import ScanFit
from calibration.session import Session
from calibration.slope_line import is_driven
from calibration.term import Term
from calibration.working_point import PhaseRecord
from metro.bench import Bench

__all__ = ["cautions_of", "checks_of", "reasons_of", "sign_reasons"]

AGREEMENT = 1.0  # normalised error |d|/U with U at 95 %: common practice, ISO/IEC 17043
_K95 = 1.96

_MISSING = {
    "dark": "dark level not measured: the contrast is unknown or taken from the bench file",
    "pickup": "electrical pick-up of the drive not measured with the beam blocked",
    "blocked-x": "the y arm alone, drive on, not recorded: its beam's tilt is unknown",
    "blocked-y": "the x arm alone, drive on, not recorded: its beam's tilt is unknown",
    "scan": "no scan: the fringe's extremes are taken as given",
    "lines-rising": "no lines on the rising slope: pick-up is not separated from motion",
    "lines-falling": "no lines on the falling slope: pick-up is not separated from motion",
}


def checks_of(scans: Sequence[ScanFit], drift_u: float) -> list[dict[str, Any]]:
    """Return the comparison of the scans' high − low: largest difference over its U (95 %)."""
    if len(scans) < 2:
        return []
    swings = np.array([scan.high - scan.low for scan in scans])
    weights = np.array([-1.0, 1.0])
    own = [sqrt(float(weights @ scan.covariance @ weights)) for scan in scans]
    u = hypot(hypot(own[0], own[-1]), sqrt(2.0) * drift_u * float(swings.mean()))
    error = abs(float(swings[-1] - swings[0])) / (_K95 * u) if u else 0.0
    return [
        {
            "name": "high − low of the first and the last scan",
            "normalised_error": error,
            "agree": error <= AGREEMENT,
        }
    ]


def cautions_of(bench: Bench, session: Session, drift: Term) -> list[str]:
    """Return what a user of the calibration should know, one line each."""
    cautions = [text for role, text in _MISSING.items() if not session.of(role)]
    if bench.get("photodiode.bandwidth") is None:
        cautions.append("photodiode.bandwidth not stated: the amplifier is taken as fast enough")
    if not bench.u("laser.wavelength"):
        cautions.append("laser.wavelength has no u: the wavelength counts as exactly known")
    if "assumed" in drift.name:
        cautions.append("one scan only and no fringe.drift: the power's drift is an assumption")
    for record in session:
        if record.used_fraction < 1.0:
            left_out = 100 * (1.0 - record.used_fraction)
            cautions.append(f"{Path(record.path).name}: {left_out:.2g} % of the samples left out")
    return cautions


def reasons_of(
    scans: Sequence[ScanFit], fits: Sequence[tuple[str, PhaseRecord, LineFit]]
) -> list[str]:
    """Return why the calibration must not be trusted, one line each."""
    reasons = [f"scan: {reason}" for scan in scans for reason in scan.reasons]
    for path, phase, fit in fits:
        name = Path(path).name
        reasons += [f"{name}: {reason}" for reason in phase.distrust_reasons]
        for line in fit.lines:
            if is_driven(line):  # else nothing was to be found there
                where = f"{name}: line at {line.frequency_hz:g} Hz"
                reasons += [f"{where}: {reason}" for reason in line.distrust_reasons]
    return list(dict.fromkeys(reasons))


def sign_reasons(bench: Bench, entries: Sequence[ActuatorEntry]) -> list[ActuatorEntry]:
    """Return the entries; the lowest line distrusted if its sign contradicts the declared one."""
    if bench.get("actuator.polarity") is None:
        return list(entries)
    declared = bench.magnitude("actuator.polarity")
    declared *= -1.0 if bench.text("actuator.arm") == "y" else 1.0
    lowest = min(entries, key=lambda entry: float(entry.frequency.magnitude))
    if lowest.phase is None:
        return list(entries)
    phase_rad = float(lowest.phase.magnitude)
    if declared * np.cos(phase_rad) > 0:
        return list(entries)
    reason = (
        f"the sign contradicts the declared polarity: phase {phase_rad:.2f} rad at the lowest line "
        f"(within {pi / 2:.2f} rad of {0.0 if declared > 0 else pi:.2f}); are the slopes swapped?"
    )
    return [replace(e, reasons=[*e.reasons, reason]) if e is lowest else e for e in entries]
