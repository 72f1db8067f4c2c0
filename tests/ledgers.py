"""Line results and a calibration for tests of the ledger and its charts."""

import shutil
from pathlib import Path

import numpy as np

from calibration.desk.calibration_entry import CalibrationEntry
from calibration.desk.ledger import Ledger
from calibration.desk.line_entry import LineEntry
from calibration.desk.utc import iso_of
from metro.measured import Measured

__all__ = ["LINE_HZ", "SAMPLE", "START_S", "month", "result", "sample_calibration", "sample_ledger"]

SAMPLE = Path(__file__).parent / "calibration" / "desk" / "samples" / "ledger-v1.sqlite"

LINE_HZ = 87.1
START_S = 1_764_547_200  # 2025-12-01T00:00:00Z


def result(value, *, unix_s=START_S, u=None, unit="m/V", source="test", **more):
    """Return one line result."""
    measured = Measured.of(float(value), unit, u, 60.0)
    return LineEntry(iso_of(unix_s), LINE_HZ, measured, is_ratio=True, source=source, **more)


def month(seed, *, step=0.0, swing_k=0.0, per_kelvin=0.0, scatter=1e-3, hours=720, at=480):
    """Return hourly results: a relative scatter, a step of so many of it at an hour, a daily swing."""
    rng = np.random.default_rng(seed)
    hour = np.arange(hours)
    kelvin = 294.45 + 0.5 * swing_k * np.sin(2 * np.pi * hour / 24)
    value = 33.3e-9 * (1 + per_kelvin * (kelvin - 294.45)) * (
        1 + scatter * (rng.standard_normal(hours) + step * (hour >= at))
    )  # fmt: skip
    return [
        result(v, unix_s=START_S + 3600 * h, u=33.3e-9 * scatter, temperature_k=k)
        for h, v, k in zip(hour, value, kelvin, strict=True)
    ]


def sample_ledger(folder):
    """Return the place of a copy of the ledger of version 1."""
    path = folder / "sample.ledger"
    shutil.copy(SAMPLE, path)
    return str(path)


def sample_calibration(folder):
    """Return the calibration in that ledger, also as the file cal.json."""
    with Ledger(sample_ledger(folder)) as ledger:
        (entry,) = ledger.calibrations()
    path = folder / "cal.json"
    path.write_text(entry.text, encoding="utf-8")
    return CalibrationEntry.of_file(path)
