"""Control limits: individual values with their moving range, or means of samples with their spread."""

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.desk import chart_constants as constants
from calibration.desk.ledger_errors import LedgerError
from metro.measured import Measured

__all__ = ["FEWEST", "ControlLimits", "individual_limits", "sample_limits", "samples_of"]

FloatArray = NDArray[np.float64]

FEWEST = 8  # values or samples: fewer give limits that are worth nothing
_LARGEST_RANGE = 10  # values a sample; of larger ones the range wastes what the others say


@dataclass(frozen=True)
class ControlLimits:
    """Three-sigma limits of a value and of its spread.

    Parameters
    ----------
    kind : str
        ``"individuals"``, ``"means and ranges"`` or ``"means and standard deviations"``.
    sample : int
        Values a point: 1 for individuals.
    centre, low, high : float
        Of the points, in the unit of the values.
    spread_centre, spread_low, spread_high : float
        Of the moving ranges, ranges or standard deviations.
    sigma : float
        Standard deviation of a single value that the limits rest on.
    baseline : int
        Values that the limits rest on.
    """

    kind: str
    sample: int
    centre: float
    low: float
    high: float
    spread_centre: float
    spread_low: float
    spread_high: float
    sigma: float
    baseline: int

    @property
    def point_sigma(self) -> float:
        """Standard deviation of a point."""
        return self.sigma / math.sqrt(self.sample)

    def to_dict(self, unit: str) -> dict[str, Any]:
        """Return the JSON form, in a unit."""
        numbers = {
            "centre": self.centre,
            "low": self.low,
            "high": self.high,
            "spread_centre": self.spread_centre,
            "spread_low": self.spread_low,
            "spread_high": self.spread_high,
            "sigma": self.sigma,
        }
        listed = {name: Measured.of(value, unit) for name, value in numbers.items()}
        return {"kind": self.kind, "sample": self.sample, "baseline": self.baseline, **listed}


def individual_limits(values: FloatArray) -> ControlLimits:
    """Return the limits of individual values from the mean of their moving ranges.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The baseline, in the order of time; n ≥ 8.

    Returns
    -------
    ControlLimits
        centre ± 3·MR/d2; the moving range below D4·MR.

    Raises
    ------
    LedgerError
        If there are too few.

    References
    ----------
    NIST/SEMATECH *e-Handbook of Statistical Methods*, 6.3.2.2 (individuals control charts).
    """
    _check_count(len(values), "results")
    mean, moved = float(values.mean()), float(np.abs(np.diff(values)).mean())
    reach = constants.e2() * moved
    return ControlLimits(
        "individuals",
        1,
        mean,
        mean - reach,
        mean + reach,
        moved,
        constants.lower_range_factor(2) * moved,
        constants.d4_factor(2) * moved,
        moved / constants.d2(2),
        len(values),
    )


def samples_of(values: FloatArray, sample: int) -> FloatArray:
    """Return values in samples of equal size, those at the end that fill none left out.

    Parameters
    ----------
    values : ndarray, shape (n,)
        In the order of time.
    sample : int
        Values a sample, ≥ 2.

    Returns
    -------
    ndarray, shape (n // sample, sample)
        A view.
    """
    count = len(values) // sample
    return values[: count * sample].reshape(count, sample)


def sample_limits(values: FloatArray, sample: int) -> ControlLimits:
    """Return the limits of sample means, from ranges up to ten values a sample, else from s.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The baseline, in the order of time.
    sample : int
        Values a sample, ≥ 2.

    Returns
    -------
    ControlLimits
        After Shewhart, with A2, D3, D4 or A3, B3, B4.

    Raises
    ------
    LedgerError
        If there are fewer than eight samples.

    References
    ----------
    NIST/SEMATECH *e-Handbook of Statistical Methods*, 6.3.2.1.
    """
    samples = samples_of(values, sample)
    _check_count(len(samples), f"samples of {sample} results")
    mean = float(samples.mean())
    is_range = sample <= _LARGEST_RANGE
    spread = float((np.ptp(samples, axis=1) if is_range else samples.std(axis=1, ddof=1)).mean())
    if is_range:
        kind, factor, to_sigma = "means and ranges", constants.a2(sample), constants.d2(sample)
        low, high = constants.lower_range_factor(sample), constants.d4_factor(sample)
    else:
        kind, factor = "means and standard deviations", constants.a3(sample)
        to_sigma, low, high = constants.c4(sample), constants.b3(sample), constants.b4(sample)
    return ControlLimits(
        kind,
        sample,
        mean,
        mean - factor * spread,
        mean + factor * spread,
        spread,
        low * spread,
        high * spread,
        spread / to_sigma,
        samples.size,
    )


def _check_count(count: int, what: str) -> None:
    if count < FEWEST:
        raise LedgerError(f"control limits need at least {FEWEST} {what}, got {count}")
