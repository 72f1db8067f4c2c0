"""Under which conditions of the actuator a calibration holds: drive, bias, history, temperature."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from calibration.line_fit import LineFit
from calibration.session import RoleRecord
from calibration.slope_line import is_driven
from metro.bench import Bench
from metro.drive import peak_factor, terminal_factor
from metro.measured import Measured

__all__ = ["validity_of"]


def validity_of(bench: Bench, records: Sequence[tuple[RoleRecord, LineFit]]) -> dict[str, Any]:
    """Return what the actuator went through in the lines recordings.

    Parameters
    ----------
    bench : Bench
        Bias and history as stated, temperature, how the drive is read.
    records : sequence of (RoleRecord, LineFit)
        Each lines recording with its fit.

    Returns
    -------
    dict
        ``drive_from`` and ``drive_to`` [V] at the terminals, null where the drive was not recorded;
        ``amplitudes`` of the lines [V], zero to peak, the largest of all recordings; ``bias`` [V],
        stated, else the mean of the recorded drive; ``history``; ``temperature`` [K].
    """
    recorded = records[0][0].drive is not None
    factor = terminal_factor(bench, recorded=recorded)
    drives = [factor * r.drive.values for r, _ in records if r.drive is not None]
    known = [drive[np.isfinite(drive)] for drive in drives if np.isfinite(drive).any()]
    bias = bench.get("actuator.bias")
    if bias is None and known:
        bias = Measured.of(float(np.mean([drive.mean() for drive in known])), "V")
    ends: list[Measured | None] = [None, None]
    if known:
        low, high = min(d.min() for d in known), max(d.max() for d in known)
        ends = [Measured.of(float(low), "V"), Measured.of(float(high), "V")]
    return {
        "drive_from": ends[0],
        "drive_to": ends[1],
        "amplitudes": [
            _amplitude(bench, number, [fit for _, fit in records], factor, recorded=recorded)
            for number in range(len(bench.lines))
        ],
        "bias": bias,
        "history": bench.text("actuator.history"),
        "temperature": bench.get("air.temperature"),
    }


def _amplitude(
    bench: Bench, number: int, fits: Sequence[LineFit], factor: float, *, recorded: bool
) -> Measured | None:
    if not recorded:
        stated = bench.lines[number].drive_v
        return None if stated is None else Measured.of(stated * peak_factor(bench) * factor, "V")
    lines = [fit.lines[number] for fit in fits]
    seen = [abs(line.drive.phasor) for line in lines if line.drive and is_driven(line)]
    return Measured.of(factor * max(seen), "V") if seen else None
