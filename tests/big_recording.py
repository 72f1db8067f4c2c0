"""A recording of any size with lines in noise, written fast: for benchmarks and tests of memory."""

import numpy as np

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.envelope import seal_rows
from firmware_bridge.frame import pack_frames
from firmware_bridge.host_note import End, seal_host_note
from firmware_bridge.recording_header import Header, encode_header

__all__ = ["LINES_HZ", "RATE_HZ", "VOLTS_A_COUNT", "write_free_recording", "write_recording"]

RATE_HZ = 100_000.0
LINES_HZ = (1200.0, 2050.0, 3150.0, 4300.0, 5450.0, 7050.0, 8600.0, 9900.0)
"""Whole cycles in the period that is written again and again."""

VOLTS_A_COUNT = 1e-4
_PERIOD = 2000  # samples: 20 ms
_SLOTS = 500
_FRAMES = 2000
_AMPLITUDE = 1000.0  # counts


def write_recording(path, size, seed=1, drive=False):
    """Write an int16 recording of about ``size`` bytes; return its samples.

    It has the channel "pd", and with ``drive`` another that has half of the lines and no noise of its own.

    The noise comes again after some hundred thousand samples, shifted by 17 samples each time and
    with a new sign, so that it stays white enough.
    """
    names = ("pd", "drive") if drive else ("pd",)
    step = _SLOTS * _FRAMES
    t = np.arange(step) / RATE_HZ
    lines = sum(_AMPLITUDE * np.cos(2 * np.pi * f * t + k) for k, f in enumerate(LINES_HZ))
    rng = np.random.default_rng(seed)
    noise = 300.0 * rng.standard_normal(step + 17 * 64)

    def counts(_first):
        shift = 17 * int(rng.integers(64))
        volts = lines + rng.choice([-1.0, 1.0]) * noise[shift : shift + step]
        return np.stack([volts, 0.5 * lines][: len(names)], axis=1)

    return _write(path, size, names, counts)


def write_free_recording(path, size, pilot_hz=401.3, seed=1):
    """Write an int16 recording of about ``size`` bytes of a free-running bench; return its samples.

    Channels "photodiode" and "drive": a fringe from −1 V to +1 V, a pilot of 0.3 rad for a drive of
    1000 counts, a line of 0.1 rad at 87.1 Hz, and a drift of 0.4 + 6·t + 3·sin(2π·0.05·t) rad.
    """
    rng = np.random.default_rng(seed)
    swing = 1.0 / VOLTS_A_COUNT

    def counts(first):
        t = (first + np.arange(_SLOTS * _FRAMES)) / RATE_HZ
        pilot = np.cos(2 * np.pi * pilot_hz * t + 0.6)
        line = 0.1 * np.cos(2 * np.pi * 87.1 * t)
        slow = 0.4 + 6.0 * t + 3.0 * np.sin(2 * np.pi * 0.05 * t)
        volts = swing * np.cos(slow + 0.3 * pilot + line)
        noise = 0.002 * swing * rng.standard_normal(t.size)
        return np.stack([volts + noise, 1000.0 * pilot], axis=1)

    return _write(path, size, ("photodiode", "drive"), counts)


def _write(path, size, names, counts):
    """Write blocks of counts until the file has about ``size`` bytes; return its samples."""
    channels = [ChannelInfo(name, "V", VOLTS_A_COUNT) for name in names]
    announced = Announcement(1, RATE_HZ, "int16", _SLOTS, channels)
    header = Header(announced)
    step = _SLOTS * _FRAMES
    chunks = max(1, round(size / (header.record_bytes * _FRAMES)))
    with open(path, "wb") as file:  # noqa: PTH123  # a plain file, written as it comes
        file.write(encode_header(header))
        for k in range(chunks):
            rows = pack_frames(
                np.rint(counts(k * step)).astype(np.int16),
                slots=_SLOTS, first_index=k * step, first_sequence=k * _FRAMES,
                stream=1, clock=0, flags=0, format="int16",
            )  # fmt: skip
            sealed = seal_rows(rows)
            padded = np.zeros((_FRAMES, header.record_bytes), np.uint8)
            padded[:, : sealed.shape[1]] = sealed
            file.write(padded.tobytes())
        end = seal_host_note(End(1, chunks * step))
        file.write(end.ljust(header.record_bytes, b"\0"))
    return chunks * step
