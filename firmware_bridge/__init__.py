"""Serial bytes to recordings: frames, recordings, ports and a simulated board.

Names load on first use (PEP 562).
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from firmware_bridge.announcement import Announcement as Announcement
    from firmware_bridge.announcement import ChannelInfo as ChannelInfo
    from firmware_bridge.announcement import encode_announcement as encode_announcement
    from firmware_bridge.decoder import Decoder as Decoder
    from firmware_bridge.envelope import Discarded as Discarded
    from firmware_bridge.errors import BridgeError as BridgeError
    from firmware_bridge.errors import DeviceFailedError as DeviceFailedError
    from firmware_bridge.frame import encode_frame as encode_frame
    from firmware_bridge.frame import encode_stream as encode_stream
    from firmware_bridge.gap import Gap as Gap
    from firmware_bridge.live_session import LiveSession as LiveSession
    from firmware_bridge.message import Note as Note
    from firmware_bridge.opening import open_recording as open_recording
    from firmware_bridge.recorder import RecordSummary as RecordSummary
    from firmware_bridge.recorder import record as record
    from firmware_bridge.samples_frame import Samples as Samples
    from firmware_bridge.trace import Recording as Recording
    from firmware_bridge.trace import Trace as Trace

_HOMES = {
    "Announcement": "firmware_bridge.announcement",
    "BridgeError": "firmware_bridge.errors",
    "ChannelInfo": "firmware_bridge.announcement",
    "Decoder": "firmware_bridge.decoder",
    "DeviceFailedError": "firmware_bridge.errors",
    "Discarded": "firmware_bridge.envelope",
    "Gap": "firmware_bridge.gap",
    "LiveSession": "firmware_bridge.live_session",
    "Note": "firmware_bridge.message",
    "RecordSummary": "firmware_bridge.recorder",
    "Recording": "firmware_bridge.trace",
    "Samples": "firmware_bridge.samples_frame",
    "Trace": "firmware_bridge.trace",
    "encode_announcement": "firmware_bridge.announcement",
    "encode_frame": "firmware_bridge.frame",
    "encode_stream": "firmware_bridge.frame",
    "record": "firmware_bridge.recorder",
    "open_recording": "firmware_bridge.opening",
}

__all__ = [
    "Announcement",
    "BridgeError",
    "ChannelInfo",
    "Decoder",
    "DeviceFailedError",
    "Discarded",
    "Gap",
    "LiveSession",
    "Note",
    "RecordSummary",
    "Recording",
    "Samples",
    "Trace",
    "encode_announcement",
    "encode_frame",
    "encode_stream",
    "open_recording",
    "record",
]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'firmware_bridge' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
