"""The calibration file: what was measured, from what, under which assumptions; JSON, versioned."""

import json
import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.actuator_entry import ActuatorEntry, maybe_dict, maybe_measured
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.response import ActuatorResponse
from calibration.schema import misfit
from metro.budget import Budget
from metro.display import show
from metro.errors import MidfringeError
from metro.extras import MissingExtraError
from metro.measured import Measured
from metro.notebook import NotebookPage, maybe_figure
from metro.output import plain

__all__ = [
    "FORMAT",
    "VERSION",
    "ActuatorEntry",
    "Calibration",
    "CalibrationFileError",
    "load",
    "parse",
]

FORMAT = "midfringe calibration"
VERSION = 1


class CalibrationFileError(CalibrationError):
    """A calibration file that does not hold what it should; the message names the place."""


@dataclass(frozen=True, eq=False)
class Calibration(NotebookPage):
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
    line_covariance : ndarray or None
        Of the lines' relative magnitudes, then of their phases [rad]; common terms make them
        correlated.
    response : ActuatorResponse or None
        The actuator between the lines; None where they are too few.
    drive_series : list of dict
        What a drive series says about each line.
    validity : dict
        Drive, bias, history and temperature under which the calibration holds.
    open_loop : dict or None
        File and SHA-256 of the servo's open-loop gain that was undone.
    routes : list of dict
        Further routes to metres per volt, each with its valid range and its own coefficients.
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
    line_covariance: NDArray[np.float64] | None = None
    response: ActuatorResponse | None = None
    drive_series: list[dict[str, Any]] = field(default_factory=list)
    validity: dict[str, Any] = field(default_factory=dict)
    open_loop: dict[str, Any] | None = None
    routes: list[dict[str, Any]] = field(default_factory=list)

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

    def notebook_tables(self) -> list[tuple[Sequence[str], Iterable[Sequence[Any]]]]:
        """Return the actuator's lines and the readout."""
        lines = [
            (
                show(float(entry.frequency.magnitude), "Hz", 6),
                entry.magnitude,
                entry.phase,
                "; ".join(entry.reasons),
            )
            for entry in self.actuator
        ]
        readout = [
            ("readout slope", self.readout_slope),
            ("contrast", self.contrast),
            ("dark level", self.dark),
            ("clock offset", self.clock_offset),
            ("trust", "; ".join(self.all_reasons) or "no reason for distrust found"),
        ]
        return [(("line", "actuator", "phase", ""), lines), ((), readout)]

    def notebook_figure(self) -> Any:  # noqa: ANN401  # matplotlib's Figure or None
        """Return the response with its uncertainties."""
        from calibration.session_plot import response_figure

        return maybe_figure(lambda: response_figure(self))

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
            "contrast": maybe_dict(self.contrast),
            "dark": maybe_dict(self.dark),
            "clock_offset": maybe_dict(self.clock_offset),
            "chain": {name: value.to_dict(with_dof=True) for name, value in self.chain.items()},
            "conditions": {name: value.to_dict() for name, value in self.conditions.items()},
            "recordings": self.recordings,
            "checks": self.checks,
            "assumptions": self.assumptions,
            "cautions": self.cautions,
            "trustworthy": self.is_trustworthy,
            "reasons": self.reasons,
            "line_covariance": _covariance_to_dict(self.line_covariance),
            "response": self.response,
            "drive_series": self.drive_series,
            "validity": self.validity,
            "open_loop": self.open_loop,
            "routes": self.routes,
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
                contrast=maybe_measured(document["contrast"]),
                dark=maybe_measured(document["dark"]),
                clock_offset=maybe_measured(document["clock_offset"]),
                chain={k: Measured.from_dict(v) for k, v in document["chain"].items()},
                conditions={k: Measured.from_dict(v) for k, v in document["conditions"].items()},
                recordings=document["recordings"],
                checks=document["checks"],
                assumptions=document["assumptions"],
                cautions=document["cautions"],
                reasons=document["reasons"],
                line_covariance=_covariance_of(document.get("line_covariance")),
                response=_response_of(document.get("response")),
                drive_series=list(document.get("drive_series", ())),
                validity=dict(document.get("validity", {})),
                open_loop=document.get("open_loop"),
                routes=list(document.get("routes", ())),
            )
        except KeyError as error:
            raise CalibrationFileError(f"the calibration has no {error.args[0]!r}") from None
        except (TypeError, ValueError, AttributeError, ArithmeticError) as error:
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
        If the file cannot be read, is no calibration, is of a newer version, or does not fit the
        schema; the message names the place, the rule and the value.
    MissingExtraError
        If jsonschema is not installed.
    """
    try:
        text = Path(path).read_text(encoding="utf-8")
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise CalibrationFileError(f"cannot read the calibration {path}: {reason}") from None
    except ValueError:  # bytes that are no text, such as those of a picture
        raise CalibrationFileError(f"{path} is no JSON document: it is no UTF-8 text") from None
    return parse(text, path)


def parse(text: str, path: str | Path) -> Calibration:
    """Return the calibration in the text of a file.

    Parameters
    ----------
    text : str
        JSON, written by ``midfringe calibrate``.
    path : str or Path
        Where it comes from, for messages.

    Returns
    -------
    Calibration
        With every measured value and its degrees of freedom.

    Raises
    ------
    CalibrationFileError
        As for `load`.
    MissingExtraError
        If jsonschema is not installed.
    """
    try:
        document = json.loads(text, parse_constant=_refused, parse_float=_finite)
    except (ValueError, RecursionError) as error:
        raise CalibrationFileError(f"{path} is no JSON document: {error}") from None
    try:
        _check_format(document)
        problem = misfit(document)
        if problem is not None:
            raise CalibrationFileError(problem)
        return Calibration.from_dict(document)
    except MissingExtraError:
        raise
    except MidfringeError as error:
        raise CalibrationFileError(f"{path}: {error}") from None


def _refused(name: str) -> float:
    raise ValueError(f"it holds {name}, which is no number in JSON")


def _finite(text: str) -> float:
    number = float(text)
    if not math.isfinite(number):
        raise ValueError(f"it holds {text}, beyond all numbers")
    return number


def _check_format(document: object) -> None:
    if not isinstance(document, Mapping) or document.get("format") != FORMAT:
        raise CalibrationFileError(f"this is no calibration: its format is not {FORMAT!r}")
    version = document.get("version")
    if isinstance(version, bool) or not isinstance(version, int) or version < 1:
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


def _covariance_to_dict(covariance: NDArray[np.float64] | None) -> dict[str, Any] | None:
    return None if covariance is None else {"value": covariance, "unit": "1", "u": None}


def _covariance_of(document: Mapping[str, Any] | None) -> NDArray[np.float64] | None:
    return None if document is None else np.array(document["value"], dtype=np.float64)


def _response_of(document: Mapping[str, Any] | None) -> ActuatorResponse | None:
    return None if document is None else ActuatorResponse.from_dict(document)
