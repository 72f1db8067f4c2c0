"""What the drive's channel says of the pilot: its frequency in the board's time, and its phase."""

from calibration.errors import CalibrationError
from calibration.lines import fit_lines_si
from firmware_bridge.trace import Trace

__all__ = ["driven_pilot"]


def driven_pilot(drive: Trace, pilot_hz: float) -> tuple[float, float]:
    """Return the pilot as its drive has it.

    Parameters
    ----------
    drive : Trace
        The drive's channel.
    pilot_hz : float
        The pilot as the generator has it [Hz].

    Returns
    -------
    tuple of (float, float)
        Frequency in the board's time [Hz], phase at the trace's first sample [rad].

    Raises
    ------
    CalibrationError
        If the drive does not show it.
    """
    fit = fit_lines_si(drive.values, drive.rate_hz, [pilot_hz])
    driven = fit.lines[0]
    if not driven.is_trustworthy:
        raise CalibrationError(
            f"the drive shows no pilot at {pilot_hz:g} Hz: {'; '.join(driven.distrust_reasons)}"
        )
    offset = 0.0 if fit.clock_offset is None else float(fit.clock_offset.magnitude)
    return pilot_hz * (1.0 + offset), float(driven.phase.magnitude)
