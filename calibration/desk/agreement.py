"""Whether a line measured today agrees with the calibration in force.

What both share (wavelength, index, the converter's scale, the drive's reading, the fringe's extremes)
cancels between them and is left out of the difference's uncertainty: it would hide a change. Magnitude
and phase are compared each by itself.
"""

from dataclasses import dataclass
from math import hypot, inf, sqrt
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.own_uncertainty import DRIVE, own_u
from calibration.desk.phase_agreement import PhaseAgreement, phase_agreement
from calibration.desk.temperature_law import TemperatureLaw
from calibration.kept_readout import kept_readout
from metro.measured import Measured

if TYPE_CHECKING:
    from calibration.desk.line_entry import LineEntry
    from calibration.record import ActuatorEntry, Calibration

__all__ = ["Agreement", "agreement"]

_SAME_LINE = 1e-3


@dataclass(frozen=True)
class Agreement:
    """A line result beside what the calibration foretells.

    Parameters
    ----------
    entry : LineEntry
        The result.
    measured, expected : Measured
        Corrected for temperature; u without what both share.
    normalised_error : float
        |difference| of the magnitudes over its expanded uncertainty (95 %); agreement up to 1.
    phase : PhaseAgreement or None
        The same of the phases; None where the result has none.
    reasons : list of str
        Why the result does not agree, or says nothing; empty where it agrees.
    cautions : list of str
        What a reader should know.
    """

    entry: "LineEntry"
    measured: Measured
    expected: Measured
    normalised_error: float
    phase: PhaseAgreement | None
    reasons: list[str]
    cautions: list[str]

    @property
    def is_agreed(self) -> bool:
        """Whether the line agrees with the calibration."""
        return not self.reasons

    @property
    def relative_difference(self) -> float:
        """(measured − expected)/expected."""
        expected = float(self.expected.magnitude)
        return float(self.measured.magnitude) / expected - 1.0

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "bench": self.entry.bench,
            "time": self.entry.time,
            "line": Measured.of(self.entry.line_hz, "Hz"),
            "measured": self.measured,
            "expected": self.expected,
            "relative_difference": self.relative_difference,
            "normalised_error": self.normalised_error,
            "phase": None if self.phase is None else self.phase.to_dict(),
            "agree": self.is_agreed,
            "reasons": self.reasons,
            "cautions": self.cautions,
        }


def agreement(
    entry: "LineEntry", calibration: "Calibration", law: TemperatureLaw | None = None
) -> Agreement:
    """Return a line result beside what a calibration foretells.

    Parameters
    ----------
    entry : LineEntry
        A ratio to the drive: volts per volt near mid-fringe, or metres per volt of a converted
        recording.
    calibration : Calibration
        In force.
    law : TemperatureLaw, optional
        How the actuator follows temperature.

    Returns
    -------
    Agreement
        With the reasons where it does not agree.

    Raises
    ------
    LedgerError
        If the two cannot be compared.

    References
    ----------
    ISO/IEC 17043 (normalised error).
    """
    actuator = _actuator(entry, calibration)
    law = TemperatureLaw() if law is None else law
    expected, pickup = _expected(entry, actuator, calibration)
    measured = _at_calibration(entry, calibration, law)
    own, dof = own_u(actuator.budget)
    own *= expected / float(actuator.magnitude.magnitude)
    # One slope alone cannot tell pick-up from motion: all of it, at any phase against the line.
    u_expected = hypot(own, pickup / sqrt(2.0))
    foretold = Measured.of(expected, entry.value.unit, u_expected, dof)
    both = _difference(measured, foretold)
    expanded = both.coverage_factor() * float(both.u_magnitude)
    error = abs(float(both.magnitude)) / expanded if expanded > 0 else inf
    reasons = [f"the result is not to be trusted: {reason}" for reason in entry.reasons]
    reasons += [f"the calibration is not to be trusted: {r}" for r in calibration.all_reasons]
    phase = phase_agreement(entry, actuator, calibration, pickup / expected)
    found = Agreement(entry, measured, foretold, error, phase, reasons, [])
    if error > 1.0:
        reasons.append(
            f"the line at {entry.line_hz:.9g} Hz differs from the calibration of "
            f"{calibration.created} by {100 * found.relative_difference:+.2g} %, "
            f"{error:.2g} times the uncertainty of the difference (95 %)"
        )
    turned = "" if phase is None else phase.reason(entry.line_hz, calibration.created)
    reasons += [turned] if turned else []
    found.cautions.extend(_cautions(entry, calibration, law))
    found.cautions.extend(_phase_cautions(phase))
    return found


