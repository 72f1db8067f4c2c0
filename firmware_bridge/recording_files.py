"""The files of one recording, one behind the other: their names, their size, what is appended."""

import os
from pathlib import Path

from firmware_bridge.announcement import Announcement
from firmware_bridge.host_note import End, HostNote
from firmware_bridge.recording_header import Header
from firmware_bridge.rotation import Rotation
from firmware_bridge.writer import Writer

__all__ = ["RecordingFiles"]

_LAST_NOTES = 4  # the last stamp, the end, and what was discarded are still to be said


class RecordingFiles:
    """Append to the present file; begin and close files.

    Parameters
    ----------
    path : path-like
        The first file; the others are NAME-2, NAME-3 … unless the rotation names them.
    info : dict of str to str
        For the headers.
    size_bytes : int, optional
        How large all files together may become.
    overwrite : bool
        Replace an existing first file.
    rotation : Rotation
        When a file ends, and what the next one is called.
    """

    def __init__(
        self,
        path: str | os.PathLike[str],
        info: dict[str, str],
        size_bytes: int | None,
        overwrite: bool,
        rotation: Rotation,
    ) -> None:
        self._path, self._info = Path(path), info
        self._size_bytes, self._overwrite, self._rotation = size_bytes, overwrite, rotation
        self._writer: Writer | None = None
        self._earlier_bytes = 0
        self.paths: list[Path] = []
        """The files written, in order."""
        self.has_end = False
        """Whether its end is written into the present file."""

    @property
    def is_open(self) -> bool:
        """Whether there is a present file."""
        return self._writer is not None

    @property
    def length_bytes(self) -> int:
        """Length of all files together, with what still waits to be written."""
        return self._earlier_bytes + (0 if self._writer is None else self._writer.bytes)

    @property
    def _present(self) -> Writer:
        assert self._writer is not None  # noqa: S101  # whoever writes has begun a file
        return self._writer

    def begin(self, announcement: Announcement, unix_ns: int) -> None:
        """Begin the next file; errors as `Writer`.

        Parameters
        ----------
        announcement : Announcement
            Of the stream that begins it.
        unix_ns : int
            The host's clock.
        """
        info = {**self._info, "follows": self.paths[-1].name} if self.paths else self._info
        self._writer = Writer(
            self._next_path(),
            Header(announcement, unix_ns, info),
            overwrite=self._overwrite and not self.paths,
        )
        self.paths.append(self._writer.path)

    def append(self, message: bytes) -> None:
        """Append one sealed message to the present file; errors as `Writer.append`.

        Parameters
        ----------
        message : bytes
            Content and CRC.
        """
        self._present.append(message)

    def note(self, note: HostNote) -> None:
        """Append a note of the host to the present file.

        Parameters
        ----------
        note : Stamp, Join, Remark or End
            What to write.
        """
        self._present.note(note)
        if isinstance(note, End):
            self.has_end = True

    def sync_if_due(self) -> None:
        """Have the records of the present file on the disk, twice a second."""
        self._present.sync(if_due=True)

    def has_room(self, length: int) -> bool:
        """Return whether a message fits into the size that is asked for.

        Parameters
        ----------
        length : int
            Of the message [bytes].

        Returns
        -------
        bool
            True also without such a size.
        """
        needed = (1 + _LAST_NOTES) * length
        return self._size_bytes is None or self.length_bytes + needed <= self._size_bytes

    def is_due(self, length_s: float) -> bool:
        """Return whether the present file ends before its next frame, as the rotation asks.

        Parameters
        ----------
        length_s : float
            Its length without that frame [s].

        Returns
        -------
        bool
            True if it would be too large, or is long enough.
        """
        next_bytes = self._present.bytes + (1 + _LAST_NOTES) * self._present.record_bytes
        return self._rotation.is_due(next_bytes, length_s)

    def close(self) -> None:
        """Close the present file, everything on the disk."""
        self.has_end = False
        self._earlier_bytes += self._present.bytes
        self._present.close()
        self._writer = None

    def rotated(self) -> None:
        """Tell of the file before the present one: it is complete."""
        self._rotation.ended(self.paths[-2])

    def _next_path(self) -> Path:
        number = len(self.paths) + 1
        if self.paths and self._rotation.next_path is not None:
            return Path(self._rotation.next_path(number))
        while number > 1:
            path = self._path.with_stem(f"{self._path.stem}-{number}")
            if not path.exists():
                return path
            number += 1
        return self._path
