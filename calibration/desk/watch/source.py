"""What a live page needs of the place its samples come from."""

from pathlib import Path
from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    from firmware_bridge.live_events import LiveEvent

__all__ = ["Source"]


class Source(Protocol):
    """Where the samples come from: a port held by another process, or a recording replayed."""

    def poll(self) -> "list[LiveEvent]":
        """Return what has happened since the last time, without waiting."""

    def start_recording(self, name: str) -> Path:
        """Record into a plain file name from now on."""

    def stop_recording(self) -> None:
        """End the recording that runs."""

    def set_line(
        self, slot: int, frequency_hz: float, amplitude_v: float, phase_rad: float = 0.0
    ) -> int:
        """Set a line of the drive; return the number of the order, see `LiveLines`."""

    def clear_line(self, slot: int) -> int:
        """Take a line out of the drive; return the number of the order."""

    def rest(self) -> int:
        """Bring the drive to rest; return the number of the order."""

    def close(self) -> None:
        """Bring the drive to rest, end the recording, give the port back."""
