"""Serial ports: the one place that opens them, lists them, and says in one line what is wrong."""

import contextlib
import errno
import sys
import warnings
from dataclasses import dataclass
from typing import Any, Protocol

from firmware_bridge.errors import BridgeError

__all__ = [
    "ByteSource",
    "Port",
    "PortError",
    "PortInfo",
    "PortLostError",
    "list_ports",
    "open_port",
]

_WAIT_S = 0.05  # how long a read waits for the first byte


class PortError(BridgeError):
    """A port that cannot be opened."""


class PortLostError(BridgeError):
    """A port that was open and is gone; the message is the system's reason."""

    exit_code = 3


class ByteSource(Protocol):
    """What a recorder needs of a port."""

    name: str

    def read(self) -> bytes:
        """Return what has arrived, waiting a moment for the first byte.

        Returns
        -------
        bytes
            Empty where nothing came.
        """

    def write(self, data: bytes) -> bool:
        """Send bytes; False where the port cannot be written.

        Parameters
        ----------
        data : bytes
            To send.

        Returns
        -------
        bool
            True if they are on their way.
        """

    def close(self) -> None:
        """Close it."""


@dataclass(frozen=True, slots=True)
class PortInfo:
    """A serial port of this computer."""

    name: str
    description: str


def list_ports() -> list[PortInfo]:
    """Return the serial ports of this computer, sorted by name.

    Returns
    -------
    list of PortInfo
        Empty where there are none.
    """
    from serial.tools.list_ports import comports

    return sorted(
        (PortInfo(found.device, found.description) for found in comports()),
        key=lambda info: info.name,
    )


class Port:
    """An open port.

    Parameters
    ----------
    name : str
        What the user calls it.
    serial : object
        An open pyserial port.
    """

    def __init__(self, name: str, serial: Any) -> None:  # noqa: ANN401  # any pyserial class
        self.name = name
        self._serial = serial
        self._is_socket = name.startswith("socket:")

    def read(self) -> bytes:
        """Return what has arrived, waiting a moment for the first byte.

        Returns
        -------
        bytes
            Empty where nothing came.

        Raises
        ------
        PortLostError
            If the port is gone.
        """
        try:
            # Never more than is there: a read that waits for more loses what it holds if the port
            # goes away meanwhile.
            return bytes(self._serial.read(max(1, self._waiting())))
        except _failures() as error:
            raise PortLostError(_reason(error)) from error

    def _waiting(self) -> int:
        if self._is_socket:
            return _socket_waiting(self._serial.fileno())
        return int(self._serial.in_waiting)

    def write(self, data: bytes) -> bool:
        """Send bytes; return False where the port cannot be written.

        Parameters
        ----------
        data : bytes
            To send.

        Returns
        -------
        bool
            True if they are on their way.
        """
        try:
            self._serial.write(data)
        except _failures():
            return False
        return True

    def close(self) -> None:
        """Close the port, even one that is gone."""
        inner = getattr(self._serial, "_socket", None)
        with contextlib.suppress(*_failures()):  # closing what is gone may fail too
            self._serial.close()
        if inner is not None:
            inner.close()  # pyserial leaves it open where the other side has hung up


def open_port(name: str, baud: int = 115200) -> Port:
    """Open a serial port or a pyserial URL.

    Parameters
    ----------
    name : str
        Such as ``/dev/ttyACM0``, ``COM3``, ``socket://host:port``, ``rfc2217://host:port``.
    baud : int
        Symbols per second, > 0.

    Returns
    -------
    Port
        Locked against other programs where the system can.

    Raises
    ------
    PortError
        If there is no such port, it is busy, forbidden, or refuses the speed.
    """
    import serial

    if baud <= 0:
        raise PortError(f"baud must be > 0, got {baud}")
    failures: tuple[type[BaseException], ...] = (*_failures(), ValueError)
    # pyserial 3.5 has no write timeout for rfc2217.
    write_timeout_s = None if name.startswith("rfc2217:") else 1.0
    try:
        with warnings.catch_warnings():
            # pyserial 3.5 starts the thread of an rfc2217 port by a deprecated name.
            warnings.simplefilter("ignore", DeprecationWarning)
            opened = serial.serial_for_url(
                name,
                baudrate=baud,
                timeout=_WAIT_S,
                write_timeout=write_timeout_s,
                exclusive=True,
            )
    except failures as error:
        raise PortError(f"{name} cannot be opened: {_reason(error)}") from None
    return Port(name, opened)


def _socket_waiting(handle: int) -> int:
    # pyserial's in_waiting of a socket only says whether there is anything.
    try:
        import fcntl
        import termios
    except ImportError:  # not a POSIX system: byte by byte
        return 1
    return int.from_bytes(fcntl.ioctl(handle, termios.FIONREAD, bytes(4)), sys.byteorder)


def _failures() -> tuple[type[BaseException], ...]:
    # termios.error, which some calls raise on a port that is gone, is no OSError.
    try:
        import termios
    except ImportError:  # not a POSIX system
        return (OSError,)
    return (OSError, termios.error)


_MEANINGS = {
    errno.ENOENT: "there is no such port (midfringe record --list shows the ports)",
    errno.ENODEV: "there is no device behind it",
    errno.ENXIO: "there is no device behind it",
    errno.EACCES: "permission denied (on Linux the port's group, often dialout, must have you)",
    errno.EPERM: "permission denied",
    errno.EBUSY: "it is busy: another program has it open",
    errno.EAGAIN: "it is busy: another program has it open",
    errno.ENOTTY: "it is no serial port",
    errno.EISDIR: "it is no serial port",
    errno.ECONNREFUSED: "connection refused",
    errno.EIO: "input/output error",
}


def _reason(error: BaseException) -> str:
    number = getattr(error, "errno", None) or (error.args[0] if error.args else None)
    if isinstance(number, int) and number in _MEANINGS:
        return _MEANINGS[number]
    text = " ".join(str(error).split())
    for key, words in (
        ("exclusively lock", _MEANINGS[errno.EBUSY]),
        ("Inappropriate ioctl", _MEANINGS[errno.ENOTTY]),
        ("no data", "the device is gone"),
        ("socket disconnected", "the other side closed the connection"),
        ("refused", "connection refused"),
        ("reader thread died", "the other side closed the connection"),
        ("does not seem to support RFC2217", "the other side does not speak RFC 2217"),
        ("timed out", "no answer"),
        ("Name or service not known", "there is no such host"),
        ("Temporary failure in name resolution", "there is no such host"),
        ("reset by peer", "the other side closed the connection"),
        ("not connected", "the other side closed the connection"),
    ):
        if key in text:
            return words
    return text
