"""Line phasors: the sums over a part of a recording that lead to its lines, and that merge.

Whatever the parts, in whatever order they are merged, the sums are those of the whole: blocks are
counted from the recording's first sample, what a part holds of a block at its ends keeps its place,
and what a filter needs of the part before is kept beside the sums until the two meet.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.coarse_blocks import coarsened
from calibration.errors import CalibrationError
from calibration.line_plan import LinePlan
from calibration.phasors import LONGEST_PRODUCT, BlockPhasors, block_phasors, merge_phasors

if TYPE_CHECKING:
    from calibration.line_fit import LineFit
    from calibration.line_source import LineSource

__all__ = ["LinePhasors", "Part", "sum_lines"]


@dataclass(frozen=True, eq=False, slots=True)
class Part:
    """What is kept of one part beside its sums.

    Parameters
    ----------
    start, stop : int
        Samples start ≤ n < stop, counted from the recording's first.
    head, tail : tuple of ndarray
        The first and last samples of each channel, as many as a filter needs.
    kept : tuple of ndarray
        One sample in so many of each channel.
    """

    start: int
    stop: int
    head: tuple[NDArray[Any], ...]
    tail: tuple[NDArray[Any], ...]
    kept: tuple[NDArray[Any], ...]


@dataclass(frozen=True, eq=False, slots=True)
class LinePhasors:
    """The sums over one or more parts of a recording, all by one plan.

    Parameters
    ----------
    plan : LinePlan
        How they were summed.
    blocks : tuple of BlockPhasors
        Of each channel.
    parts : tuple of Part
        In the order of their samples.
    """

    plan: LinePlan
    blocks: tuple[BlockPhasors, ...]
    parts: tuple[Part, ...]

    @property
    def start(self) -> int:
        """Number of the first sample."""
        return self.parts[0].start

    @property
    def length(self) -> int:
        """Samples from the first to the last, what is missing between the parts included."""
        return self.parts[-1].stop - self.start

    def merge(self, *others: "LinePhasors") -> "LinePhasors":
        """Return the sums over these parts and others.

        Parameters
        ----------
        *others : LinePhasors
            Of other parts of the same recording, by the same plan, in any order.

        Returns
        -------
        LinePhasors
            As if all had been summed at once, to rounding.

        Raises
        ------
        CalibrationError
            If the plans differ or a sample is in two parts.
        """
        everyone = (self, *others)
        if not all(self.plan.is_same(other.plan) for other in others):
            raise CalibrationError("line phasors must be of one plan to be merged")
        parts = sorted((part for one in everyone for part in one.parts), key=lambda p: p.start)
        for before, after in pairwise(parts):
            if after.start < before.stop:
                raise CalibrationError(
                    f"sample {after.start} is in two parts: overlapping parts cannot be merged"
                )
        blocks = tuple(
            merge_phasors([one.blocks[k] for one in everyone]) for k in range(self.plan.width)
        )
        return LinePhasors(self.plan, blocks, tuple(parts))

    def __add__(self, other: "LinePhasors") -> "LinePhasors":
        return self.merge(other)

    def fit(self) -> "LineFit":
        """Return the lines of what was summed.

        Returns
        -------
        LineFit
            Lines in the order of the plan; t = 0 at the recording's sample 0.
        """
        from calibration.line_solution import solve_lines

        return solve_lines(self.checked())

    def checked(self) -> "LinePhasors":
        """Return the same; raise a CalibrationError where a channel has no value at all."""
        for name, phasors in zip(("samples", "drive"), self.blocks, strict=False):
            if not phasors.used:
                raise CalibrationError(f"{name}: no value is there, all are NaN")
        return self

    def joined(self) -> "LinePhasors":
        """Return the same with what filters could not use at the seams between parts put in."""
        joined = list(self.parts[:1])
        seams: list[LinePhasors] = []
        for part in self.parts[1:]:
            before = joined[-1]
            if self.plan.reach and part.start == before.stop:
                seams.append(self._seam(before, part))
            joined.append(_lengthened(before, part, self.plan.reach))
        if not seams:
            return self
        blocks = tuple(
            merge_phasors([own, *(seam.blocks[k] for seam in seams)])
            for k, own in enumerate(self.blocks)
        )
        return replace(self, blocks=blocks)

    def _seam(self, before: Part, part: Part) -> "LinePhasors":
        """Return what the filters could not do at the beginning of a part."""
        blocks = []
        for k, taps in enumerate(self.plan.taps):
            reach = len(taps) - 1
            head = part.head[k][:reach]
            seen = _phasors(self.plan, k, head, part.start, before.tail[k])
            # The part has counted these samples as being there; only their sums were missing.
            blocks.append(replace(seen, present=np.zeros_like(seen.present)))
        return LinePhasors(self.plan, tuple(blocks), ())


def _lengthened(before: Part, part: Part, reach: int) -> Part:
    """Return a part whose tail goes back into the part before where it is too short itself."""
    if part.start != before.stop or part.stop - part.start >= reach:
        return part
    tails = tuple(
        np.concatenate([old, own])[-reach:] for old, own in zip(before.tail, part.tail, strict=True)
    )
    return replace(part, tail=tails)


def _phasors(
    plan: LinePlan, channel: int, values: NDArray[Any], start: int, history: NDArray[Any] | None
) -> BlockPhasors:
    found = block_phasors(
        values,
        plan.carriers(channel),
        start_index=start,
        block=min(plan.block, LONGEST_PRODUCT),
        taps=plan.taps[channel],
        slopes=plan.is_free,
        history=history,
    )
    return coarsened(found, plan.block)


def sum_lines(source: "LineSource", plan: LinePlan) -> LinePhasors:
    """Sum the samples of a recording or a part of it, in one pass and in bounded memory.

    Parameters
    ----------
    source : LineSource
        The samples.
    plan : LinePlan
        How.

    Returns
    -------
    LinePhasors
        Of one part.
    """
    found: list[list[BlockPhasors]] = [[] for _ in range(plan.width)]
    kept: list[list[NDArray[Any]]] = [[] for _ in range(plan.width)]
    head: list[NDArray[Any]] = []
    tail: list[NDArray[Any]] = [np.empty(0)] * plan.width
    for start, channels in source.chunks(plan.block):
        if not head or len(head[0]) < plan.reach:
            head = _extended(head, channels, plan.reach)
        for k, values in enumerate(channels):
            found[k].append(_phasors(plan, k, values, start, tail[k]))
            kept[k].append(np.array(values[(plan.start - start) % plan.every :: plan.every]))
        tail = _tails(tail, channels, plan.reach)
    part = Part(
        source.start,
        source.start + source.length,
        tuple(head),
        tuple(tail),
        tuple(np.concatenate(pieces) for pieces in kept),
    )
    return LinePhasors(plan, tuple(_merged(pieces) for pieces in found), (part,))


def _merged(pieces: Sequence[BlockPhasors]) -> BlockPhasors:
    return pieces[0] if len(pieces) == 1 else merge_phasors(pieces)


def _extended(
    head: list[NDArray[Any]], channels: list[NDArray[Any]], reach: int
) -> list[NDArray[Any]]:
    begun = head or [np.empty(0)] * len(channels)
    return [
        np.concatenate([old, np.asarray(new[:reach], dtype=np.float64)])[:reach]
        for old, new in zip(begun, channels, strict=True)
    ]


def _tails(
    tail: list[NDArray[Any]], channels: list[NDArray[Any]], reach: int
) -> list[NDArray[Any]]:
    if not reach:
        return tail
    return [
        np.concatenate([old, np.asarray(new[-reach:], dtype=np.float64)])[-reach:]
        for old, new in zip(tail, channels, strict=True)
    ]
