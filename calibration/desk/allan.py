"""The overlapping Allan deviation: for how long averaging helps.

References
----------
W. J. Riley, *Handbook of Frequency Stability Analysis*, NIST Special Publication 1065 (2008), 5.2.4.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from metro.measured import Measured

__all__ = ["AllanDeviation", "allan_deviation", "on_grid", "overlapping_deviation"]

FloatArray = NDArray[np.float64]

_FEWEST = 8
_FEWEST_PAIRS = 4  # of neighbouring averages: with fewer the deviation is a guess


@dataclass(frozen=True, eq=False)
class AllanDeviation:
    """Allan deviation over averaging times.

    Parameters
    ----------
    tau_s : ndarray, shape (m,)
        Averaging times [s].
    deviation, u : ndarray, shape (m,)
        Deviation and its standard uncertainty, unit of the results.
    unit : str
        Of the results.
    """

    tau_s: FloatArray
    deviation: FloatArray
    u: FloatArray
    unit: str

    @property
    def best(self) -> int:
        """Where the deviation is least."""
        return int(np.argmin(self.deviation))

    @property
    def is_still_falling(self) -> bool:
        """Whether the least deviation is that of the longest averaging time: longer may help more."""
        return self.best == len(self.tau_s) - 1

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "averaging_time": Measured.of(self.tau_s, "s"),
            "deviation": Measured.of(self.deviation, self.unit, self.u),
            "best_averaging_time": Measured.of(float(self.tau_s[self.best]), "s"),
            "still_falling": self.is_still_falling,
        }


def overlapping_deviation(values: FloatArray, factor: int) -> tuple[float, int]:
    """Return the overlapping Allan deviation at one averaging factor.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Evenly spaced in time, NaN where missing.
    factor : int
        Values an average, ≥ 1.

    Returns
    -------
    tuple of (float, int)
        The deviation, NaN where no pair of averages is whole; and how many pairs entered.

    Notes
    -----
    √(⟨(ȳ(j+m) − ȳ(j))²⟩/2) over all j, with ȳ(j) the mean of the m values from the j-th on. Averages
    that miss a value are left out.
    """
    missing = ~np.isfinite(values)
    # Sums of what is left after the mean, so that long ones keep their digits.
    centred = np.where(missing, 0.0, values - np.mean(values[~missing]))
    sums = np.concatenate([[0.0], np.cumsum(centred)])
    holes = np.concatenate([[0], np.cumsum(missing)])
    difference = sums[2 * factor :] - 2.0 * sums[factor:-factor] + sums[: -2 * factor]
    whole = difference[holes[2 * factor :] == holes[: -2 * factor]] / factor
    if not whole.size:
        return float("nan"), 0
    return float(np.sqrt(0.5 * np.mean(whole**2))), whole.size


def allan_deviation(time_s: FloatArray, values: FloatArray, unit: str) -> AllanDeviation | None:
    """Return the overlapping Allan deviation of results at doubling averaging times.

    Parameters
    ----------
    time_s : ndarray, shape (n,)
        Moments in order [s]; put on the grid of their median distance.
    values : ndarray, shape (n,)
        Results.
    unit : str
        Of the results.

    Returns
    -------
    AllanDeviation or None
        None for fewer than eight results.
    """
    if len(values) < _FEWEST or not np.ptp(time_s) > 0:
        return None
    step_s, grid = on_grid(time_s, values)
    found = []
    factor = 1
    while 2 * factor < len(grid):
        deviation, pairs = overlapping_deviation(grid, factor)
        if pairs >= _FEWEST_PAIRS:
            u = deviation / np.sqrt(2.0 * _freedom(pairs + 2 * factor - 1, factor))
            found.append((factor * step_s, deviation, u))
        factor *= 2
    if not found:
        return None
    tau_s, deviations, u = np.array(found).T
    return AllanDeviation(tau_s, deviations, u, unit)


def on_grid(time_s: FloatArray, values: FloatArray) -> tuple[float, FloatArray]:
    """Return results on an even grid, NaN where there is none.

    Parameters
    ----------
    time_s : ndarray, shape (n,)
        Moments in order [s].
    values : ndarray, shape (n,)
        Results.

    Returns
    -------
    tuple of (float, ndarray)
        Step of the grid [s], the median distance; and the values on it. Of two results at one place
        the later one stays; a grid much longer than the results is cut to their plain row.
    """
    step_s = float(np.median(np.diff(time_s)))
    if not step_s > 0 or np.ptp(time_s) / step_s > 100.0 * len(values):
        return max(step_s, np.ptp(time_s) / (len(values) - 1)), values
    # Distances are counted one by one: a clock that is off must not move the far ones by a step.
    places = np.concatenate([[0], np.cumsum(np.rint(np.diff(time_s) / step_s))]).astype(np.int64)
    grid = np.full(places[-1] + 1, np.nan)
    grid[places] = values
    return step_s, grid


def _freedom(count: int, factor: int) -> float:
    """Return the degrees of freedom of an overlapping Allan variance in white noise.

    As the handbook's table of approximations has it for white frequency noise: from memory.
    """
    n, m = float(count), float(factor)
    edf = (3.0 * (n - 1.0) / (2.0 * m) - 2.0 * (n - 2.0) / n) * 4.0 * m**2 / (4.0 * m**2 + 5.0)
    return max(1.0, edf)
