"""The extremes of a fringe as a free-running recording shows them itself, beside a calibration's."""

from dataclasses import dataclass
from math import hypot

import numpy as np

from calibration.channel_volts import ChannelVolts
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.record import Calibration
from calibration.scan import ScanFit, fit_scan
from calibration.term import POWER_DRIFT
from firmware_bridge.trace import Recording

__all__ = ["OwnExtremes", "own_extremes"]

_STRETCH = 1 << 17  # samples of a stretch that is looked at: at the beginning, middle and end
_APART = 4.0  # standard uncertainties
_LEAST_APART = 0.01  # of high − low: tilt and mains move the extremes by some thousandths


@dataclass(frozen=True)
class OwnExtremes:
    """Extremes found in some stretches of a recording.

    Parameters
    ----------
    scans : tuple of ScanFit
        Those over whole fringes, in order.
    """

    scans: tuple[ScanFit, ...]

    def mean(self, path: str) -> Extremes:
        """Return the mean of all stretches.

        Parameters
        ----------
        path : str
            The recording, for the message.

        Raises
        ------
        CalibrationError
            If no stretch runs over whole fringes.
        """
        if not self.scans:
            raise CalibrationError(f"{path} runs over no whole fringe: its extremes are not known")
        return Extremes.mean_of(self.scans)

    def reasons(self, calibration: Calibration) -> list[str]:
        """Return why a calibration's extremes do not hold for the recording.

        Parameters
        ----------
        calibration : Calibration
            Extremes, and the drift of the power.

        Returns
        -------
        list of str
            Empty where they agree, or nothing is known.
        """
        kept = calibration.extremes
        rows = calibration.readout_budget.contributions
        drift = max((row.u for row in rows if row.name.startswith(POWER_DRIFT)), default=0.0)
        reasons = []
        for scan in self.scans:
            for name, own, known, u in (
                ("low", scan.low, kept.low_v, hypot(scan.low_u, kept.covariance[0, 0] ** 0.5)),
                ("high", scan.high, kept.high_v, hypot(scan.high_u, kept.covariance[1, 1] ** 0.5)),
            ):
                limit = max(_APART * hypot(u, drift * abs(known)), _LEAST_APART * 2 * kept.swing_v)
                if abs(own - known) > limit:
                    reasons.append(
                        f"the fringe's {name} is {own:.4g} V in the recording and {known:.4g} V in the "
                        "calibration: power or alignment changed (--own-extremes takes the recording's)"
                    )
        return reasons[:1]


def own_extremes(
    source: Recording, position: int, volts: ChannelVolts, start: int, stop: int
) -> OwnExtremes:
    """Look for the extremes at the beginning, the middle and the end of a stretch of a recording.

    Parameters
    ----------
    source : Recording
        Free-running.
    position : int
        Of the photodiode's channel.
    volts : ChannelVolts
        Makes volts of it.
    start, stop : int
        The stretch.

    Returns
    -------
    OwnExtremes
        Without what runs over no whole fringe.
    """
    count = min(_STRETCH, stop - start)
    begins = np.unique(np.linspace(start, stop - count, 3).astype(int)).tolist()
    if stop - start < 2 * count:
        begins = [start]
    scans = []
    for first in begins:
        values = volts.of(source.read([position], first, first + count).values[:, 0])
        try:
            scan = fit_scan(values, source.rate_hz)
        except CalibrationError:
            continue
        if scan.is_trustworthy:
            scans.append(scan)
    return OwnExtremes(tuple(scans))
