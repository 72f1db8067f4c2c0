"""A plan: drive and time for each line, and the file that carries it to a rehearsal or a session.

The file is JSON, ``"format": "midfringe plan"``, ``"version": 1``. Its keys:

- ``uncertainty``: wanted relative standard uncertainty of metres per volt at each line;
- ``duration``: of each lines recording [s]; one on each slope of the fringe is meant;
- ``drive_point``, ``drive_reading``: where the drives are set, and whether as peak, peak-to-peak, rms;
- ``limit``: what keeps the drives from being larger, or null where time alone sets them;
- ``lines``: for each ``frequency`` [Hz], ``drive`` [V, as ``drive_reading`` at ``drive_point``],
  ``terminals`` [V, zero to peak at the actuator], ``displacement_amplitude`` [m],
  ``phase_amplitude`` [rad], ``noise_density`` [m/√Hz], ``snr`` (of one recording), ``floor``,
  ``expected_u`` (both relative), ``compression``, ``second_harmonic``, ``third_harmonic`` (of the
  line), ``budget``, ``trustworthy``, ``reasons``;
- ``products``: the largest harmonics and intermodulation, with ``frequency``, ``relative``, ``text``;
- ``cautions``, ``reasons``: lines of text.

Quantities are ``{"value", "unit", "u"}``.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from metro.bench_entry import BenchLine
from metro.errors import MetroError
from metro.measured import Measured
from metro.planned_line import PlanError, PlannedLine, PlannedProduct, number_of

if TYPE_CHECKING:
    import os
    from collections.abc import Mapping

__all__ = ["FORMAT", "VERSION", "Plan", "PlanError", "PlannedLine", "PlannedProduct", "load_plan"]

FORMAT = "midfringe plan"
VERSION = 1


@dataclass(frozen=True)
class Plan:
    """Drive and time for a wanted uncertainty.

    Parameters
    ----------
    wanted_u : float
        Wanted relative standard uncertainty of metres per volt.
    duration_s : float
        Of each lines recording [s]; one on each slope.
    drive_point, drive_reading : str
        Where and how the drives are read.
    limit : str or None
        What keeps the drives from being larger; None where the time is longer than they need.
    lines : tuple of PlannedLine
        In the order asked for.
    products : tuple of PlannedProduct
        The largest, the largest first.
    cautions, reasons : list of str
        What to beware of; why the plan as a whole must not be trusted.
    """

    wanted_u: float
    duration_s: float
    drive_point: str
    drive_reading: str
    limit: str | None
    lines: tuple[PlannedLine, ...]
    products: tuple[PlannedProduct, ...]
    cautions: list[str]
    reasons: list[str]

    @property
    def all_reasons(self) -> list[str]:
        """Every reason for distrust, of the whole and of each line."""
        lines = [
            f"line at {line.frequency_hz:g} Hz: {reason}"
            for line in self.lines
            for reason in line.reasons
        ]
        return [*self.reasons, *lines]

    @property
    def bench_lines(self) -> tuple[BenchLine, ...]:
        """The lines as a bench holds them, drives as set."""
        return tuple(BenchLine(line.frequency_hz, line.drive_v) for line in self.lines)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form, as the file holds it.

        Returns
        -------
        dict
            As the module says.
        """
        from metro import __version__

        return {
            "format": FORMAT,
            "version": VERSION,
            "software": __version__,
            "uncertainty": Measured.of(self.wanted_u, "1"),
            "duration": Measured.of(self.duration_s, "s"),
            "drive_point": self.drive_point,
            "drive_reading": self.drive_reading,
            "limit": self.limit,
            "lines": [line.to_dict() for line in self.lines],
            "products": [product.to_dict() for product in self.products],
            "cautions": self.cautions,
            "reasons": self.reasons,
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> Plan:
        """Return the plan that :meth:`to_dict` wrote.

        Parameters
        ----------
        document : mapping
            The JSON form.

        Returns
        -------
        Plan
            The same plan.

        Raises
        ------
        PlanError
            If it is no plan, or of a newer major version.
        """
        if not isinstance(document, dict) or document.get("format") != FORMAT:
            found = document.get("format") if isinstance(document, dict) else document
            raise PlanError(f'format must be "{FORMAT}", got {found!r}')
        if document.get("version") != VERSION:
            raise PlanError(
                f"version must be {VERSION}, the only one this program reads,"
                f" got {document.get('version')!r}"
            )
        try:
            return cls._of(document)
        except (KeyError, TypeError, AttributeError) as error:
            raise PlanError(f"{type(error).__name__} {error}") from None

    @classmethod
    def _of(cls, document: Mapping[str, Any]) -> Plan:
        lines = tuple(PlannedLine.from_dict(item) for item in document["lines"])
        if not lines:
            raise PlanError("lines must hold at least one line, got none")
        products = tuple(PlannedProduct.from_dict(item) for item in document["products"])
        return cls(
            number_of(document["uncertainty"], "uncertainty", "1"),
            number_of(document["duration"], "duration", "s"),
            str(document["drive_point"]),
            str(document["drive_reading"]),
            document["limit"],
            lines,
            products,
            [str(text) for text in document["cautions"]],
            [str(text) for text in document["reasons"]],
        )


def load_plan(path: str | os.PathLike[str]) -> Plan:
    """Return the plan that a file holds.

    Parameters
    ----------
    path : path
        As ``midfringe plan --out`` writes it.

    Returns
    -------
    Plan
        Lines, drives and duration.

    Raises
    ------
    PlanError
        If the file cannot be read or holds no plan; the message names file and place.
    """
    path = Path(path)
    try:
        document = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise PlanError(f"cannot read the plan {path}: {reason}") from None
    except (UnicodeDecodeError, json.JSONDecodeError) as error:
        raise PlanError(f"{path} is not JSON: {error}") from None
    try:
        return Plan.from_dict(document)
    except MetroError as error:
        raise PlanError(f"{path} is no plan: {error}") from None
