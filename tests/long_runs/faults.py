"""Damage to bytes on their way, and which frames come through it undamaged.

A frame is undamaged if its bytes and the delimiters on both sides arrive intact: if the stretch of
the wire from one to the other arrives in one piece, wherever else it is repeated or broken.
"""

import numpy as np

__all__ = ["KINDS", "damage", "undamaged"]

_BLOCK_MAX = 2000  # bytes


class _Trail:
    """What arrives, and which stretches of the wire it is made of."""

    def __init__(self, wire):
        self.wire = wire
        self.parts = []
        self.stretches = []

    def copy(self, start, stop):
        stop = min(stop, len(self.wire))
        if start >= stop:
            return
        self.parts.append(self.wire[start:stop])
        if self.stretches and self.stretches[-1][1] == start:
            self.stretches[-1][1] = stop
        else:
            self.stretches.append([start, stop])

    def put(self, data):
        self.parts.append(data)
        self.stretches.append([0, 0])  # what follows it is no longer next to what was before


def _flip(trail, place, rng, longest):
    trail.put(bytes([trail.wire[place] ^ 1 << int(rng.integers(8))]))
    return place + 1


def _drop(trail, place, rng, longest):
    trail.put(b"")
    return place + int(rng.integers(1, 17))


def _insert(trail, place, rng, longest):
    trail.put(rng.bytes(int(rng.integers(1, 9))))
    return place


def _duplicate(trail, place, rng, longest):
    stop = place + int(rng.integers(1, longest))
    trail.copy(place, stop)
    trail.copy(place, stop)
    return stop


def _reorder(trail, place, rng, longest):
    middle = place + int(rng.integers(1, longest))
    stop = middle + int(rng.integers(1, longest))
    trail.copy(middle, stop)
    trail.copy(place, middle)
    return stop


KINDS = {
    "flips": _flip,
    "drops": _drop,
    "inserts": _insert,
    "duplicated blocks": _duplicate,
    "reordered blocks": _reorder,
}


def damage(wire, kinds, rate, rng):
    """Return what arrives, the stretches of the wire that arrive in one piece, and the faults done.

    Faults begin at ``rate`` per byte; one that falls into the block of the one before is left out.
    Blocks are at most half as long as the mean distance of faults, so that few are left out.
    """
    size = len(wire)
    trail, cursor, done = _Trail(wire), 0, 0
    longest = int(min(_BLOCK_MAX, max(3, 0.5 / rate))) if rate else 2
    for place in np.sort(rng.integers(0, size, rng.poisson(rate * size))).tolist():
        if place < cursor:
            continue
        trail.copy(cursor, place)
        cursor = KINDS[kinds[int(rng.integers(len(kinds)))]](trail, place, rng, longest)
        done += 1
    trail.copy(cursor, size)
    return b"".join(trail.parts), np.array(trail.stretches).reshape(-1, 2), done


def undamaged(starts, ends, stretches):
    """Return which frames, from delimiter to delimiter, lie in a stretch that arrived in one piece."""
    first = np.searchsorted(starts, stretches[:, 0], "left")
    behind = np.searchsorted(ends, stretches[:, 1], "left")
    some = behind > first
    steps = np.zeros(len(starts) + 1, np.int64)
    np.add.at(steps, first[some], 1)
    np.add.at(steps, behind[some], -1)
    return np.cumsum(steps)[:-1] > 0
