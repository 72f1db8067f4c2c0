"""The calibration file: what was measured, from what, under which assumptions; JSON, versioned."""

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from metro.budget import Budget
from metro.measured import Measured
from metro.output import plain

__all__ = ["FORMAT", "VERSION", "ActuatorEntry", "Calibration", "CalibrationFileError", "load"]

FORMAT = "midfringe calibration"
VERSION = 1


class CalibrationFileError(CalibrationError):
    """A calibration file that does not hold what it should; the message names the place."""


@dataclass(frozen=True)
class ActuatorEntry:
    """The actuator at one line.

    Parameters
    ----------
    frequency : Measured
        Frequency of the line [Hz].
    magnitude, phase : Measured
        Differential displacement per volt at the actuator [m/V] and its phase [rad]; no phase
        where the drive was not recorded.
    pickup : Measured or None
        What adds to the photodiode without motion, volts per volt of the drive's reading.
    budget, phase_budget : Budget
        What stands behind both.
    reasons : list of str
        Why the line must not be trusted, empty if there is no reason.
    """

    frequency: Measured
    magnitude: Measured
    phase: Measured | None
    pickup: Measured | None
    budget: Budget
    phase_budget: Budget
    reasons: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "frequency": self.frequency.to_dict(with_dof=True),
            "magnitude": self.magnitude.to_dict(with_dof=True),
            "phase": _maybe_dict(self.phase),
            "pickup": _maybe_dict(self.pickup),
            "budget": self.budget.to_dict(),
            "phase_budget": self.phase_budget.to_dict(),
            "reasons": self.reasons,
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> "ActuatorEntry":
        """Return the entry that `to_dict` wrote."""
        return cls(
            frequency=Measured.from_dict(document["frequency"]),
            magnitude=Measured.from_dict(document["magnitude"]),
            phase=_maybe_measured(document["phase"]),
            pickup=_maybe_measured(document["pickup"]),
            budget=Budget.from_dict(document["budget"]),
            phase_budget=Budget.from_dict(document["phase_budget"]),
            reasons=list(document["reasons"]),
        )


