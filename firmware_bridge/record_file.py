"""The records of a recording, read in chunks of whole records with every CRC checked."""

import os
import weakref
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any
from zlib import crc32

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.announcement import FORMATS
from firmware_bridge.envelope import SEALED
from firmware_bridge.frame import HEADER
from firmware_bridge.message_head import WIRE_VERSION, MessageType
from firmware_bridge.recording_header import RecordingError, parse_header

__all__ = ["Chunk", "RecordFile"]

_CHUNK_BYTES = 1 << 19  # header, records and their counts stay in the processor's cache
_LENGTH_FIELD = 2  # where a message other than samples has the length of its body


@dataclass(frozen=True, eq=False, slots=True)
class Chunk:
    """Some records, one behind the other; valid until the next chunk is read.

    Parameters
    ----------
    first : int
        Number of the first record.
    records : ndarray of uint8, shape (n, record_bytes)
        A view of the reader's buffer.
    samples : ndarray of int
        Which of them are undamaged samples frames.
    messages : list of (int, bytes)
        The other undamaged ones: which, and the sealed message.
    damaged : int
        How many are damaged.
    """

    first: int
    records: NDArray[np.uint8]
    samples: NDArray[np.int64]
    messages: list[tuple[int, bytes]]
    damaged: int

    @property
    def heads(self) -> NDArray[Any]:
        """Headers of all records as `HEADER`, meaningful where ``samples`` says."""
        return self.records[:, : HEADER.itemsize].view(HEADER)[:, 0]


class RecordFile:
    """An .mfr file, open for reading.

    Parameters
    ----------
    path : path-like
        The file.

    Raises
    ------
    RecordingError
        If it cannot be read or is no recording.
    """

    def __init__(self, path: str | os.PathLike[str]) -> None:
        self.path = str(path)
        try:
            handle = os.open(path, os.O_RDONLY | getattr(os, "O_BINARY", 0))
            # Recordings are read whenever someone asks, so the file closes with the last reference.
            self._closing = weakref.finalize(self, os.close, handle)
            self._file = open(handle, "rb", buffering=0, closefd=False)  # noqa: SIM115
            size = os.fstat(handle).st_size
            begin = self._file.read(1 << 20)
        except OSError as error:
            raise RecordingError(f"{path} cannot be read: {error.strerror}") from None
        self.header, self._start = parse_header(begin, self.path)
        self.record_bytes = self.header.record_bytes
        self.count, self.tail_bytes = divmod(size - self._start, self.record_bytes)
        announced = self.header.announcement
        self.channels = len(announced.channels)
        self.width = FORMATS[announced.format]
        self.slots = announced.slots
        padding = self.record_bytes - self.header.frame_bytes
        self._intact = crc32(bytes(padding), SEALED)  # CRC of any intact frame and its padding
        self._buffer = bytearray(max(1, _CHUNK_BYTES // self.record_bytes) * self.record_bytes)

    def close(self) -> None:
        """Close the file."""
        self._closing()

    def rows(self, first: int, count: int) -> NDArray[np.uint8]:
        """Return up to ``count`` records from number ``first`` on, unchecked.

        Parameters
        ----------
        first, count : int
            Record number and how many.

        Returns
        -------
        ndarray of uint8, shape (n, record_bytes)
            A view of a buffer that the next call overwrites; n ≥ 1, at most a chunk.
        """
        count = min(count, len(self._buffer) // self.record_bytes)
        view = memoryview(self._buffer)[: count * self.record_bytes]
        self._file.seek(self._start + first * self.record_bytes)
        done = 0
        while done < len(view):
            got = self._file.readinto(view[done:])
            if not got:
                raise RecordingError(f"{self.path} became shorter while it was read")
            done += got
        return np.frombuffer(view, np.uint8).reshape(count, self.record_bytes)

    def chunks(self) -> Iterator[Chunk]:
        """Yield all records, every CRC checked.

        Yields
        ------
        Chunk
            In the order of the file.
        """
        first = 0
        while first < self.count:
            records = self.rows(first, self.count - first)
            yield self._checked(first, records)
            first += len(records)

    def _checked(self, first: int, records: NDArray[np.uint8]) -> Chunk:
        step = self.record_bytes
        view = memoryview(self._buffer)
        checks = [crc32(view[k : k + step]) for k in range(0, records.size, step)]
        intact = np.array(checks, np.uint32) == self._intact
        head = records[:, : HEADER.itemsize].view(HEADER)[:, 0]
        intact &= (
            (head["type"] == MessageType.SAMPLES)
            & (head["version"] == WIRE_VERSION)
            & (head["channels"] == self.channels)
            & (head["format"] == self.width)
            & (head["slots"] == self.slots)
            & (head["filled"] <= self.slots)
        )
        messages: list[tuple[int, bytes]] = []
        damaged = 0
        for k in np.flatnonzero(~intact).tolist():
            message = self._other(records[k].tobytes())
            if message is None:
                damaged += 1
            elif message[0] == MessageType.SAMPLES:
                intact[k] = True
            else:
                messages.append((k, message))
        return Chunk(first, records, np.flatnonzero(intact), messages, damaged)

    def _other(self, record: bytes) -> bytes | None:
        """Return the message of a record that is not a full-size samples frame, None if damaged."""
        if record[0] == MessageType.SAMPLES:
            head = np.frombuffer(record, HEADER, 1)[0]
            room = int(head["slots"]) * self.channels * self.width
            fits = (head["channels"], head["format"]) == (self.channels, self.width)
            if not fits or head["filled"] > head["slots"]:
                return None
            length = HEADER.itemsize + room + 4
        else:
            length = 8 + int.from_bytes(record[_LENGTH_FIELD : _LENGTH_FIELD + 2], "little")
        if length > len(record) or crc32(record[:length]) != SEALED:
            return None
        return record[:length]

    def counts(self, records: NDArray[np.uint8]) -> NDArray[Any]:
        """Return the counts of full records, shape (records · slots, channels), int16 or int32.

        Parameters
        ----------
        records : ndarray of uint8, shape (n, record_bytes)
            Samples records.

        Returns
        -------
        ndarray, shape (n · slots, channels)
            int16 or int32; unfilled slots included.
        """
        room = self.slots * self.channels * self.width
        payload = records[:, HEADER.itemsize : HEADER.itemsize + room]
        if self.width == 3:
            return self._counts_24(records)
        typed = payload.view(f"<i{self.width}")
        return typed.reshape(-1, self.channels)

    def _counts_24(self, records: NDArray[np.uint8]) -> NDArray[np.int32]:
        # Each sample is read as the top three of four bytes, the first of which belongs to its
        # neighbour (or to the header): shifted down, that byte goes and the sign comes along.
        wide = np.ndarray(
            (len(records), self.slots * self.channels),
            "<i4",
            records.data,
            HEADER.itemsize - 1,
            (self.record_bytes, 3),
        )
        return (wide >> 8).reshape(-1, self.channels)
