"""A channel of a recording, and how it is found by its header or its column."""

from collections.abc import Sequence
from dataclasses import dataclass

from firmware_bridge.errors import BridgeError

__all__ = ["Channel", "ChannelError", "find_channel", "listed"]


class ChannelError(BridgeError):
    """A channel name that the recording does not have, or has more than once."""


@dataclass(frozen=True, slots=True)
class Channel:
    """One channel of a recording: value in ``unit`` = counts · ``scale`` + ``offset``.

    Parameters
    ----------
    name : str
        Header or announced name.
    unit : str
        Unit of the values, "1" where none is known.
    scale, offset : float
        From counts to ``unit``; 1 and 0 where the file holds the values themselves.
    """

    name: str
    unit: str = "1"
    scale: float = 1.0
    offset: float = 0.0


def find_channel(name: str, channels: Sequence[Channel], columns: Sequence[int], path: str) -> int:
    """Return the position of a channel named by header or column number.

    Parameters
    ----------
    name : str
        Only digits: the file's column number from 1, the time column counted; ``"name:3"``:
        the header "3"; anything else: the header.
    channels : sequence of Channel
        Where it is looked for.
    columns : sequence of int
        The column number of each.
    path : str
        The recording, for the errors.

    Returns
    -------
    int
        Position in ``channels``.

    Raises
    ------
    ChannelError
        If there is no such channel, or two of that name.
    """
    if name.isascii() and name.isdigit():
        return _find_column(int(name), channels, columns, path)
    wanted = name.removeprefix("name:")
    found = [k for k, channel in enumerate(channels) if channel.name == wanted]
    if len(found) != 1:
        what = "more than one channel" if found else "no channel"
        has = listed(channels, columns)
        raise ChannelError(f"{path} has {what} named {wanted!r}; it has {has}")
    return found[0]


def _find_column(
    number: int, channels: Sequence[Channel], columns: Sequence[int], path: str
) -> int:
    if number not in columns:
        raise ChannelError(
            f"{path}: column {number} is no channel (columns count from 1, the time "
            f"column included); it has {listed(channels, columns)}"
        )
    return columns.index(number)


def listed(channels: Sequence[Channel], columns: Sequence[int]) -> str:
    """Return the channels with their column numbers, for messages.

    Parameters
    ----------
    channels : sequence of Channel
        All of them.
    columns : sequence of int
        The column number of each.

    Returns
    -------
    str
        One line.
    """
    named = zip(columns, channels, strict=True)
    return ", ".join(f"{column} {channel.name!r}" for column, channel in named)
