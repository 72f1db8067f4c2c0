"""Which channels of a running recording are the photodiode, the drive and the temperature."""

import os
from dataclasses import dataclass
from pathlib import Path

from calibration.desk.ledger_errors import LedgerError
from firmware_bridge.recording_header import parse_header

__all__ = ["ChannelChoice", "LoggedChannels"]

_USUAL = ("photodiode", "pd", "signal")
_HEADER_BYTES = 1 << 20
_KELVIN = {"K": 0.0, "degC": 273.15, "°C": 273.15}


@dataclass(frozen=True, slots=True)
class ChannelChoice:
    """What the channels are called; None for the usual names.

    Parameters
    ----------
    photodiode, drive, temperature : str or None
        Names of channels, or their numbers from 1; ``name:3`` is the name "3".
    """

    photodiode: str | None = None
    drive: str | None = None
    temperature: str | None = None


@dataclass(frozen=True, slots=True)
class LoggedChannels:
    """Where the channels stand in a block.

    Parameters
    ----------
    rate_hz : float
        Samples per second.
    photodiode : int
        Position.
    unit : str
        Of the photodiode's channel.
    drive, temperature : int or None
        Positions; None where there is none.
    zero_k : float
        What is added to a temperature to be in kelvin.
    speed : float
        How much faster than real time the board runs: 1 unless it is a simulated one.
    drive_unit : str
        Of the drive's channel.
    """

    rate_hz: float
    photodiode: int
    unit: str
    drive: int | None
    temperature: int | None
    zero_k: float
    speed: float = 1.0
    drive_unit: str = "V"

    @property
    def used(self) -> list[int]:
        """Positions of the channels in use, the photodiode first."""
        return [k for k in (self.photodiode, self.drive, self.temperature) if k is not None]

    @classmethod
    def of_recording(cls, path: str | os.PathLike[str], choice: ChannelChoice) -> "LoggedChannels":
        """Return the channels of a recording that has just begun.

        Parameters
        ----------
        path : path
            The recording; its header is on the disk.
        choice : ChannelChoice
            What they are called.

        Returns
        -------
        LoggedChannels
            Found.

        Raises
        ------
        LedgerError
            If one that is named is not there, or it is not clear which is the photodiode.
        """
        with Path(path).open("rb") as file:
            header, _ = parse_header(file.read(_HEADER_BYTES), os.fspath(path))
        announced = header.announcement
        names = [channel.name for channel in announced.channels]
        photodiode = _photodiode(names, choice.photodiode)
        temperature = _maybe(names, choice.temperature)
        zero_k = 0.0
        if temperature is not None:
            unit = announced.channels[temperature].unit
            if unit not in _KELVIN:
                raise LedgerError(
                    f"the temperature's channel {choice.temperature!r} must be in K or degC, "
                    f"got {unit!r}"
                )
            zero_k = _KELVIN[unit]
        drive = _maybe(names, choice.drive)
        if choice.drive is None and names.count("drive") == 1:
            drive = names.index("drive")
        return cls(
            announced.rate_hz,
            photodiode,
            announced.channels[photodiode].unit,
            None if drive == photodiode else drive,
            temperature,
            zero_k,
            announced.speed,
            "V" if drive is None else announced.channels[drive].unit,
        )


def _photodiode(names: list[str], wanted: str | None) -> int:
    if wanted is not None:
        return _find(names, wanted)
    usual = [k for k, name in enumerate(names) if name.lower() in _USUAL]
    if len(names) == 1:
        return 0
    if len(usual) != 1:
        raise LedgerError(f"several channels; give --channel: {', '.join(map(repr, names))}")
    return usual[0]


def _maybe(names: list[str], wanted: str | None) -> int | None:
    return None if wanted is None else _find(names, wanted)


def _find(names: list[str], wanted: str) -> int:
    """Return the channel of a name, or of a number counted from 1, as in a recording."""
    if wanted.isascii() and wanted.isdigit() and 1 <= int(wanted) <= len(names):
        return int(wanted) - 1
    named = wanted.removeprefix("name:")
    if names.count(named) != 1:
        raise LedgerError(f"no channel {wanted!r}; the board has {', '.join(map(repr, names))}")
    return names.index(named)
