"""A recording compared with what was sent, sample by sample and gap by gap."""

from dataclasses import dataclass

import numpy as np
from long_runs.known_stream import samples

from firmware_bridge.recording import open_mfr

__all__ = ["Verdict", "check_recording"]

_BLOCK = 1 << 19


@dataclass
class Verdict:
    """What was found; ``wrong``, ``lost`` and ``gaps_wrong`` must be 0.

    ``wrong`` counts samples that were not sent so, ``lost`` undamaged frames that are not there,
    ``gaps_wrong`` gaps that differ from what is missing.
    """

    frames: int = 0
    undamaged: int = 0
    kept: int = 0
    lost: int = 0
    wrong: int = 0
    gaps: int = 0
    gaps_wrong: int = 0

    @property
    def is_sound(self):
        return not (self.lost or self.wrong or self.gaps_wrong)


def check_recording(path, frames):
    """Return what is wrong in a recording of these frames.

    ``frames`` has a row for each frame sent: stream, index, filled, undamaged. The first frame of
    each stream is undamaged, so that its place on the grid is known.
    """
    recording = open_mfr(path)
    verdict = Verdict(frames=len(frames), undamaged=int(frames[:, 3].sum()))
    joints = [gap for gap in recording.gaps if not gap.exact]
    streams = list(dict.fromkeys(frames[:, 0].tolist()))
    verdict.gaps_wrong += abs(len(streams) - 1 - len(joints)) + sum(g.length < 0 for g in joints)
    begins = [0, *(gap.index + gap.length for gap in joints)]
    ends = [*(gap.index for gap in joints), recording.length]
    for stream, begin, end in zip(streams, begins, ends, strict=False):
        _check_stream(recording, stream, frames[frames[:, 0] == stream], begin, end, verdict)
    return verdict


def _check_stream(recording, stream, frames, begin, end, verdict):
    length = end - begin
    there = np.zeros(length + 1, bool)  # one more, as the last frames may be missing
    for start in range(0, length, _BLOCK):
        stop = min(start + _BLOCK, length)
        values = recording.read([0, 1], begin + start, begin + stop).values
        there[start:stop] = np.isfinite(values).any(axis=1)
        same = (values == samples(stream, start, stop - start)).all(axis=1)
        verdict.wrong += int(np.count_nonzero(there[start:stop] & ~same))
    sent = np.zeros(length + 1, np.int64)
    first, behind = (np.minimum(x, length) for x in (frames[:, 1], frames[:, 1] + frames[:, 2]))
    np.add.at(sent, first, 1)
    np.add.at(sent, behind, -1)
    verdict.wrong += int(np.count_nonzero(there & (np.cumsum(sent) == 0)))
    missing = np.concatenate([[0], np.cumsum(~there)])
    whole = (missing[behind] == missing[first]) & (frames[:, 1] + frames[:, 2] <= length)
    verdict.kept += int(np.count_nonzero(whole))
    verdict.lost += int(np.count_nonzero((frames[:, 3] == 1) & ~whole))
    edges = np.flatnonzero(np.diff(np.concatenate([[True], there[:length], [True]]).astype(int)))
    expected = {(begin + a, b - a) for a, b in edges.reshape(-1, 2).tolist()}
    told = {
        (gap.index, gap.length) for gap in recording.gaps if gap.exact and begin <= gap.index < end
    }
    verdict.gaps += len(told)
    verdict.gaps_wrong += len(expected ^ told) + int(length > 0 and not there[length - 1])
