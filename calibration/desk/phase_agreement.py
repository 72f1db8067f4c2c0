"""Whether a line's phase today is that of the calibration in force.

A mirror that moves the other way, or a record read on the wrong slope, has the right magnitude: only the
phase shows it, by half a turn.
"""

from cmath import phase as angle
from dataclasses import dataclass
from math import hypot, inf, pi, remainder, sqrt
from typing import TYPE_CHECKING, Any

from calibration.desk.own_uncertainty import own_u
from calibration.kept_readout import kept_readout
from metro.measured import Measured

if TYPE_CHECKING:
    from calibration.desk.line_entry import LineEntry
    from calibration.record import ActuatorEntry, Calibration

__all__ = ["PhaseAgreement", "phase_agreement"]


@dataclass(frozen=True)
class PhaseAgreement:
    """The phase of a line result beside what the calibration foretells.

    Parameters
    ----------
    measured, expected : Measured
        Of response over drive, as read [rad]; u without what both share.
    difference : Measured
        Measured − expected [rad], within half a period.
    period : float
        Differences of this much are not told from none [rad]: 2π, or π where no sign is known.
    caution : str
        Why the sign was not compared; empty where it was.
    """

    measured: Measured
    expected: Measured
    difference: Measured
    period: float
    caution: str

    @property
    def normalised_error(self) -> float:
        """|difference| over its expanded uncertainty (95 %); agreement up to 1."""
        both = self.difference
        expanded = both.coverage_factor() * float(both.u_magnitude)
        return abs(float(both.magnitude)) / expanded if expanded > 0 else inf

    def reason(self, line_hz: float, created: str) -> str:
        """Return why the phase does not agree, empty where it does."""
        if self.normalised_error <= 1.0:
            return ""
        off = float(self.difference.magnitude)
        turned = (
            "; half a turn: is it the other slope, or is a connection swapped?"
            if abs(off) > 0.75 * pi
            else ""
        )
        return (
            f"the phase of the line at {line_hz:.9g} Hz differs from the calibration of {created} by "
            f"{off:+.3g} rad, {self.normalised_error:.2g} times the uncertainty of the difference "
            f"(95 %){turned}"
        )

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "measured": self.measured,
            "expected": self.expected,
            "difference": self.difference,
            "period": Measured.of(self.period, "rad"),
            "normalised_error": self.normalised_error,
        }


def phase_agreement(
    entry: "LineEntry", actuator: "ActuatorEntry", calibration: "Calibration", additive: float
) -> PhaseAgreement | None:
    """Return a line result's phase beside what a calibration foretells.

    Parameters
    ----------
    entry : LineEntry
        A ratio to the drive.
    actuator : ActuatorEntry
        The calibration's line.
    calibration : Calibration
        In force.
    additive : float
        What pick-up may add to the ratio, relative to it, at any phase.

    Returns
    -------
    PhaseAgreement or None
        None where the result, or the calibration, has no phase.
    """
    if entry.phase is None or actuator.phase is None:
        return None
    readout = kept_readout(calibration)
    # the calibration is corrected for the amplifier and for the later reading of the drive
    read = readout.voltage_response(entry.line_hz) / readout.drive_response(entry.line_hz)
    u, dof = own_u(actuator.phase_budget)
    wanted = remainder(float(actuator.phase.magnitude) + angle(read), 2 * pi)
    expected = Measured.of(wanted, "rad", hypot(u, additive / sqrt(2.0)), dof)
    period, caution = _period(entry, calibration)
    away = remainder(float(entry.phase.magnitude) - wanted, period)
    u_own, u_both = float(entry.phase.u_magnitude or 0.0), float(expected.u_magnitude)
    variance = u_own**2 + u_both**2
    weak = u_own**4 / entry.phase.dof + u_both**4 / dof  # Welch and Satterthwaite
    difference = Measured.of(away, "rad", sqrt(variance), variance**2 / weak if weak > 0 else inf)
    return PhaseAgreement(entry.phase, expected, difference, period, caution)


def _period(entry: "LineEntry", calibration: "Calibration") -> tuple[float, str]:
    if entry.value.unit == "1":
        return pi, (
            "the phase of volts per volt is compared modulo half a turn: nothing says on which slope "
            "they were measured"
        )
    if "polarity" not in calibration.chain:
        return pi, (
            "the phase is compared modulo half a turn: the calibration declares no polarity of the "
            "actuator"
        )
    return 2 * pi, ""
