"""The ids by which streams go: as they are sent, or another where a board began again under its id."""

from collections.abc import Set as AbstractSet

__all__ = ["StreamNames"]

_OTHER_ID = 0x9E3779B9  # odd: steps through every id


class StreamNames:
    """Keep which stream goes by which id."""

    def __init__(self) -> None:
        self._names: dict[int, int] = {}  # stream as sent: by which id it goes

    def of(self, stream: int) -> int:
        """Return the id by which a stream goes.

        Parameters
        ----------
        stream : int
            As it is sent.

        Returns
        -------
        int
            The same, unless it began again.
        """
        return self._names.get(stream, stream)

    def sent_as(self, stream: int) -> int:
        """Return the id under which the board sends a stream.

        Parameters
        ----------
        stream : int
            The id by which it goes.

        Returns
        -------
        int
            As it is sent.
        """
        return next((sent for sent, name in self._names.items() if name == stream), stream)

    def renew(self, stream: int, taken: AbstractSet[int]) -> int:
        """Have a stream that begins again go by a new id; return it.

        Parameters
        ----------
        stream : int
            The id by which it went.
        taken : set of int
            Ids of other streams.

        Returns
        -------
        int
            One that no stream has.
        """
        name = stream
        while name in taken or name in self._names:
            name = (name + _OTHER_ID) % 2**32
        self._names[self.sent_as(stream)] = name
        return name