@dataclass(frozen=True, eq=False)
class Calibration:
    """A calibration with all that stands behind it.

    Parameters
    ----------
    created : str
        UTC, ISO 8601.
    software : str
        Version of the program.
    actuator : list of ActuatorEntry
        Metres per volt at each line.
    readout_slope : Measured
        Volts per metre of differential displacement at mid-fringe [V/m].
    readout_budget : Budget
        What stands behind it.
    extremes : Extremes
        Low and high of the fringe, volts as read.
    contrast, dark, clock_offset : Measured or None
        Contrast, dark level [V], relative clock offset; None where unknown.
    chain : dict of str to Measured
        Wavelength [m], index, round trips, arm length [m] where known, amplifier corner [Hz] …
    conditions : dict of str to Measured
        Temperature [K], pressure [Pa], relative humidity, as the bench file states them.
    recordings : list of dict
        Role, file, SHA-256 and counts of each recording.
    checks : list of dict
        Comparisons made on the way: name, normalised error, whether it agrees.
    assumptions, cautions, reasons : list of str
        What was taken as given; what a user should know; why it must not be trusted.
    """

    created: str
    software: str
    actuator: list[ActuatorEntry]
    readout_slope: Measured
    readout_budget: Budget
    extremes: Extremes
    contrast: Measured | None
    dark: Measured | None
    clock_offset: Measured | None
    chain: dict[str, Measured]
    conditions: dict[str, Measured]
    recordings: list[dict[str, Any]]
    checks: list[dict[str, Any]]
    assumptions: list[str]
    cautions: list[str]
    reasons: list[str]

    @property
    def is_trustworthy(self) -> bool:
        """Whether no reason for distrust was found, in the whole or in any line."""
        return not self.all_reasons

    @property
    def all_reasons(self) -> list[str]:
        """Every reason for distrust, of the whole and of each line."""
        lines = [
            f"line at {float(entry.frequency.magnitude):g} Hz: {reason}"
            for entry in self.actuator
            for reason in entry.reasons
        ]
        return [*self.reasons, *lines]

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form, as the file holds it."""
        document = {
            "format": FORMAT,
            "version": VERSION,
            "created": self.created,
            "software": self.software,
            "actuator": [entry.to_dict() for entry in self.actuator],
            "readout": {
                "slope": self.readout_slope.to_dict(with_dof=True),
                "budget": self.readout_budget.to_dict(),
            },
            "extremes": _extremes_to_dict(self.extremes),
            "contrast": _maybe_dict(self.contrast),
            "dark": _maybe_dict(self.dark),
            "clock_offset": _maybe_dict(self.clock_offset),
            "chain": {name: value.to_dict(with_dof=True) for name, value in self.chain.items()},
            "conditions": {name: value.to_dict() for name, value in self.conditions.items()},
            "recordings": self.recordings,
            "checks": self.checks,
            "assumptions": self.assumptions,
            "cautions": self.cautions,
            "trustworthy": self.is_trustworthy,
            "reasons": self.reasons,
        }
        return dict(plain(document))

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> "Calibration":
        """Return the calibration that `to_dict` wrote.

        Parameters
        ----------
        document : mapping
            As the file holds it.

        Returns
        -------
        Calibration
            The same calibration.

        Raises
        ------
        CalibrationFileError
            If it is no calibration, of a newer version, or something is missing.
        """
        _check_format(document)
        try:
            return cls(
                created=document["created"],
                software=document["software"],
                actuator=[ActuatorEntry.from_dict(entry) for entry in document["actuator"]],
                readout_slope=Measured.from_dict(document["readout"]["slope"]),
                readout_budget=Budget.from_dict(document["readout"]["budget"]),
                extremes=_extremes_from_dict(document["extremes"]),
                contrast=_maybe_measured(document["contrast"]),
                dark=_maybe_measured(document["dark"]),
                clock_offset=_maybe_measured(document["clock_offset"]),
                chain={k: Measured.from_dict(v) for k, v in document["chain"].items()},
                conditions={k: Measured.from_dict(v) for k, v in document["conditions"].items()},
                recordings=document["recordings"],
                checks=document["checks"],
                assumptions=document["assumptions"],
                cautions=document["cautions"],
                reasons=document["reasons"],
            )
        except KeyError as error:
            raise CalibrationFileError(f"the calibration has no {error.args[0]!r}") from None
        except (TypeError, ValueError, AttributeError) as error:
            raise CalibrationFileError(f"the calibration does not hold together: {error}") from None


def load(path: str | Path) -> Calibration:
    """Return the calibration kept in a file.

    Parameters
    ----------
    path : str or Path
        A calibration written by ``midfringe calibrate``.

    Returns
    -------
    Calibration
        With every measured value and its degrees of freedom.

    Raises
    ------
    CalibrationFileError
        If the file cannot be read, is no calibration, or is of a newer version.
    """
    try:
        document = json.loads(Path(path).read_text(encoding="utf-8"))
    except OSError as error:
        raise CalibrationFileError(f"{path}: {error.strerror or error}") from None
    except ValueError as error:
        raise CalibrationFileError(f"{path} is no JSON document: {error}") from None
    try:
        return Calibration.from_dict(document)
    except CalibrationError as error:
        raise CalibrationFileError(f"{path}: {error}") from None


def _check_format(document: object) -> None:
    if not isinstance(document, Mapping) or document.get("format") != FORMAT:
        raise CalibrationFileError(f"this is no calibration: its format is not {FORMAT!r}")
    version = document.get("version")
    if not isinstance(version, int) or version < 1:
        raise CalibrationFileError(f"version must be a whole number from 1, got {version!r}")
    if version > VERSION:
        raise CalibrationFileError(
            f"the calibration has version {version}; this program reads up to {VERSION}"
        )


def _extremes_to_dict(extremes: Extremes) -> dict[str, Any]:
    u_low, u_high = np.sqrt(np.diag(extremes.covariance))
    return {
        "low": Measured.of(extremes.low_v, "V", float(u_low), extremes.dof).to_dict(with_dof=True),
        "high": Measured.of(extremes.high_v, "V", float(u_high), extremes.dof).to_dict(
            with_dof=True
        ),
        "covariance": float(extremes.covariance[0, 1]),
        "scans": extremes.scans,
    }


def _extremes_from_dict(document: Mapping[str, Any]) -> Extremes:
    low, high = Measured.from_dict(document["low"]), Measured.from_dict(document["high"])
    shared = document["covariance"]
    covariance = [[low.u_magnitude**2, shared], [shared, high.u_magnitude**2]]
    return Extremes(
        low.magnitude, high.magnitude, np.array(covariance), low.dof, int(document["scans"])
    )


def _maybe_dict(value: Measured | None) -> dict[str, Any] | None:
    return None if value is None else value.to_dict(with_dof=True)


def _maybe_measured(document: Mapping[str, Any] | None) -> Measured | None:
    return None if document is None else Measured.from_dict(dict(document))
