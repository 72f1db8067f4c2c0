"""Line results for tests of the ledger and its charts."""

import numpy as np

from calibration.desk.line_entry import LineEntry
from calibration.desk.utc import iso_of
from metro.measured import Measured

__all__ = ["LINE_HZ", "START_S", "month", "result"]

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
