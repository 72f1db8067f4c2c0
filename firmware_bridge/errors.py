"""The errors of the bridge: what arrived, what was expected, where."""

from typing import TYPE_CHECKING

from metro.errors import MidfringeError

if TYPE_CHECKING:
    from firmware_bridge.recorder import RecordSummary

__all__ = ["BridgeError", "DeviceFailedError"]


class BridgeError(MidfringeError):
    """Base of the errors of ``firmware_bridge``: a port, file or message that breaks a rule."""


class DeviceFailedError(BridgeError):
    """A device or file failed midway; the message says what was safely kept.

    Attributes
    ----------
    kept : RecordSummary or None
        The same for programs, where a recording was made.
    """

    exit_code = 3
    kept: "RecordSummary | None" = None
