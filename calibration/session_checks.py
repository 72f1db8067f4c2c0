"""What a session lets one check: scans against each other, the sign, and what was left out."""

from collections.abc import Mapping, Sequence
from dataclasses import replace
from math import pi, sqrt
from pathlib import Path
from typing import Any

import numpy as np

from calibration.actuator_entry import ActuatorEntry
from calibration.bench_contradictions import (
    contradiction_cautions,
    remark_cautions,
    step_reasons,
)
from calibration.extremes import Extremes
from calibration.line_fit import LineFit
from calibration.scan import ScanFit
from calibration.session import Session, has_extremes
from calibration.slope_line import SlopeLine, is_driven, is_noise_known
from calibration.term import Term
from calibration.working_point import PhaseRecord
from metro.bench import Bench
from metro.cautions import bench_cautions
from metro.measured import Measured

__all__ = [
    "cautions_of",
    "failed",
    "line_reasons",
    "reasons_of",
    "repeat_checks",
    "role_reasons",
    "scan_checks",
    "sign_reasons",
]

AGREEMENT = 1.0  # normalised error |d|/U with U at 95 %: common practice, ISO/IEC 17043
_K95 = 1.96
_LIT = 0.05  # of the fringe's swing: light on a recording that should be dark
_FRINGE = 0.1  # of the swing: rms of a recording that should hold one beam alone
FAILED = 2.0  # 3.9 standard uncertainties: by chance once in ten thousand

_DRIVEN_ROLES = ("pickup", "blocked-x", "blocked-y")

_MISSING = {
    "dark": "dark level not measured: the contrast is unknown or taken from the bench file",
    "pickup": "electrical pick-up of the drive not measured with the beam blocked",
    "blocked-x": "the y arm alone, drive on, not recorded: its beam's tilt is unknown",
    "blocked-y": "the x arm alone, drive on, not recorded: its beam's tilt is unknown",
    "scan": "no scan: the fringe's extremes are taken as given",
    "lines-rising": "no lines on the rising slope: pick-up is not separated from motion",
    "lines-falling": "no lines on the falling slope: pick-up is not separated from motion",
}


def scan_checks(scans: Sequence[ScanFit], drift: Term) -> list[dict[str, Any]]:
    """Return the comparison of the first and the last scan, where the drift is known otherwise."""
    if len(scans) < 2 or drift.kind == "A":  # a drift taken from the scans says nothing about them
        return []
    swings = np.array([scan.high - scan.low for scan in scans])
    weights = np.array([-1.0, 1.0])
    own = [float(weights @ scan.covariance @ weights) for scan in (scans[0], scans[-1])]
    u = sqrt(sum(own) + 2.0 * (drift.u * float(swings.mean())) ** 2)
    return [_check("high − low of the first and the last scan", float(swings[-1] - swings[0]), u)]


def repeat_checks(
    lines: Sequence[tuple[float, Sequence[SlopeLine]]], drift: Term
) -> list[dict[str, Any]]:
    """Return the comparison of the first and the last recording of a line on one slope."""
    checks = []
    for frequency_hz, records in lines:
        if len(records) < 2:
            continue
        first, last = records[0], records[-1]
        own = [float(np.trace(record.covariance)) / 2 for record in (first, last)]
        u = sqrt(sum(own) + 2.0 * (drift.u * abs(first.ratio)) ** 2)
        name = f"the line at {frequency_hz:g} Hz, first and last on the {first.slope} slope"
        checks.append(_check(name, abs(last.ratio) - abs(first.ratio), u))
    return checks


def failed(checks: Sequence[Mapping[str, Any]]) -> list[str]:
    """Return why a calibration must not be trusted: comparisons far beyond their uncertainty."""
    return [
        f"{check['name']}: they differ, normalised error {check['normalised_error']:.2g}"
        for check in checks
        if check["normalised_error"] > FAILED
    ]


def _check(name: str, difference: float, u: float) -> dict[str, Any]:
    error = abs(difference) / (_K95 * u) if u else 0.0
    return {"name": name, "normalised_error": error, "agree": error <= AGREEMENT}


