"""Power drift taken out: the photodiode over a power monitor, or against the antiphase port."""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.found_extremes import Level
from firmware_bridge.trace import Trace

__all__ = ["antiphase_ratio", "over_monitor", "without_power_drift"]

FloatArray = NDArray[np.float64]


def over_monitor(
    values: FloatArray, monitor: FloatArray, dark: float = 0.0, monitor_dark: float = 0.0
) -> FloatArray:
    """Return the photodiode as it would be at the monitor's median power.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode, any unit; NaN where missing.
    monitor : ndarray, shape (n,)
        Monitor of the laser's power, any unit; NaN where missing.
    dark, monitor_dark : float, optional
        Levels without light, each in its unit.

    Returns
    -------
    ndarray, shape (n,)
        dark + (A − dark)·median(M)/M, in the photodiode's unit; NaN where either is missing.

    Raises
    ------
    CalibrationError
        If the monitor is not above its dark level everywhere.
    """
    power = monitor - monitor_dark
    middle = float(np.nanmedian(power))
    if not (middle > 0.0 and float(np.nanmin(power)) > 0.05 * middle):
        raise CalibrationError(
            "--monitor must stay above its dark level, "
            f"got {float(np.nanmin(power)):g} at its least and {middle:g} in the middle"
        )
    return np.asarray(dark + (values - dark) * (middle / power))


def _gain(one: FloatArray, other: FloatArray) -> float:
    """Return g for which A + gB does not know the fringe, from changes over a short time.

    The lag is the one that gives the largest changes of A − B among a few: there the fringe has
    changed most and the power least.
    """
    both = np.isfinite(one) & np.isfinite(other)
    a, b = one[both], other[both]
    size = max(float(np.std(b)), 1e-300) / max(float(np.std(a)), 1e-300)
    best, lag = 0.0, 1
    for trial in (1, 2, 4, 8, 16, 32, 64, 128, 256, 512):
        if trial > len(a) // 4:
            break
        change = a * size - b
        spread = float(np.mean((change[trial:] - change[:-trial]) ** 2))
        if spread > 1.3 * best:
            best, lag = spread, trial
    da, db = a[lag:] - a[:-lag], b[lag:] - b[:-lag]
    if float(da @ db) >= -0.5 * float(np.sqrt((da @ da) * (db @ db))):
        raise CalibrationError(
            "--antiphase must go down where the photodiode goes up; over "
            f"{lag} samples their changes correlate by "
            f"{float(da @ db) / max(float(np.sqrt((da @ da) * (db @ db))), 1e-300):.2f}"
        )
    return float(np.sqrt((da @ da) / (db @ db)))


def antiphase_ratio(
    values: FloatArray, other: FloatArray, dark: float = 0.0, other_dark: float = 0.0
) -> tuple[FloatArray, float]:
    """Return (A − gB)/(A + gB − dark), in which the laser's power cancels.

    Parameters
    ----------
    values, other : ndarray, shape (n,)
        The two ports of the interferometer, same unit; NaN where missing.
    dark, other_dark : float, optional
        Levels without light.

    Returns
    -------
    ratio : ndarray, shape (n,)
        Dimensionless.
    gain : float
        g, by which the second port's fringe is as large as the first's.

    Raises
    ------
    CalibrationError
        If the ports are not in antiphase, or their sum vanishes.
    """
    gain = _gain(values, other)
    one, two = values - dark, gain * (other - other_dark)
    total = one + two
    middle = float(np.nanmedian(total))
    if not (middle > 0.0 and float(np.nanmin(total)) > 0.05 * middle):
        raise CalibrationError("the sum of photodiode and --antiphase falls to the dark level")
    return np.asarray((one - two) / total), gain


def without_power_drift(
    trace: Trace,
    monitor: Trace | None = None,
    antiphase: Trace | None = None,
    dark: Level | None = None,
) -> Trace:
    """Return a photodiode's trace with the power's drift taken out.

    Parameters
    ----------
    trace : Trace
        The photodiode.
    monitor : Trace, optional
        A monitor of the laser's power over the same stretch.
    antiphase : Trace, optional
        The other port over the same stretch.
    dark : Level, optional
        The photodiode's level without light; the other port's is taken to be the same.

    Returns
    -------
    Trace
        In the photodiode's unit, or of unit "1" with the other port; the same without either.

    Raises
    ------
    CalibrationError
        If both are given, or they do not fit.
    """
    if monitor is not None and antiphase is not None:
        raise CalibrationError("--monitor stands for --antiphase: give one or the other")
    level = 0.0 if dark is None else dark.value
    if monitor is not None:
        return replace(trace, values=over_monitor(trace.values, monitor.values, level))
    if antiphase is not None:
        ratio, _ = antiphase_ratio(trace.values, antiphase.values, level, level)
        return replace(trace, values=ratio, unit="1", name=f"{trace.name} against the other port")
    return trace
