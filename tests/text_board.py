"""A text board for tests: lines with the times of their arrival, framed into a recording."""

import numpy as np

from firmware_bridge.intake import Intake
from firmware_bridge.recording import open_mfr
from firmware_bridge.text_frames import TextFramer

__all__ = ["lines_of", "record_chunks"]


def record_chunks(path, chunks, rate_hz=None, away_before=()):
    """Return the recording of (arrival, bytes) chunks, and the framer."""
    framer = TextFramer(5, rate_hz)
    intake = Intake(path, info=framer.origin)

    def take(pieces, now_s):
        for piece in pieces:
            intake.take(piece, round(now_s * 1e9), 10**18 + round(now_s * 1e9))

    for k, (now_s, data) in enumerate(chunks):
        if k in away_before:
            framer.restart()
            intake.away()
        take(framer.feed(data, now_s), now_s)
        intake.tick(round(now_s * 1e9), 10**18 + round(now_s * 1e9))
    take(framer.finish(), chunks[-1][0])
    intake.close()
    return open_mfr(path), framer


def lines_of(stamps, values, arrivals, *, spell="%d", end=b"\n", separator=b" "):
    """Return the chunks of lines "stamp value", after a first partial line."""
    texts = [
        (spell % stamp).encode() + separator + b"%d" % value + end
        for stamp, value in zip(stamps, values, strict=True)
    ]
    return [(float(arrivals[0]), b"rtial" + end), *zip(map(float, arrivals), texts, strict=True)]


def arrivals_of(times_s, rng, worst_s=0.02):
    """When lines sent at ``times_s`` arrive: late, in order, several at once."""
    return np.maximum.accumulate(times_s + rng.uniform(0, worst_s, len(times_s)))
