"""Write a recording: append only, in whole records, on the disk twice a second."""

import errno
import os
import secrets
import stat
import time
from contextlib import suppress
from pathlib import Path

from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.host_note import HostNote, cut, seal_host_note
from firmware_bridge.recording_header import Header, encode_header

__all__ = ["SYNC_S", "DiskError", "Writer"]

SYNC_S = 0.5
"""Longest time [s] that records wait before they are on the disk."""

_BUFFER_BYTES = 1 << 18
_MEANINGS = {
    errno.ENOSPC: "the disk is full",
    errno.EDQUOT: "the disk quota is used up",
    errno.EFBIG: "a file may not be larger here",
    errno.EIO: "input/output error of the disk",
}


class DiskError(DeviceFailedError):
    """A file that could be made and cannot be written any further; ``reason`` says why."""

    def __init__(self, path: Path, reason: str) -> None:
        super().__init__(f"{path} cannot be written any further: {reason}")
        self.reason = reason


class Writer:
    """Append sealed messages to a new recording.

    Parameters
    ----------
    path : path-like
        The file; it must not exist unless ``overwrite``.
    header : Header
        What the recording begins with.
    overwrite : bool
        Replace an existing file.

    Raises
    ------
    BridgeError
        If the file exists or cannot be made.
    """

    def __init__(
        self, path: str | os.PathLike[str], header: Header, *, overwrite: bool = False
    ) -> None:
        self.path = Path(path)
        self.records = 0
        """Records written so far."""
        self.record_bytes = header.record_bytes
        """Length of a record."""
        self._buffer = bytearray()
        self._number = 0
        self._synced_s = time.monotonic()
        begin = encode_header(header)
        self.bytes = len(begin)
        """Length of the file with what still waits to be written."""
        self._header_bytes = len(begin)
        self._written = 0
        self._is_failed = False
        self._begin(begin, overwrite=overwrite)

    def _begin(self, begin: bytes, *, overwrite: bool) -> None:
        """Make the file with its header: whoever sees it under its name sees a recording."""
        flags = os.O_WRONLY | os.O_CREAT | (os.O_TRUNC if overwrite else os.O_EXCL)
        made = self.path
        try:
            is_new = not overwrite and not self.path.exists()
            if is_new:
                made = self.path.with_name(f".midfringe-{secrets.token_hex(6)}.part")
            self._file = os.open(made, flags | getattr(os, "O_BINARY", 0), 0o644)
        except FileExistsError:
            raise BridgeError(f"{self.path} exists; --overwrite replaces it") from None
        except OSError as error:
            raise self._not_written((error.strerror or str(error)).lower()) from None
        try:
            self._write(begin)
            self.sync()
            if is_new:
                _put_in_place(made, self.path)
        except (DiskError, OSError) as error:
            os.close(self._file)
            if stat.S_ISREG(made.stat().st_mode):
                made.unlink()  # without its header it is no recording
            if isinstance(error, FileExistsError):
                raise BridgeError(f"{self.path} exists; --overwrite replaces it") from None
            reason = error.reason if isinstance(error, DiskError) else str(error.strerror).lower()
            raise self._not_written(reason) from None

    def _not_written(self, reason: str) -> BridgeError:
        return BridgeError(f"{self.path} cannot be written: {reason}")

    def append(self, message: bytes) -> None:
        """Append one sealed message, in one record or, where it is longer, in several.

        Parameters
        ----------
        message : bytes
            Content and CRC.

        Raises
        ------
        DiskError
            If the disk is full or gone.
        """
        if len(message) > self.record_bytes:
            for piece in cut(message, self._number, self.record_bytes):
                self.append(piece)
            self._number += 1
            return
        self._buffer += message.ljust(self.record_bytes, b"\0")
        self.records += 1
        self.bytes += self.record_bytes
        if len(self._buffer) >= _BUFFER_BYTES:
            self.flush()

    def note(self, note: HostNote) -> None:
        """Append a note of the host.

        Parameters
        ----------
        note : Stamp, Join, Remark or End
            What to write.
        """
        self.append(seal_host_note(note))

    def flush(self) -> None:
        """Hand the records to the operating system: they survive the end of this program."""
        data, self._buffer = self._buffer, bytearray()
        self._write(data)

    def sync(self, *, if_due: bool = False) -> None:
        """Have the records on the disk: they survive a power cut.

        Parameters
        ----------
        if_due : bool
            Only if `SYNC_S` have passed since the last time.
        """
        now_s = time.monotonic()
        if if_due and now_s - self._synced_s < SYNC_S:
            return
        self.flush()
        try:
            os.fsync(self._file)
        except OSError as error:
            # A pipe or a file system without fsync keeps what it can; a full one lets it fail.
            if error.errno in _MEANINGS:
                raise self._failed(error) from error
        self._synced_s = now_s

    def close(self) -> None:
        """Flush, sync and close."""
        try:
            self.sync()
        finally:
            os.close(self._file)

    def _write(self, data: bytes | bytearray) -> None:
        view = memoryview(data)
        try:
            while view and not self._is_failed:
                count = os.write(self._file, view)
                view = view[count:]
                self._written += count
        except OSError as error:
            raise self._failed(error) from error

    def _failed(self, error: OSError) -> DiskError:
        """Write nothing any more, and leave whole records only."""
        self._is_failed = True
        beyond = max(0, self._written - self._header_bytes) % self.record_bytes
        with suppress(OSError):
            os.ftruncate(self._file, self._written - beyond)
        reason = _MEANINGS.get(error.errno or 0, (error.strerror or str(error)).lower())
        return DiskError(self.path, reason)


def _put_in_place(made: Path, path: Path) -> None:
    """Give a new file its name, never that of another one."""
    try:
        os.link(made, path)  # refuses a file that appeared meanwhile; a rename would not
    except FileExistsError:
        raise
    except OSError:  # a file system without hard links
        if path.exists():
            raise FileExistsError(errno.EEXIST, os.strerror(errno.EEXIST), str(path)) from None
        made.rename(path)
    else:
        made.unlink()
