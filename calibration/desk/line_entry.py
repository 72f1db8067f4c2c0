"""A line result as the ledger keeps it: one line of one stretch of time, per volt of drive if known."""

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from math import inf, isfinite
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.utc import iso_of, unix_of
from metro.measured import Measured

if TYPE_CHECKING:
    from calibration.line_fit import Line

__all__ = ["LineEntry", "entries_of_document"]


@dataclass(frozen=True)
class LineEntry:
    """One line over one stretch of time.

    Parameters
    ----------
    time : str
        Middle of the stretch, UTC, as :func:`calibration.desk.utc.iso_of` writes it.
    line_hz : float
        Frequency of the line [Hz].
    value : Measured
        Magnitude of response over drive (such as m/V, or "1" for volts per volt), or the amplitude
        where the drive was not read.
    is_ratio : bool
        Which of the two it is.
    phase : Measured or None
        Of the ratio [rad]; None where it is not known.
    noise_density : float or None
        One-sided amplitude density beside the line, unit of the response/√Hz.
    snr : float or None
        A/√(S/T).
    temperature_k : float or None
        Temperature meanwhile [K].
    duration_s : float or None
        Length of the stretch [s].
    reasons : tuple of str
        Why it must not be trusted; such entries are kept and left out of charts.
    source : str
        Where it came from, for people.
    sha256 : str or None
        Of the file it came from: the same file is not taken twice.
    bench : str
        Which bench, where several share a ledger.
    cautions : tuple of str
        What was taken for granted when it was measured; told then, not kept in the ledger.
    """

    time: str
    line_hz: float
    value: Measured
    is_ratio: bool
    phase: Measured | None = None
    noise_density: float | None = None
    snr: float | None = None
    temperature_k: float | None = None
    duration_s: float | None = None
    reasons: tuple[str, ...] = ()
    source: str = ""
    sha256: str | None = field(default=None, compare=False)
    bench: str = "bench"
    cautions: tuple[str, ...] = field(default=(), compare=False)

    @classmethod
    def of_line(
        cls,
        line: "Line",
        *,
        unix_s: float,
        duration_s: float,
        source: str,
        **more: Any,  # noqa: ANN401  # fields
    ) -> "LineEntry":
        """Return the entry of a fitted line.

        Parameters
        ----------
        line : Line
            From :func:`calibration.fit_lines`.
        unix_s : float
            UTC of the middle of the stretch, seconds since 1970.
        duration_s : float
            Length of the stretch [s].
        source : str
            Where it came from.
        **more : object
            Further fields of the entry.

        Returns
        -------
        LineEntry
            The ratio where a drive was read, else the amplitude.

        Raises
        ------
        LedgerError
            If the drive does not hold the line at all, so that there is no ratio.
        """
        estimate = line.ratio
        known = line.response if estimate is None else estimate
        if not isfinite(abs(known.phasor)):
            raise LedgerError(f"the drive holds no line at {line.frequency_hz:.9g} Hz")
        return cls(
            time=iso_of(unix_s),
            line_hz=float(line.frequency_hz),
            value=known.amplitude if estimate is None else estimate.magnitude,
            is_ratio=estimate is not None,
            phase=None if estimate is None else estimate.phase,
            noise_density=float(line.density_value),
            snr=line.snr_value if isfinite(line.snr_value) else None,
            duration_s=duration_s,
            reasons=line.distrust_reasons,
            source=source,
            **more,
        )

    @property
    def unix_s(self) -> float:
        """The moment, seconds since 1970."""
        return unix_of(self.time)

    @property
    def is_trustworthy(self) -> bool:
        """Whether no reason for distrust was found."""
        return not self.reasons

    def to_row(self) -> dict[str, Any]:
        """Return the entry as a row of the table."""
        phase = self.phase
        return {
            "bench": self.bench,
            "time": self.time,
            "line": self.line_hz,
            "unit": self.value.unit,
            "value": float(self.value.magnitude),
            "u": _maybe_float(self.value.u_magnitude),
            "dof": float(self.value.dof) if isfinite(self.value.dof) else None,
            "is_ratio": self.is_ratio,
            "phase": None if phase is None else float(phase.magnitude),
            "phase_u": None if phase is None else _maybe_float(phase.u_magnitude),
            "noise_density": self.noise_density,
            "snr": self.snr,
            "temperature": self.temperature_k,
            "duration": self.duration_s,
            "trustworthy": self.is_trustworthy,
            "reasons": json.dumps(list(self.reasons), ensure_ascii=False),
            "source": self.source,
            "sha256": self.sha256,
        }

    @classmethod
    def from_row(cls, row: Mapping[str, Any]) -> "LineEntry":
        """Return the entry that `to_row` made."""
        dof = inf if row["dof"] is None else row["dof"]
        phase = row["phase"]
        return cls(
            time=row["time"],
            line_hz=row["line"],
            value=Measured.of(row["value"], row["unit"], row["u"], dof),
            is_ratio=bool(row["is_ratio"]),
            phase=None if phase is None else Measured.of(phase, "rad", row["phase_u"], dof),
            noise_density=row["noise_density"],
            snr=row["snr"],
            temperature_k=row["temperature"],
            duration_s=row["duration"],
            reasons=tuple(json.loads(row["reasons"])),
            source=row["source"],
            sha256=row["sha256"],
            bench=row["bench"],
        )

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "kind": "line",
            "bench": self.bench,
            "time": self.time,
            "line": Measured.of(self.line_hz, "Hz"),
            "ratio" if self.is_ratio else "amplitude": self.value,
            "phase": self.phase,
            "snr": None if self.snr is None else Measured.of(self.snr, "1"),
            "temperature": None
            if self.temperature_k is None
            else Measured.of(self.temperature_k, "K"),
            "duration": None if self.duration_s is None else Measured.of(self.duration_s, "s"),
            "trustworthy": self.is_trustworthy,
            "reasons": list(self.reasons),
            "source": self.source,
        }


