"""Random messages, encoded by the core and by the Python codec, byte for byte.

``python tests/firmware_in_loop/random_messages.py --seed 1 --count 100000`` runs as many as wanted
(the quick tests 1 %) and prints the seed, so that a failure can be run again.
"""

import argparse
import sys
import tempfile
import time
from fractions import Fraction
from pathlib import Path

import numpy as np

if __name__ == "__main__":  # under pytest the folder of the helpers is on the path already
    sys.path.insert(0, str(Path(__file__).parent.parent))

from firmware_build import shared_core
from firmware_core import Core

from firmware_bridge.announcement import FORMATS, Announcement, ChannelInfo, encode_announcement
from firmware_bridge.frame import encode_frame, pack_samples
from firmware_bridge.message import Reply, encode_note, encode_reply

__all__ = ["check_announcement", "check_frame", "check_text"]

LETTERS = list("abcXYZ 0123456789_-/µ°Ω")


def check_frame(core, rng):
    """One samples frame: any format, any filling, runs of zeros and of anything else."""
    name = str(rng.choice(list(FORMATS)))
    width, channels = FORMATS[name], int(rng.integers(1, 9))
    slots = int(rng.integers(1, 120))
    filled = int(rng.integers(0, slots + 1))
    half = 1 << (8 * width - 1)
    samples = rng.integers(-half, half, (filled, channels), dtype=np.int64)
    samples[rng.random(samples.shape) < rng.choice([0.0, 0.5, 0.99])] = 0
    fields = {
        "stream": int(rng.integers(0, 1 << 32)),
        "sequence": int(rng.integers(0, 1 << 32)),
        "index": int(rng.integers(0, 1 << 63)) >> int(rng.integers(0, 60)),
        "clock": int(rng.integers(0, 1 << 63)) >> int(rng.integers(0, 60)),
        "flags": int(rng.integers(0, 4)),
    }
    counts = samples.astype(np.int16 if name == "int16" else np.int32)
    expected = encode_frame(counts, slots=slots, format=name, **fields)
    payload = pack_samples(counts, width).tobytes()
    room = len(expected) + int(rng.integers(0, 2)) * 100
    found = core.encode_frame(
        payload, room=room, slots=slots, filled=filled, channels=channels, format=width, **fields
    )
    assert found == expected, fields
    assert (
        core.encode_frame(
            payload,
            room=len(expected) - 1,
            slots=slots,
            filled=filled,
            channels=channels,
            format=width,
            **fields,
        )
        == b""
    )


def text(rng, longest):
    return "".join(rng.choice(LETTERS, int(rng.integers(0, longest))))


def check_announcement(core, rng):
    """One announcement: any channels, texts, rate."""
    name = str(rng.choice(list(FORMATS)))
    half = 1 << (8 * FORMATS[name] - 1)
    channels = [
        ChannelInfo(
            text(rng, 30),
            text(rng, 4),
            float(rng.normal()),
            float(rng.normal()),
            int(rng.integers(-half, 0)),
            int(rng.integers(0, half)),
        )
        for _ in range(rng.integers(1, 12))
    ]
    ratio = Fraction(int(rng.integers(1, 1 << 20)), int(rng.integers(1, 1000)))
    announcement = Announcement(
        int(rng.integers(0, 1 << 32)),
        float(ratio),
        name,
        int(rng.integers(1, 1 << 16)),
        channels,
        board=text(rng, 100),
        firmware=text(rng, 100),
        simulated=bool(rng.integers(0, 2)),
        clock_hz=int(rng.integers(0, 1 << 32)),
    )
    found = core.encode_announcement(announcement, (ratio.numerator, ratio.denominator))
    assert found == encode_announcement(announcement)


def check_text(core, rng):
    """One note and one reply."""
    said = text(rng, 500)
    assert core.encode_note(said) == encode_note(said)
    reply = Reply(
        int(rng.integers(0, 256)), int(rng.integers(0, 1 << 16)), int(rng.integers(0, 3)), said
    )
    assert core.encode_reply(reply) == encode_reply(reply)


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--count", type=int, default=100_000)
    options = parser.parse_args()
    rng, start_s = np.random.default_rng(options.seed), time.monotonic()
    with tempfile.TemporaryDirectory() as folder:
        core = Core(shared_core(folder))
        for k in range(options.count):
            check_frame(core, rng)
            if k % 10 == 0:
                check_announcement(core, rng)
                check_text(core, rng)
    print(
        f"seed {options.seed}: {options.count} frames, {options.count // 10} announcements, notes "
        f"and replies, byte for byte the same, in {time.monotonic() - start_s:.0f} s"
    )


if __name__ == "__main__":
    main()