def _phase_cautions(phase: PhaseAgreement | None) -> list[str]:
    if phase is None:
        return ["the result has no phase: its magnitude alone is compared"]
    found = (
        []
        if phase.measured.u_magnitude is not None
        else ["the phase of the result has no uncertainty of its own; it is taken as exact"]
    )
    return [*found, *([phase.caution] if phase.caution else [])]


def _actuator(entry: "LineEntry", calibration: "Calibration") -> "ActuatorEntry":
    if not entry.is_ratio:
        raise LedgerError(
            f"the line at {entry.line_hz:g} Hz has no ratio to the drive; an amplitude alone says "
            "nothing about the actuator"
        )
    if entry.value.unit not in ("1", "m/V"):
        raise LedgerError(
            "a ratio must be volts per volt or metres per volt to be compared with a calibration, "
            f"got {entry.value.unit}"
        )
    for actuator in calibration.actuator:
        frequency_hz = float(actuator.frequency.magnitude)
        if abs(frequency_hz - entry.line_hz) <= _SAME_LINE * frequency_hz:
            break
    else:
        listed = ", ".join(f"{float(a.frequency.magnitude):g} Hz" for a in calibration.actuator)
        raise LedgerError(
            f"the calibration has no line at {entry.line_hz:g} Hz; it has those at {listed}"
        )
    if actuator.phase is None:
        raise LedgerError(
            "the calibration rests on the drive's setting, the result on its reading: they cannot "
            "be compared"
        )
    return actuator


def _expected(
    entry: "LineEntry", actuator: "ActuatorEntry", calibration: "Calibration"
) -> tuple[float, float]:
    """Return the ratio as it should be read, and what pick-up may add to it."""
    per_volt_read = float(actuator.magnitude.magnitude) * _drive_factor(actuator)
    # the calibration is corrected for the amplifier, the reading is not
    per_volt_read *= abs(kept_readout(calibration).voltage_response(entry.line_hz))
    slope = float(calibration.readout_slope.magnitude)
    pickup = 0.0 if actuator.pickup is None else float(actuator.pickup.magnitude)
    if entry.value.unit == "m/V":
        return per_volt_read, pickup / slope
    return per_volt_read * slope, pickup


def _drive_factor(actuator: "ActuatorEntry") -> float:
    """Return volts at the actuator per volt of the drive's reading, as the budget keeps them."""
    factor = 1.0
    for row in actuator.budget.contributions:
        if row.name in DRIVE:
            factor *= row.value
    return factor


def _at_calibration(
    entry: "LineEntry", calibration: "Calibration", law: TemperatureLaw
) -> Measured:
    """Return the result at the temperature of the calibration."""
    reference = calibration.conditions.get("temperature")
    value, own = float(entry.value.magnitude), entry.value.u_magnitude
    own_u = 0.0 if own is None else float(own)
    if not law.is_used or reference is None or entry.temperature_k is None:
        return Measured.of(value, entry.value.unit, own_u, entry.value.dof)
    reference_k = float(reference.magnitude)
    corrected = law.corrected(value, entry.temperature_k, reference_k)
    lever = law.u * (entry.temperature_k - reference_k)
    read = law.coefficient * float(reference.u_magnitude or 0.0)
    u = hypot(own_u, corrected * lever, corrected * read)
    return Measured.of(corrected, entry.value.unit, u, entry.value.dof)


def _difference(a: Measured, b: Measured) -> Measured:
    u_a, u_b = float(a.u_magnitude), float(b.u_magnitude)
    variance = u_a**2 + u_b**2
    weak = u_a**4 / a.dof + u_b**4 / b.dof  # Welch and Satterthwaite
    dof = variance**2 / weak if weak > 0 else inf
    difference = float(a.magnitude) - float(b.magnitude)
    return Measured.of(difference, a.unit, sqrt(variance), dof)


def _cautions(entry: "LineEntry", calibration: "Calibration", law: TemperatureLaw) -> list[str]:
    found = list(entry.cautions)
    if entry.value.unit == "1":
        found.append(
            "volts per volt agree at mid-fringe only: away from it, or at another power, convert "
            "the recording first"
        )
    if entry.value.u_magnitude is None:
        found.append("the result has no uncertainty of its own; it is taken as exact")
    reference = calibration.conditions.get("temperature")
    if not law.is_used and reference is not None and entry.temperature_k is not None:
        moved = entry.temperature_k - float(reference.magnitude)
        if abs(moved) > 1.0:
            found.append(
                f"{moved:+.2g} K from the calibration, not corrected for (--temperature-coefficient)"
            )
    return found
