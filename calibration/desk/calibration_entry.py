"""A calibration as the ledger keeps it: the whole file, and what is asked for most."""

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.utc import parse_time
from calibration.record import Calibration, CalibrationFileError, parse
from metro.measured import Measured

__all__ = ["CalibrationEntry"]


@dataclass(frozen=True, eq=False)
class CalibrationEntry:
    """One calibration in the ledger.

    Parameters
    ----------
    calibration : Calibration
        As measured.
    text : str
        The file, to the letter.
    file : str
        Its name when it was added.
    bench : str
        Which bench, where several share a ledger.
    added : str
        UTC, ISO 8601; empty until it is in the ledger.
    """

    calibration: Calibration
    text: str
    file: str
    bench: str = "bench"
    added: str = ""

    @classmethod
    def of_file(cls, path: str | Path, bench: str = "bench") -> "CalibrationEntry":
        """Return the entry of a calibration file.

        Parameters
        ----------
        path : path
            Written by ``midfringe calibrate``.
        bench : str
            Which bench.

        Returns
        -------
        CalibrationEntry
            Ready to be added.

        Raises
        ------
        LedgerError
            If the file cannot be read, is no calibration or breaks the schema.
        MissingExtraError
            If jsonschema is not installed.
        """
        try:
            text = Path(path).read_text(encoding="utf-8")
            calibration = parse(text, path)
        except OSError as error:
            reason = (error.strerror or str(error)).lower()
            raise LedgerError(f"cannot read the calibration {path}: {reason}") from None
        except CalibrationFileError as error:
            raise LedgerError(str(error)) from None
        except ValueError:  # bytes that are no text, such as those of a picture
            raise LedgerError(f"{path} is no JSON document: it is no UTF-8 text") from None
        return cls(calibration, text, str(path), bench)

    @property
    def sha256(self) -> str:
        """Hash of the file."""
        return hashlib.sha256(self.text.encode()).hexdigest()

    @property
    def created(self) -> str:
        """When it was made, UTC, as the ledger keeps it."""
        return parse_time(self.calibration.created, f"{self.file}: created")

    def to_row(self) -> dict[str, Any]:
        """Return the entry as a row of the table."""
        slope = self.calibration.readout_slope
        temperature = self.calibration.conditions.get("temperature")
        return {
            "bench": self.bench,
            "created": self.created,
            "added": self.added,
            "sha256": self.sha256,
            "file": self.file,
            "software": self.calibration.software,
            "slope": float(slope.magnitude),
            "slope_u": _u(slope),
            "temperature": None if temperature is None else float(temperature.magnitude),
            "temperature_u": None if temperature is None else _u(temperature),
            "trustworthy": self.calibration.is_trustworthy,
            "document": self.text,
        }

    def actuator_rows(self, number: int) -> list[dict[str, Any]]:
        """Return the rows of its lines, under the calibration's number."""
        return [
            {
                "calibration": number,
                "place": place,
                "frequency": float(entry.frequency.magnitude),
                "magnitude": float(entry.magnitude.magnitude),
                "magnitude_u": _u(entry.magnitude),
                "phase": None if entry.phase is None else float(entry.phase.magnitude),
                "phase_u": None if entry.phase is None else _u(entry.phase),
            }
            for place, entry in enumerate(self.calibration.actuator)
        ]

    @classmethod
    def from_row(cls, row: Mapping[str, Any]) -> "CalibrationEntry":
        """Return the entry that `to_row` made."""
        calibration = Calibration.from_dict(json.loads(row["document"]))
        return cls(calibration, row["document"], row["file"], row["bench"], row["added"])

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        calibration = self.calibration
        return {
            "kind": "calibration",
            "bench": self.bench,
            "time": self.created,
            "added": self.added,
            "file": self.file,
            "sha256": self.sha256,
            "software": calibration.software,
            "readout_slope": calibration.readout_slope,
            "actuator": [
                {"frequency": e.frequency, "magnitude": e.magnitude, "phase": e.phase}
                for e in calibration.actuator
            ],
            "conditions": calibration.conditions,
            "trustworthy": calibration.is_trustworthy,
            "reasons": calibration.all_reasons,
        }


def _u(value: Measured) -> float | None:
    return None if value.u_magnitude is None else float(value.u_magnitude)
