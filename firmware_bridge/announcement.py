"""What a board says about itself: identity, rate, format, and each channel's name, unit and scale."""

import math
import struct
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from firmware_bridge.envelope import wrap
from firmware_bridge.message_head import MessageError, MessageType, body_of, pack

__all__ = [
    "FORMATS",
    "Announcement",
    "ChannelInfo",
    "encode_announcement",
    "pack_announcement",
    "parse_announcement",
]

FORMATS = {"int16": 2, "int24": 3, "int32": 4}
"""Sample formats and their bytes per sample, which is also their code on the wire."""

_FIXED = struct.Struct("<IQQIdHBBHH")
_CHANNEL = struct.Struct("<ddii")
_SIMULATED = 1


@dataclass(frozen=True, slots=True)
class ChannelInfo:
    """One channel as announced: value in ``unit`` = counts · ``scale`` + ``offset``.

    Parameters
    ----------
    name, unit : str
        At most 255 bytes of UTF-8 each; unit "1" where there is none.
    scale, offset : float
        From counts to ``unit``.
    low, high : int, optional
        The codes at the ends of the converter's range; a sample there in a frame flagged over-range
        is over-range. None stands for the ends of the sample format.
    """

    name: str
    unit: str = "1"
    scale: float = 1.0
    offset: float = 0.0
    low: int | None = None
    high: int | None = None


@dataclass(frozen=True, slots=True)
class Announcement:
    """A board's announcement, true for everything in its stream.

    Parameters
    ----------
    stream : int
        Stream id, new at every start of the board.
    rate_hz : float
        Samples per second and channel.
    format : str
        "int16", "int24" or "int32".
    slots : int
        Samples per channel that a frame has room for.
    channels : sequence of ChannelInfo
        1 to 255.
    board, firmware : str
        Identity and firmware version.
    simulated : bool
        True for a simulated board.
    clock_hz : int
        Ticks per second of the board clock in the frames, 0 without one.
    speed : float
        How much faster than real time a simulated board's clock runs.
    """

    stream: int
    rate_hz: float
    format: str
    slots: int
    channels: Sequence[ChannelInfo]
    board: str = ""
    firmware: str = ""
    simulated: bool = False
    clock_hz: int = 0
    speed: float = 1.0

    def __post_init__(self) -> None:
        object.__setattr__(self, "channels", tuple(self.channels))
        if self.format not in FORMATS:
            raise MessageError(f"format must be one of {', '.join(FORMATS)}, got {self.format!r}")
        if not 0 < self.rate_hz < 2**53:
            raise MessageError(f"rate_hz must be > 0 Hz and < 2^53 Hz, got {self.rate_hz!r}")
        if not 1 <= len(self.channels) <= 255:
            raise MessageError(f"a board must have 1 to 255 channels, got {len(self.channels)}")
        if not 1 <= self.slots <= 0xFFFF:
            raise MessageError(f"slots must be 1 to 65535, got {self.slots}")
        if not 0 < self.speed < math.inf:
            raise MessageError(f"speed must be > 0 and finite, got {self.speed!r}")
        for channel in self.channels:
            if not math.isfinite(abs(channel.scale) * 2.0**31 + abs(channel.offset)):
                raise MessageError(
                    f"scale and offset of {channel.name!r} must be finite for every code, "
                    f"got {channel.scale!r} and {channel.offset!r}"
                )

    @property
    def code_limits(self) -> tuple[int, int]:
        """The most negative and the most positive code of the sample format."""
        half = 1 << (8 * FORMATS[self.format] - 1)
        return -half, half - 1


