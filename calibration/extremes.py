"""The two extremes of a fringe as one value: low and high with their joint uncertainty."""

from collections.abc import Sequence
from dataclasses import dataclass
from math import inf, sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.scan import ScanFit
from calibration.term import FRINGE_EXTREMES, Term

__all__ = ["Extremes"]

_UNSTATED = f"{FRINGE_EXTREMES} (not measured: as given, u not stated)"

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Extremes:
    """Low and high of the fringe law at one detector.

    Parameters
    ----------
    low_v, high_v : float
        The extremes, in the recording's unit (volts as read).
    covariance : ndarray, shape (2, 2)
        Covariance of (low, high), squared unit.
    dof : float
        Degrees of freedom of the covariance.
    scans : int
        How many scans they are the mean of; 0 when given.
    own : bool
        Whether those scans are the lines recordings themselves, on a bench that runs freely.
    """

    low_v: float
    high_v: float
    covariance: FloatArray
    dof: float = inf
    scans: int = 0
    own: bool = False

    def __post_init__(self) -> None:
        if not self.high_v > self.low_v:
            raise CalibrationError(
                f"the fringe's high must lie above its low, got high {self.high_v:g} "
                f"and low {self.low_v:g}"
            )

    @classmethod
    def mean_of(cls, scans: Sequence[ScanFit]) -> "Extremes":
        """Return the mean of the extremes of one or more scans."""
        count = len(scans)
        covariance = np.sum([scan.covariance for scan in scans], axis=0) / count**2
        return cls(
            low_v=float(np.mean([scan.low for scan in scans])),
            high_v=float(np.mean([scan.high for scan in scans])),
            covariance=covariance,
            dof=float(np.sum([scan.dof for scan in scans])),
            scans=count,
        )

    @property
    def swing_v(self) -> float:
        """Half of high − low: the amplitude of the fringe."""
        return (self.high_v - self.low_v) / 2

    @property
    def mid_v(self) -> float:
        """The voltage at mid-fringe."""
        return (self.high_v + self.low_v) / 2

    def u_of(self, swing_weight: float, mid_weight: float) -> float:
        """Return the standard uncertainty of a·swing + b·mid."""
        weights = np.array([mid_weight - swing_weight, mid_weight + swing_weight]) / 2
        return sqrt(max(0.0, float(weights @ self.covariance @ weights)))

    def term(self, u: float) -> Term:
        """Return the budget's entry of the extremes, which says where nothing is known of their u.

        Parameters
        ----------
        u : float
            Relative standard uncertainty of a coefficient by them.

        Returns
        -------
        Term
            From statistics where scans gave them.
        """
        name = FRINGE_EXTREMES if self.scans or self.covariance.any() else _UNSTATED
        kind = "A" if self.scans else "B"
        return Term(name, None, "1", u, relative=1.0, kind=kind, dof=self.dof)
