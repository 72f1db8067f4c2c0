"""Where a fringe comes from: a recording with what a user and the bench say about it."""

from dataclasses import dataclass, replace

from calibration.found_extremes import (
    Level,
    dark_of_trace,
    is_file,
    level_of_text,
    unit_of_text,
    usable_scan,
)
from calibration.power_ratio import without_power_drift
from calibration.ruler import Ruler, ruler_of
from calibration.scan import ScanFit
from firmware_bridge.reading import Reading
from firmware_bridge.trace import Recording, Trace
from metro.bench import Bench

__all__ = ["FringeSource"]


@dataclass(frozen=True)
class FringeSource:
    """What is known beside the record, whatever way leads from it to metres.

    Attributes
    ----------
    reading : Reading
        Columns and stretch.
    bench : Bench
        Wavelength, air, polarity, extremes.
    levels : tuple of (str or None, str or None)
        Low and high as given, in volts or counts.
    extremes_file : str or None
        A recording that shows the extremes.
    dark : str or None
        The level without light: a recording or a value.
    monitor, antiphase : str or None
        Columns that tell the laser's power.
    """

    reading: Reading
    bench: Bench
    levels: tuple[str | None, str | None]
    extremes_file: str | None
    dark: str | None
    monitor: str | None
    antiphase: str | None

    def trace(self, recording: Recording, *, whole: bool = False) -> Trace:
        """Return the photodiode, the power's drift taken out where that was asked for.

        Parameters
        ----------
        recording : Recording
            As opened.
        whole : bool, optional
            Whether the stretch asked for is disregarded.

        Returns
        -------
        Trace
            In volts, or as recorded.
        """
        reading = self._everything if whole else self.reading
        trace = reading.signal(recording)
        if self.antiphase is None:
            given = [*self.levels, None if self.dark is None or is_file(self.dark) else self.dark]
            trace = replace(trace, unit=unit_of_text(given, trace.unit))
        other = [
            None if name is None else recording.trace(name, reading.from_s, reading.to_s)
            for name in (self.monitor, self.antiphase)
        ]
        if other == [None, None]:
            return trace
        return without_power_drift(trace, other[0], other[1], self.dark_level(trace.unit))

    def whole_of(self, recording: Recording) -> Trace | None:
        """Return the whole of a recording where only a stretch was asked for.

        Parameters
        ----------
        recording : Recording
            As opened.

        Returns
        -------
        Trace or None
            None where the whole was asked for.
        """
        if self.reading.from_s is None and self.reading.to_s is None:
            return None
        return self.trace(recording, whole=True)

    def extremes(self, unit: str) -> tuple[Level | None, Level | None]:
        """Return the extremes as given, else as the bench has them.

        Parameters
        ----------
        unit : str
            The record's.

        Returns
        -------
        tuple of (Level or None, Level or None)
            Low and high; None where they are to be found.
        """
        out: list[Level | None] = []
        for name, text in zip(("low", "high"), self.levels, strict=True):
            entry = self.bench.get(f"fringe.{name}") if self.extremes_file is None else None
            if text is not None:
                out.append(level_of_text(text, f"--{name}", unit))
            elif entry is not None and not any(self.levels):
                out.append(Level(float(entry.magnitude), float(entry.u_magnitude or 0.0)))
            else:
                out.append(None)
        return out[0], out[1]

    def scan(self) -> ScanFit | None:
        """Return the extremes of the recording that shows them.

        Returns
        -------
        ScanFit or None
            None without such a recording.
        """
        if self.extremes_file is None:
            return None
        other = self._everything.open(self.extremes_file)
        return usable_scan(self.trace(other, whole=True), self.extremes_file)

    def dark_level(self, unit: str) -> Level | None:
        """Return the level without light.

        Parameters
        ----------
        unit : str
            The record's.

        Returns
        -------
        Level or None
            None where it was not given.
        """
        if self.dark is None:
            return None
        if is_file(self.dark):
            return dark_of_trace(self._everything.signal(self._everything.open(self.dark)))
        return level_of_text(self.dark, "--dark", unit)

    def ruler(self) -> Ruler | None:
        """Return metres per radian.

        Returns
        -------
        Ruler or None
            None without a wavelength.
        """
        wavelength = self.bench.get("laser.wavelength")
        if wavelength is None:
            return None
        trips = round(self.bench.magnitude("arms.round_trips", 1.0))
        return ruler_of(wavelength, self.bench.index(), trips)

    def polarity(self) -> int:
        """Return the sign of the differential arm length for a rising drive, as the bench declares.

        Returns
        -------
        int
            1 or −1.
        """
        declared = round(self.bench.magnitude("actuator.polarity", 1.0))
        return -declared if self.bench.text("actuator.arm") == "y" else declared

    @property
    def _everything(self) -> Reading:
        return replace(self.reading, from_s=None, to_s=None)
