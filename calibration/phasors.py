"""Block phasors: one product of the recording with the carriers of all lines.

With the recording cut into blocks, the rows of a matrix Y, and the carriers as the columns of E, all
block phasors are the one product Y·E. Everything a line fit needs follows from them, and they merge:
the phasors of two parts of a recording add up to those of the whole.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError

__all__ = [
    "LONGEST_PRODUCT",
    "BlockPhasors",
    "block_length",
    "block_phasors",
    "block_waves",
    "merge_phasors",
    "start_phases",
]

# 16 384 samples by 18 columns of float64 are 2.4 MB: about a core's second-level cache, through which the
# recording streams. Fewer, longer blocks leave less to do after the product; a line that is off by
# 0.01 Hz must not turn by much within one.
LONGEST_PRODUCT = 1 << 14
"""Longest block whose carriers are multiplied at once; longer ones are added up."""

_SHORTEST_OF_LONG = 1 << 9
_FEWEST_BLOCKS = 256
_FEWEST_OF_LONG = 1024
# Of each block some hundred bytes are kept, and a few times that while it is fitted.
_MOST_BLOCKS = 1 << 15
# 32 MB of float64 a product: bounds the copy of a recording in another format.
_CHUNK_SAMPLES = 1 << 22
_FRACTION = 1 << 24  # the fraction of a cycle a sample that is multiplied in exact integers


@dataclass(frozen=True, slots=True)
class BlockPhasors:
    """The phasors of a recording, or of a part of it, block by block.

    Parameters
    ----------
    cycles : ndarray, shape (n_carriers,)
        Carrier frequencies in cycles a sample, f / rate.
    block : int
        Samples in a block; block b holds the samples b·block ≤ n < (b+1)·block.
    taps : tuple of float
        Filter h that the samples went through, Σ_j h_j·y[n−j]; (1.0,) for none.
    numbers : ndarray of int, shape (n_blocks,)
        The blocks that hold at least one sample, ascending.
    counts : ndarray of int, shape (n_blocks,)
        Samples used in each.
    present : ndarray of int, shape (n_blocks,)
        Samples that are there; more than ``counts`` where the filter could not use them.
    sums, slopes : ndarray of complex, shape (n_blocks, n_carriers)
        Σ y·e^(−2πi·cycles·n) and Σ u·y·e^(−2πi·cycles·n), n counted from the recording's first
        sample, u = (n − middle of the block)/block. Slopes are None unless asked for.
    drift : ndarray, shape (n_blocks, 2)
        Σ y and Σ u·y.
    touched : ndarray of int, shape (n_touched,)
        The numbers of the blocks that are not full.
    masks : ndarray of uint8, shape (n_touched, ceil(block/8))
        Packed bits, 1 for a sample that was used.
    """

    cycles: NDArray[np.float64]
    block: int
    taps: tuple[float, ...]
    numbers: NDArray[np.int64]
    counts: NDArray[np.int64]
    present: NDArray[np.int64]
    sums: NDArray[np.complex128]
    slopes: NDArray[np.complex128] | None
    drift: NDArray[np.float64]
    touched: NDArray[np.int64]
    masks: NDArray[np.uint8]

    @property
    def used(self) -> int:
        """Number of samples used."""
        return int(self.counts.sum())

    @property
    def middles(self) -> NDArray[np.float64]:
        """Middle of each block [samples from the recording's first], shape (n_blocks,)."""
        return self.numbers.astype(np.float64) * self.block + 0.5 * (self.block - 1)

    def part(self, first: float, last: float) -> "BlockPhasors":
        """Return the blocks whose middles lie between two samples, both counted."""
        rows = (self.middles >= first) & (self.middles <= last)
        kept = np.isin(self.touched, self.numbers[rows])
        return replace(
            self,
            numbers=self.numbers[rows],
            counts=self.counts[rows],
            present=self.present[rows],
            sums=self.sums[rows],
            slopes=None if self.slopes is None else self.slopes[rows],
            drift=self.drift[rows],
            touched=self.touched[kept],
            masks=self.masks[kept],
        )

    def __add__(self, other: "BlockPhasors") -> "BlockPhasors":
        return merge_phasors([self, other])


def block_length(samples: int) -> int:
    """Return the block length that suits a recording.

    Parameters
    ----------
    samples : int
        Length of the recording.

    Returns
    -------
    int
        A power of two: 1 for the shortest records, 16 384 from 17 million samples on, more from a
        thousand million on, so that there are never more than 65 536 blocks.
    """
    wanted = max(1, min(samples // _FEWEST_BLOCKS, _SHORTEST_OF_LONG), samples // _FEWEST_OF_LONG)
    wanted = max(min(LONGEST_PRODUCT, wanted), samples // _MOST_BLOCKS)
    return int(1 << (wanted.bit_length() - 1))


def start_phases(cycles: NDArray[np.float64], starts: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return the phase of carriers at samples far into a recording.

    Parameters
    ----------
    cycles : ndarray, shape (n_carriers,)
        Cycles a sample.
    starts : ndarray of int, shape (n,)
        Sample numbers, below 2³⁹.

    Returns
    -------
    ndarray, shape (n, n_carriers)
        Phase [rad], modulo 2π, right to 1e-15 rad whatever the sample number.
    """
    coarse = np.rint(cycles * _FRACTION).astype(np.int64)
    fine = cycles - coarse / _FRACTION
    turns = (starts[:, None] * coarse % _FRACTION) / _FRACTION + starts[:, None] * fine
    return 2.0 * np.pi * np.asarray(turns % 1.0, dtype=np.float64)


def block_phasors(
    values: NDArray[Any],
    cycles: NDArray[np.float64],
    *,
    start_index: int = 0,
    block: int | None = None,
    taps: tuple[float, ...] = (1.0,),
    slopes: bool = False,
    history: NDArray[np.float64] | None = None,
) -> BlockPhasors:
    """Return the block phasors of samples; what is not finite is left out exactly.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples of any real type, NaN where missing.
    cycles : ndarray, shape (n_carriers,)
        Carrier frequencies in cycles a sample.
    start_index : int
        Number of ``values[0]`` counted from the recording's first sample.
    block : int, optional
        Block length; parts that are to be merged need the same.
    taps : tuple of float
        Filter to send the samples through, Σ_j h_j·y[n−j]; after each gap it costs as many
        samples as it has taps beyond the first.
    slopes : bool
        Also keep the first moment of every phasor.
    history : ndarray, optional
        The samples before ``values``, for the filter; without it the first samples are lost.

    Returns
    -------
    BlockPhasors
        Memory n·n_carriers/block; no copy of ``values`` is made.

    Notes
    -----
    The filter costs nothing: Σ e(n)·(h∗y)(n) over a block is Σ y(m)·g(m) with carriers g that are
    filtered backwards, which reach len(taps)−1 samples into the block before.
    """
    size = block_length(len(values)) if block is None else block
    past = np.empty(0) if history is None else np.asarray(history, dtype=np.float64)
    carriers = _carriers(np.asarray(cycles, dtype=np.float64).tobytes(), size, taps, slopes)
    samples = _Samples(values, start_index, past[len(past) - min(len(past), len(taps) - 1) :])
    numbers, products = _whole_blocks(samples, carriers)
    sound = np.isfinite(products).all(axis=1)
    touched = np.concatenate([samples.edges(size, numbers), numbers[~sound]])
    return _assembled(
        carriers,
        (numbers[sound], products[sound]),
        _touched_blocks(samples, carriers, np.sort(touched)),
    )


def merge_phasors(parts: Sequence[BlockPhasors]) -> BlockPhasors:
    """Return the phasors of a whole from those of its parts, in any order.

    Parameters
    ----------
    parts : sequence of BlockPhasors
        With the same carriers, block length and filter; no sample may be in two of them.

    Returns
    -------
    BlockPhasors
        As if the whole had been taken at once, to rounding.

    Raises
    ------
    CalibrationError
        If the parts do not fit together or overlap.
    """
    first = parts[0]
    for part in parts[1:]:
        if part.block != first.block or part.taps != first.taps:
            raise CalibrationError("phasors must have one block length and one filter to be merged")
        if not np.array_equal(part.cycles, first.cycles):
            raise CalibrationError("phasors must have the same carriers to be merged")
    numbers, place = np.unique(np.concatenate([p.numbers for p in parts]), return_inverse=True)
    counts = _added([p.counts for p in parts], place, len(numbers))
    if (counts > first.block).any():
        raise CalibrationError("phasors of overlapping parts cannot be merged")
    touched, masks = _merged_masks(parts, numbers[counts < first.block])
    slopes = [p.slopes for p in parts if p.slopes is not None]
    return BlockPhasors(
        first.cycles,
        first.block,
        first.taps,
        numbers,
        counts,
        _added([p.present for p in parts], place, len(numbers)),
        _added([p.sums for p in parts], place, len(numbers)),
        _added(slopes, place, len(numbers)) if len(slopes) == len(parts) else None,
        _added([p.drift for p in parts], place, len(numbers)),
        touched,
        masks,
    )


def _added(arrays: Sequence[NDArray[Any]], place: NDArray[np.int64], n: int) -> NDArray[Any]:
    joined = np.concatenate(list(arrays))
    total = np.zeros((n, *joined.shape[1:]), dtype=joined.dtype)
    np.add.at(total, place, joined)
    return total


def _merged_masks(
    parts: Sequence[BlockPhasors], wanted: NDArray[np.int64]
) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
    masks = np.zeros((len(wanted), parts[0].masks.shape[1]), dtype=np.uint8)
    for part in parts:
        kept = np.isin(part.touched, wanted)
        rows = np.searchsorted(wanted, part.touched[kept])
        if (masks[rows] & part.masks[kept]).any():
            raise CalibrationError("phasors of overlapping parts cannot be merged")
        masks[rows] |= part.masks[kept]
    return wanted, masks


@dataclass(frozen=True, slots=True)
class _Samples:
    """Samples and where they lie in the recording; ``past`` are those just before them."""

    values: NDArray[Any]
    start: int
    past: NDArray[np.float64]

    def edges(self, block: int, whole: NDArray[np.int64]) -> NDArray[np.int64]:
        """Return the numbers of the blocks that are begun but not among the whole ones."""
        end = self.start + len(self.values)
        begun = np.arange(self.start // block, -(-end // block), dtype=np.int64)
        if not len(whole):
            return begun
        outside: NDArray[np.int64] = begun[(begun < whole[0]) | (begun > whole[-1])]
        return outside

    def rows(self, numbers: NDArray[np.int64], block: int, reach: int) -> NDArray[np.float64]:
        """Return blocks with ``reach`` samples before each, NaN where there is no sample."""
        index = numbers[:, None] * block - self.start + np.arange(-reach, block)
        inside = (index >= 0) & (index < len(self.values))
        rows = np.full(index.shape, np.nan)
        rows[inside] = self.values[index[inside]]
        early = (index < 0) & (index >= -len(self.past))
        rows[early] = self.past[index[early] + len(self.past)]
        return rows


@dataclass(frozen=True, slots=True)
class _Carriers:
    """The columns of E over one block: cos and −sin of each line, 1 and u, and moments if asked.

    ``filtered`` are the same columns filtered backwards, shape (reach + block, n_columns).
    """

    cycles: NDArray[np.float64]
    block: int
    taps: tuple[float, ...]
    slopes: bool
    columns: NDArray[np.float64]
    filtered: NDArray[np.float64]

    @classmethod
    def of(
        cls, cycles: NDArray[np.float64], block: int, taps: tuple[float, ...], *, slopes: bool
    ) -> "_Carriers":
        n = np.arange(block)
        u = ((n - 0.5 * (block - 1)) / block)[:, None]
        waves = block_waves(cycles, block)
        parts = [waves.real, waves.imag, np.ones_like(u), u]
        parts += [u * waves.real, u * waves.imag] if slopes else []
        columns = np.hstack(parts)
        filtered = np.zeros((block + len(taps) - 1, columns.shape[1]))
        for delay, tap in enumerate(taps):
            start = len(taps) - 1 - delay
            filtered[start : start + block] += tap * columns
        return cls(cycles, block, taps, slopes, columns, filtered)

    @property
    def reach(self) -> int:
        """Samples before a block that its filtered carriers reach into."""
        return len(self.taps) - 1


# A recording that is read piece by piece asks for the same columns again and again.
@lru_cache(maxsize=4)
def _carriers(
    cycles: bytes, block: int, taps: tuple[float, ...], slopes: bool
) -> _Carriers:  # a key
    return _Carriers.of(np.frombuffer(cycles), block, taps, slopes=slopes)


@dataclass(frozen=True, slots=True)
class _Touched:
    """Blocks that are not full: numbers, products, masks of the samples used, samples there."""

    numbers: NDArray[np.int64]
    products: NDArray[np.float64]
    masks: NDArray[np.bool_]
    present: NDArray[np.int64]


def block_waves(cycles: NDArray[np.float64], block: int) -> NDArray[np.complex128]:
    """Return the carriers over one block.

    Parameters
    ----------
    cycles : ndarray, shape (n_carriers,)
        Cycles a sample.
    block : int
        Block length.

    Returns
    -------
    ndarray of complex, shape (block, n_carriers)
        e^(−2πi·cycles·n), from 128 values of the exponential and their products.
    """
    fine = min(block, 128)
    few = np.exp(-1j * start_phases(cycles, np.arange(fine)))
    steps = np.exp(-1j * start_phases(cycles, np.arange(0, block, fine)))
    return np.asarray((steps[:, None, :] * few).reshape(-1, len(cycles))[:block])


def _whole_blocks(
    samples: _Samples, carriers: _Carriers
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Return numbers and products Y·E of the blocks that have all samples they need."""
    block, reach = carriers.block, carriers.reach
    first = -(-(samples.start + reach) // block)
    last = (samples.start + len(samples.values)) // block
    numbers = np.arange(first, max(first, last), dtype=np.int64)
    products = np.empty((len(numbers), carriers.columns.shape[1]))
    step = max(1, _CHUNK_SAMPLES // block)
    for row in range(0, len(numbers), step):
        begin = int(numbers[row]) * block - samples.start
        rows = min(step, len(numbers) - row)
        _multiply(
            samples.values[begin - reach : begin + rows * block],
            carriers,
            products[row : row + rows],
        )
    return numbers, products


def _multiply(chunk: NDArray[Any], carriers: _Carriers, out: NDArray[np.float64]) -> None:
    # asarray copies neither float64 nor its strides; matmul takes both as they are.
    data = np.asarray(chunk, dtype=np.float64)
    reach, block = carriers.reach, carriers.block
    with np.errstate(invalid="ignore", over="ignore"):
        np.matmul(data[reach:].reshape(-1, block), carriers.filtered[reach:], out=out)
        if reach:
            before = np.lib.stride_tricks.sliding_window_view(data, reach)[::block][: len(out)]
            out += before @ carriers.filtered[:reach]


def _touched_blocks(
    samples: _Samples, carriers: _Carriers, numbers: NDArray[np.int64]
) -> "_Touched":
    """Return the blocks with gaps or at the ends."""
    products = [np.empty((0, carriers.columns.shape[1]))]
    masks = [np.empty((0, carriers.block), dtype=bool)]
    present = [np.empty(0, dtype=np.int64)]
    step = max(1, (_CHUNK_SAMPLES // 8) // carriers.block)
    for row in range(0, len(numbers), step):
        data = samples.rows(numbers[row : row + step], carriers.block, carriers.reach)
        own = np.isfinite(data[:, carriers.reach :])
        # What lies before the first sample given belongs to another part.
        own &= (
            numbers[row : row + step, None] * carriers.block + np.arange(carriers.block)
        ) >= samples.start
        present.append(own.sum(axis=1))
        with np.errstate(invalid="ignore"):  # inf − inf: not finite either way
            data = _filtered(data, carriers.taps)
        used = np.isfinite(data) & own
        data[~used] = 0.0
        products.append(data @ carriers.columns)
        masks.append(used)
    there = np.concatenate(present)
    held = there > 0
    return _Touched(
        numbers[held], np.concatenate(products)[held], np.concatenate(masks)[held], there[held]
    )


def _filtered(rows: NDArray[np.float64], taps: tuple[float, ...]) -> NDArray[np.float64]:
    reach = len(taps) - 1
    total = taps[0] * rows[:, reach:]
    for delay, tap in enumerate(taps[1:], start=1):
        total += tap * rows[:, reach - delay : rows.shape[1] - delay]
    return total


def _assembled(
    carriers: _Carriers,
    whole: tuple[NDArray[np.int64], NDArray[np.float64]],
    touched: _Touched,
) -> BlockPhasors:
    numbers = np.concatenate([whole[0], touched.numbers])
    order = np.argsort(numbers)
    full = np.full(len(whole[0]), carriers.block, dtype=np.int64)
    products = np.concatenate([whole[1], touched.products])[order]
    numbers = numbers[order]
    turn = np.exp(-1j * start_phases(carriers.cycles, numbers * carriers.block))
    k = len(carriers.cycles)
    moments = products[:, 2 * k + 2 :]
    partial = ~touched.masks.all(axis=1)
    return BlockPhasors(
        carriers.cycles,
        carriers.block,
        carriers.taps,
        numbers,
        np.concatenate([full, touched.masks.sum(axis=1)])[order],
        np.concatenate([full, touched.present])[order],
        (products[:, :k] + 1j * products[:, k : 2 * k]) * turn,
        (moments[:, :k] + 1j * moments[:, k:]) * turn if carriers.slopes else None,
        products[:, 2 * k : 2 * k + 2],
        touched.numbers[partial],
        np.packbits(touched.masks[partial], axis=1),
    )