def entries_of_document(
    document: Mapping[str, Any],
    *,
    time: str,
    place: str,
    **more: Any,  # noqa: ANN401  # fields
) -> list[LineEntry]:
    """Return the entries of what ``midfringe lines --json`` printed.

    Parameters
    ----------
    document : mapping
        With ``lines`` and perhaps ``duration``.
    time : str
        The moment, as the ledger keeps it.
    place : str
        Where the document came from, for messages.
    **more : object
        Further fields of each entry.

    Returns
    -------
    list of LineEntry
        In the document's order.

    Raises
    ------
    LedgerError
        If it is no such document.
    """
    listed = document.get("lines") if isinstance(document, Mapping) else None
    if not isinstance(listed, list) or not listed:
        raise LedgerError(f"{place} must be what 'midfringe lines --json' prints: it has no lines")
    duration = document.get("duration") or {}
    try:
        return [
            _entry(line, time=time, duration_s=_maybe_float(duration.get("value")), more=more)
            for line in listed
        ]
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise LedgerError(f"{place}: a line does not hold together: {error!r}") from None


def _entry(
    line: Mapping[str, Any], *, time: str, duration_s: float | None, more: dict[str, Any]
) -> LineEntry:
    ratio = line.get("ratio")
    value = Measured.from_dict(ratio["magnitude"] if ratio else line["amplitude"])
    if not isinstance(value.magnitude, (int, float)):
        raise LedgerError(f"a line must have a value, got {value.magnitude!r}")
    density, snr = line.get("noise_density") or {}, line.get("snr") or {}
    return LineEntry(
        time=time,
        line_hz=float(line["frequency"]["value"]),
        value=value,
        is_ratio=bool(ratio),
        phase=Measured.from_dict(ratio["phase"]) if ratio and ratio.get("phase") else None,
        noise_density=_maybe_float(density.get("value")),
        snr=_maybe_float(snr.get("value")),
        duration_s=duration_s,
        reasons=tuple(line.get("reasons", ())),
        **more,
    )


def _maybe_float(value: Any) -> float | None:  # noqa: ANN401  # a number or None
    return None if value is None else float(value)