def pack_announcement(announcement: Announcement) -> bytes:
    """Return the announcement message without its envelope.

    Parameters
    ----------
    announcement : Announcement
        What to say.

    Returns
    -------
    bytes
        Content, without CRC.
    """
    numerator, denominator = _rate_ratio(announcement.rate_hz)
    fixed = _FIXED.pack(
        announcement.stream,
        numerator,
        denominator,
        announcement.clock_hz,
        announcement.speed,
        _SIMULATED if announcement.simulated else 0,
        FORMATS[announcement.format],
        len(announcement.channels),
        announcement.slots,
        0,
    )
    texts = _text(announcement.board) + _text(announcement.firmware)
    low, high = announcement.code_limits
    channels = b"".join(
        _CHANNEL.pack(
            channel.scale,
            channel.offset,
            low if channel.low is None else channel.low,
            high if channel.high is None else channel.high,
        )
        + _text(channel.name)
        + _text(channel.unit)
        for channel in announcement.channels
    )
    return pack(MessageType.ANNOUNCEMENT, fixed + texts + channels)


def encode_announcement(announcement: Announcement) -> bytes:
    """Return the announcement as it goes over the wire.

    Parameters
    ----------
    announcement : Announcement
        What the board says of itself.

    Returns
    -------
    bytes
        The message, delimiters included.

    Raises
    ------
    MessageError
        If a text or the whole does not fit.
    """
    return wrap(pack_announcement(announcement))


def parse_announcement(message: bytes) -> Announcement:
    """Return what a sealed announcement message says.

    Parameters
    ----------
    message : bytes
        Content and CRC.

    Returns
    -------
    Announcement
        What it says.

    Raises
    ------
    MessageError
        If the body breaks a rule of the wire.
    """
    body = body_of(message)
    try:
        (stream, numerator, denominator, clock_hz, speed, flags, code, count, slots, _) = (
            _FIXED.unpack_from(body)
        )
        texts = _Texts(body, _FIXED.size)
        name = _format_of(code)
        board, firmware = texts.take(), texts.take()
        channels = [texts.channel(code) for _ in range(count)]
        return Announcement(
            stream=stream,
            rate_hz=numerator / denominator,
            format=name,
            slots=slots,
            channels=channels,
            board=board,
            firmware=firmware,
            simulated=bool(flags & _SIMULATED),
            clock_hz=clock_hz,
            speed=speed,
        )
    except (struct.error, IndexError):
        raise MessageError("announcement: the body ends too early") from None
    except ZeroDivisionError:
        raise MessageError("announcement: the rate has denominator 0") from None


def _rate_ratio(rate_hz: float) -> tuple[int, int]:
    near = Fraction(rate_hz).limit_denominator(1_000_000)
    exact = near if float(near) == rate_hz else Fraction(rate_hz)
    if exact.denominator >= 2**64:
        exact = exact.limit_denominator(2**64 - 1)
    return exact.numerator, exact.denominator


def _format_of(code: int) -> str:
    for name, width in FORMATS.items():
        if width == code:
            return name
    raise MessageError(f"format code must be 2, 3 or 4, got {code}")


def _text(text: str) -> bytes:
    data = text.encode()
    if len(data) > 255:
        raise MessageError(f"a name must have ≤ 255 bytes, got {len(data)}: {text[:20]!r}…")
    return bytes([len(data)]) + data


class _Texts:
    """Walk along the variable part of an announcement."""

    def __init__(self, body: bytes, place: int) -> None:
        self._body, self._place = body, place

    def take(self) -> str:
        end = self._place + 1 + self._body[self._place]
        if end > len(self._body):
            raise MessageError("announcement: a text reaches beyond the message")
        text = self._body[self._place + 1 : end].decode(errors="replace")
        self._place = end
        return text

    def channel(self, code: int) -> ChannelInfo:
        scale, offset, low, high = _CHANNEL.unpack_from(self._body, self._place)
        self._place += _CHANNEL.size
        half = 1 << (8 * code - 1)
        return ChannelInfo(
            name=self.take(),
            unit=self.take(),
            scale=scale,
            offset=offset,
            low=None if low == -half else low,
            high=None if high == half - 1 else high,
        )
