"""Time stamps as a board prints them to a time that goes on where its counter begins anew."""

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.live_stamps import LiveStamps

__all__ = ["StampReader"]

_LATE_S = 0.5  # by how much lines may arrive later than others
_LARGEST_S = 1e12  # 30 000 years
_SHORTEST_S = 20.0
_MODULI = (1 << 16, 1 << 30, 1 << 31, 1 << 32)
"""Where boards' counters begin anew: 16 and 32 bits; 2^30 is MicroPython's ``ticks_ms`` (from its
documentation of ``time.ticks_ms``, from memory), 2^31 a signed counter that stays positive."""


class StampReader:
    """Read the stamps of lines, across the wraps of the board's counter.

    Parameters
    ----------
    where : LiveStamps
        Where they stand.
    """

    def __init__(self, where: LiveStamps) -> None:
        self._where = where
        self._last: tuple[float, float] | None = None  # the last stamp, and its arrival
        self._wrapped_s = 0.0

    def read(self, rows: NDArray[np.float64], arrived_s: float) -> NDArray[np.float64]:
        """Return the stamps of lines.

        Parameters
        ----------
        rows : ndarray, shape (n, columns)
            All columns of the lines.
        arrived_s : float
            The host's clock at their arrival [s].

        Returns
        -------
        ndarray, shape (n,)
            In seconds; NaN where there is none that can be true.
        """
        stamps = self._where.read(rows) + self._wrapped_s
        stamps[np.abs(stamps) > _LARGEST_S] = np.nan
        if self._last is not None and not self._where.is_counter:
            stamps = self._unwrapped(stamps, *self._last, arrived_s)
        usable = np.flatnonzero(np.isfinite(stamps))
        if usable.size:
            self._last = float(stamps[usable[-1]]), arrived_s
        return stamps

    def _unwrapped(
        self, stamps: NDArray[np.float64], last_s: float, last_arrived_s: float, arrived_s: float
    ) -> NDArray[np.float64]:
        before = np.concatenate(([last_s], stamps[:-1]))
        unit_s = self._where.unit_s
        for k in np.flatnonzero(stamps < before).tolist():
            back_s = float(before[k] - stamps[k])
            for modulus in _MODULI:
                ahead_s = modulus * unit_s - back_s
                # After a reset of the board the stamps fit no modulus; a stamp that is a little
                # early fits only those that are too short to be told from it.
                is_long = modulus * unit_s > _SHORTEST_S
                if is_long and 0 <= ahead_s < arrived_s - last_arrived_s + _LATE_S:
                    stamps[k:] += modulus * unit_s
                    self._wrapped_s += modulus * unit_s
                    break
        return stamps
