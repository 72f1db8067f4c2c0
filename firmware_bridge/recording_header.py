"""The header of a recording: format version, length of the records, announcement, origin."""

import json
import struct
from dataclasses import dataclass, field
from zlib import crc32

from firmware_bridge.announcement import (
    FORMATS,
    Announcement,
    pack_announcement,
    parse_announcement,
)
from firmware_bridge.envelope import SEALED, seal
from firmware_bridge.errors import BridgeError
from firmware_bridge.frame import HEADER
from firmware_bridge.message_head import MessageError

__all__ = ["MAGIC", "MAJOR", "MINOR", "Header", "RecordingError", "encode_header", "parse_header"]

MAGIC = b"\x8bmfr\r\n\x1a\n"
"""First bytes of a recording; they show a transfer that changed line ends or lost the top bit."""

MAJOR, MINOR = 1, 0
"""Format version: an older major stays readable, a newer one is refused."""

_FIXED = struct.Struct("<8sHHIIIQII")
_LENGTH_MAX = 1 << 20


class RecordingError(BridgeError):
    """A file that is no recording, or one whose header is damaged or too new."""


@dataclass(frozen=True, slots=True)
class Header:
    """What stands before the records.

    Parameters
    ----------
    announcement : Announcement
        True for every samples record of the file.
    created_ns : int
        UTC when the recording was begun, nanoseconds since 1970; 0 where unknown.
    info : dict of str to str
        Where it came from: software, port.
    """

    announcement: Announcement
    created_ns: int = 0
    info: dict[str, str] = field(default_factory=dict)

    @property
    def frame_bytes(self) -> int:
        """Length of a samples frame [bytes], CRC included."""
        announced = self.announcement
        width = FORMATS[announced.format]
        return HEADER.itemsize + announced.slots * len(announced.channels) * width + 4

    @property
    def record_bytes(self) -> int:
        """Length of a record [bytes]: a samples frame, to the next multiple of 8, at least 64."""
        return max(64, -(-self.frame_bytes // 8) * 8)


def encode_header(header: Header) -> bytes:
    """Return the bytes that a recording begins with.

    Parameters
    ----------
    header : Header
        What to say.

    Returns
    -------
    bytes
        A multiple of 64 long, CRC included.

    Raises
    ------
    MessageError
        If the announcement does not fit its fields.
    """
    announcement = seal(pack_announcement(header.announcement))
    info = json.dumps(header.info, ensure_ascii=False).encode()
    content = _FIXED.size + len(announcement) + len(info)
    length = -(-(content + 4) // 64) * 64
    fixed = _FIXED.pack(
        MAGIC,
        MAJOR,
        MINOR,
        length,
        header.record_bytes,
        0,
        header.created_ns,
        len(announcement),
        len(info),
    )
    return seal((fixed + announcement + info).ljust(length - 4, b"\0"))


def parse_header(data: bytes, path: str) -> tuple[Header, int]:
    """Return the header at the beginning of ``data`` and its length in bytes.

    Parameters
    ----------
    data : bytes
        The first bytes of the file, up to a megabyte.
    path : str
        For the messages.

    Returns
    -------
    tuple of Header and int
        The header and where the records begin.

    Raises
    ------
    RecordingError
        If this is no recording, is newer than this program, or is damaged.
    """
    if not data or not data.startswith(MAGIC[: len(data)]):
        raise RecordingError(f"{path} is no recording: it does not begin as an .mfr file does")
    if len(data) < _FIXED.size:
        raise RecordingError(f"{path} ends within its header: {len(data)} bytes")
    _, major, minor, length, record, _, created_ns, announced, described = _FIXED.unpack_from(data)
    if major > MAJOR:
        raise RecordingError(
            f"{path} has recording format {major}.{minor}; this program reads up to {MAJOR}"
        )
    content = _FIXED.size + announced + described
    if len(data) < length == -(-(content + 4) // 64) * 64 <= _LENGTH_MAX:
        raise RecordingError(f"{path} ends within its header: {len(data)} of {length} bytes")
    if not content + 4 <= length <= min(len(data), _LENGTH_MAX) or crc32(data[:length]) != SEALED:
        raise RecordingError(f"{path}: the header of the recording is damaged")
    try:
        announcement = parse_announcement(data[_FIXED.size : _FIXED.size + announced])
        info = json.loads(data[content - described : content].decode() or "{}")
    except (MessageError, ValueError) as error:
        raise RecordingError(f"{path}: the header of the recording is damaged: {error}") from None
    header = Header(announcement, created_ns, info if isinstance(info, dict) else {})
    if header.record_bytes != record:
        raise RecordingError(
            f"{path}: records must have {header.record_bytes} bytes, the header says {record}"
        )
    return header, length
