"""What a live page was asked to show, and what it needs to know about the bench."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

from calibration.desk.watch.fringe import Fringe
from calibration.desk.watch.stated_fringe import expected_fringe, known_dark
from calibration.expected_noise import ExpectedNoise, bench_as_measured, expected_noise
from firmware_bridge.channel import Channel
from metro.drive import terminal_factor
from metro.errors import MetroError

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from calibration.record import Calibration
    from firmware_bridge.announcement import ChannelInfo
    from metro.bench import Bench

__all__ = ["WatchSetup"]


@dataclass(frozen=True, eq=False)
class WatchSetup:
    """What to show.

    Parameters
    ----------
    title : str
        Where the samples come from, for people.
    bench : Bench
        Whatever is known; it may be empty.
    calibration : Calibration or None
        Its extremes and dark go before the bench's.
    frequencies_hz : tuple of float
        The lines to follow; those of the bench where empty.
    slope : str
        ``"rising"`` or ``"falling"``: the side of the fringe the interferometer rests on.
    channel, drive : str, int or None
        The photodiode's and the drive's channel: a name, or only digits for its number counted from
        1; a position counted from 0; None to find it.
    block_s : float
        Seconds of samples in each line fit.
    """

    title: str
    bench: "Bench"
    calibration: "Calibration | None" = None
    frequencies_hz: tuple[float, ...] = ()
    slope: str = "rising"
    channel: str | int | None = None
    drive: str | int | None = None
    block_s: float = 4.0

    @property
    def lines_hz(self) -> tuple[float, ...]:
        """The lines to follow [Hz]."""
        return self.frequencies_hz or tuple(line.frequency_hz for line in self.bench.lines)

    @property
    def mains_hz(self) -> float:
        """Frequency of the mains [Hz]."""
        return self.bench.magnitude("mains.frequency", 50.0)

    @property
    def dark_v(self) -> float | None:
        """Voltage without light, where known."""
        return known_dark(self.bench, self.calibration)

    @property
    def fringe(self) -> Fringe | None:
        """The fringe as calibrated or stated, None where it must be found."""
        return expected_fringe(self.bench, self.calibration)

    def noise(
        self, rate_hz: float, channel: "ChannelInfo", frequency_hz: "NDArray[np.float64]"
    ) -> ExpectedNoise | None:
        """Return the noise to be expected, None where nothing says.

        Parameters
        ----------
        rate_hz : float
            Samples per second.
        channel : ChannelInfo
            The photodiode's.
        frequency_hz : ndarray, shape (n,)
            Where [Hz]; above 0.

        Returns
        -------
        ExpectedNoise or None
            Volts; None for a channel in another unit, or where no source is known.
        """
        if channel.unit != "V" or self.bench == type(self.bench)():
            return None
        seen = Channel(channel.name, channel.unit, channel.scale, channel.offset)
        bench = bench_as_measured(self.bench, rate_hz, seen, self.calibration)
        try:
            return expected_noise(bench, "voltage", frequency_hz)
        except MetroError:
            return None

    @property
    def stated_contrast(self) -> tuple[float, str] | None:
        """Contrast as calibrated or stated, and where it comes from."""
        if self.calibration is not None and self.calibration.contrast is not None:
            return float(self.calibration.contrast.magnitude), "calibration"
        entry = self.bench.get("arms.contrast")
        return None if entry is None else (float(entry.magnitude), "bench")

    @property
    def drive_limit_v(self) -> float | None:
        """What all lines together may reach at the actuator [V], None where the bench says nothing."""
        entry = self.bench.get("actuator.drive_limit")
        return None if entry is None else float(entry.magnitude)

    @property
    def drive_factor(self) -> float:
        """Volts at the actuator per volt of the board's drive channel."""
        return terminal_factor(self.bench, recorded=True)

    def columns(self, names: list[str]) -> tuple[int, int | None]:
        """Return which channels are photodiode and drive.

        Parameters
        ----------
        names : list of str
            Of the board's channels; at least one.

        Returns
        -------
        tuple of int and int or None
            Positions; no drive where no channel is named so.
        """
        drive = self._find(names, self.drive, self.bench.text("drive.channel") or "drive")
        photodiode = self._find(names, self.channel, "photodiode")
        if photodiode is None:
            photodiode = next((k for k in range(len(names)) if k != drive), 0)
        return photodiode, None if drive == photodiode else drive

    def remarks(self, names: list[str]) -> tuple[str, ...]:
        """Return which channels were asked for and are not there.

        Parameters
        ----------
        names : list of str
            Of the board's channels.

        Returns
        -------
        tuple of str
            One line each.
        """
        asked = {"photodiode": self.channel, "drive": self.drive}
        return tuple(
            f"no channel {wanted!r} for the {what}: there are {', '.join(names)}"
            for what, wanted in asked.items()
            if wanted is not None and self._find(names, wanted, "") is None
        )

    @staticmethod
    def _find(names: list[str], wanted: str | int | None, usual: str) -> int | None:
        if isinstance(wanted, int):
            return wanted if 0 <= wanted < len(names) else None
        if wanted is not None and wanted.isascii() and wanted.isdigit():
            return int(wanted) - 1 if 1 <= int(wanted) <= len(names) else None
        name = (usual if wanted is None else wanted).removeprefix("name:").strip().lower()
        lowered = [each.strip().lower() for each in names]
        return lowered.index(name) if name in lowered else None
