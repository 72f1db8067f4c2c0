"""Spectrum reading: the spectrum of a recording, converted where it is calibrated, beside what is expected."""

from dataclasses import replace
from typing import TYPE_CHECKING

from calibration.expected_noise import bench_as_measured, expected_noise
from calibration.spectrum import Spectrum, find_spectrum

if TYPE_CHECKING:
    from calibration.convert import Conversion
    from calibration.record import Calibration
    from firmware_bridge.trace import Recording
    from metro.bench import Bench

__all__ = ["read_spectrum"]


def read_spectrum(
    recording: "Recording",
    channel: str,
    bench: "Bench",
    calibration: "Calibration | None" = None,
    quantity: str = "voltage",
    slope: str = "rising",
    *,
    from_s: float | None = None,
    to_s: float | None = None,
    resolution_hz: float | None = None,
    undo_readout: bool = False,
) -> "tuple[Spectrum, Conversion | None]":
    """Return the spectrum of a recording with the noise its bench should have.

    Parameters
    ----------
    recording : Recording
        Opened.
    channel : str
        The photodiode's.
    bench : Bench
        What is expected; may be empty.
    calibration : Calibration, optional
        Needed for anything but the voltage.
    quantity : str
        ``"voltage"``, ``"displacement"``, ``"strain"`` or ``"phase"``.
    slope : str
        The side of the fringe the recording lies on.
    from_s, to_s : float, optional
        The stretch [s].
    resolution_hz : float, optional
        Distance of the bins [Hz].
    undo_readout : bool
        Undo what amplifier and anti-alias filter take off, in the recording and in what is expected.

    Returns
    -------
    tuple of (Spectrum, Conversion or None)
        The conversion says what the calibration and the recording are worth.

    Raises
    ------
    CalibrationError
        If the recording cannot be converted or is too short.
    """
    stretch = {"from_s": from_s, "to_s": to_s}
    if calibration is None:
        found = find_spectrum(recording, channel, resolution_hz=resolution_hz, **stretch)
        worth = None
    else:
        from calibration.conversion_filter import readout_stage
        from calibration.convert import ConvertedRecording

        stages = [readout_stage(calibration, recording.rate_hz)] if undo_readout else []
        converted = ConvertedRecording(recording, channel, calibration, quantity, slope, stages)
        found = find_spectrum(converted, "1", resolution_hz=resolution_hz, **stretch)
        worth = converted.judge(from_s, to_s)
    if quantity == "voltage" and found.unit != "V":
        return found, worth
    measured = bench_as_measured(
        bench, recording.rate_hz, recording.channels[recording.find(channel)], calibration
    )
    return _with_expected(found, measured, quantity, undo_readout), worth


def _with_expected(found: Spectrum, bench: "Bench", quantity: str, undone: bool) -> Spectrum:
    expected = expected_noise(bench, quantity, found.welch.frequency_hz, undone=undone)
    if expected is None:
        remark = "no expected noise: no noise source is known; give --bench"
        return replace(found, remarks=(*found.remarks, remark))
    remarks = [*found.remarks, *expected.remarks]
    if expected.missing:
        names = ", ".join(name.replace("_", " ") for name in expected.missing)
        remarks.append(f"the expected noise lacks, for want of entries in the bench: {names}")
    return replace(found, expected=expected, remarks=tuple(remarks))
