"""The errors of the bridge: what arrived, what was expected, where."""

from metro.errors import MidfringeError

__all__ = ["BridgeError", "DeviceFailedError"]


class BridgeError(MidfringeError):
    """Base of the errors of ``firmware_bridge``: a port, file or message that breaks a rule."""


class DeviceFailedError(BridgeError):
    """A device or file failed midway; the message says what was safely kept."""

    exit_code = 3