def cautions_of(bench: Bench, session: Session, drift: Term) -> list[str]:
    """Return what a user of the calibration should know, one line each."""
    missing = dict(_MISSING)
    if not session.slopes:  # a free-running bench passes both: what that leaves is said elsewhere
        missing = {role: text for role, text in missing.items() if not role.startswith("lines-")}
    if session.of("lines-free") and not has_extremes(bench):
        missing["scan"] = "no scan: the fringe's extremes are those of the free-running recordings"
    cautions = [text for role, text in missing.items() if not session.of(role)]
    if bench.get("photodiode.bandwidth") is None:
        cautions.append("photodiode.bandwidth not stated: the amplifier is taken as fast enough")
    if not bench.u("laser.wavelength"):
        cautions.append("laser.wavelength has no u: the wavelength counts as exactly known")
    cautions += _given_extremes(bench, session)
    if "assumed" in drift.name:
        cautions.append("one scan only and no fringe.drift: the power's drift is an assumption")
    cautions += bench_cautions(bench)
    for record in session:
        if record.role in _DRIVEN_ROLES and record.drive is None and session.driven[0].drive:
            name = Path(record.path).name
            cautions.append(f"{name} has no drive channel: what it measured could not be used")
        if record.used_fraction < 1.0:
            left_out = 100 * (1.0 - record.used_fraction)
            cautions.append(f"{Path(record.path).name}: {left_out:.2g} % of the samples left out")
    records = list(session)
    return [*cautions, *contradiction_cautions(bench, records), *remark_cautions(records)]


def _given_extremes(bench: Bench, session: Session) -> list[str]:
    if session.of("scan") or not has_extremes(bench):
        return []
    return [
        f"extremes as given, u not stated: {key} counts as exactly known; state its u in the bench "
        "file, as { value = …, u = … }, or record a scan"
        for key in ("fringe.low", "fringe.high")
        if not bench.u(key)
    ]


def reasons_of(
    scans: Sequence[ScanFit], fits: Sequence[tuple[str, PhaseRecord, LineFit]]
) -> list[str]:
    """Return why the calibration as a whole must not be trusted, one line each."""
    reasons = [f"scan: {reason}" for scan in scans for reason in scan.reasons]
    for path, phase, _ in fits:
        reasons += [f"{Path(path).name}: {reason}" for reason in phase.distrust_reasons]
    return list(dict.fromkeys(reasons))


def line_reasons(
    entries: Sequence[ActuatorEntry], fits: Sequence[tuple[str, PhaseRecord, LineFit]]
) -> list[ActuatorEntry]:
    """Return the entries with what the fits of the recordings say against their line.

    Parameters
    ----------
    entries : sequence of ActuatorEntry
        In the order of the lines.
    fits : sequence of (str, PhaseRecord, LineFit)
        Each lines recording: its path and its fit, lines in the same order.

    Returns
    -------
    list of ActuatorEntry
        Reasons name their recording.
    """
    return [
        replace(entry, reasons=[*entry.reasons, *_said_of_line(fits, number)])
        for number, entry in enumerate(entries)
    ]


def _said_of_line(fits: Sequence[tuple[str, PhaseRecord, LineFit]], number: int) -> list[str]:
    said = []
    for path, _, fit in fits:
        line, name = fit.lines[number], Path(path).name
        if is_driven(line):  # else nothing was to be found there
            said += [f"{name}: {reason}" for reason in line.distrust_reasons]
            if not is_noise_known(line):
                said.append(f"{name}: the noise beside it could not be told")
    return list(dict.fromkeys(said))


def role_reasons(
    bench: Bench, session: Session, extremes: Extremes, dark: Measured | None
) -> list[str]:
    """Return why recordings do not look like what their role and the bench file say."""
    reasons = step_reasons(bench, session)
    if dark is not None:
        dark_v, u = float(dark.magnitude), float(dark.u_magnitude or 0.0)
        if dark_v > extremes.low_v + 4 * u + _LIT * extremes.swing_v:
            reasons.append(
                f"the dark level {dark_v:.4g} V lies above the fringe's low {extremes.low_v:.4g} V: "
                "the beam was not blocked"
            )
    for record in session:
        volts, name = record.photodiode.values, Path(record.path).name
        level_v, spread_v = float(np.nanmean(volts)), float(np.nanstd(volts))
        if record.role == "pickup" and level_v > extremes.low_v + _LIT * extremes.swing_v:
            reasons.append(
                f"{name}: light {level_v:.3g} V on a pick-up recording: the beam was not blocked"
            )
        if record.role.startswith("blocked") and spread_v > _FRINGE * extremes.swing_v:
            reasons.append(f"{name} shows a fringe, though one arm should be blocked")
    return reasons


def sign_reasons(bench: Bench, entries: Sequence[ActuatorEntry]) -> list[ActuatorEntry]:
    """Return the entries; all distrusted if the lowest line's sign contradicts the declared one."""
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
    return [replace(entry, reasons=[*entry.reasons, reason]) for entry in entries]
