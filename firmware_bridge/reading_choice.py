"""What of a recording is to be read: columns, rate, and the stretch of time."""

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import click

from firmware_bridge.channel import ChannelError, listed
from firmware_bridge.opened_recordings import is_judged, note_opened
from metro.options import is_quiet

if TYPE_CHECKING:
    from firmware_bridge.trace import Recording, Trace

__all__ = ["Reading"]

_USUAL = ("photodiode", "pd", "signal")  # what --channel means where it is not given


@dataclass(frozen=True, slots=True)
class Reading:
    """How a recording is to be read: the values of the options.

    Parameters
    ----------
    time, channel, drive_channel : str, optional
        Columns, by header or number.
    rate_hz : float, optional
        Samples per second [Hz].
    from_s, to_s : float, optional
        The stretch [s].
    own_time : bool
        Whether the stretch is in the file's own stamps.
    """

    time: str | None = None
    channel: str | None = None
    drive_channel: str | None = None
    rate_hz: float | None = None
    from_s: float | None = None
    to_s: float | None = None
    own_time: bool = False

    def open(self, path: str) -> "Recording":
        """Open a recording as the options say.

        Parameters
        ----------
        path : str
            The file, "-" for standard input.

        Returns
        -------
        Recording
            Opened.

        Raises
        ------
        BridgeError
            As :func:`firmware_bridge.open_recording`.
        """
        from firmware_bridge.opening import open_recording
        from metro.units import quantity

        rate = None if self.rate_hz is None else quantity(self.rate_hz, "Hz")
        recording = open_recording(path, time=self.time, rate=rate, own_time=self.own_time)
        note_opened(self, recording)
        return recording

    def reasons(self, recording: "Recording") -> list[str]:
        """Return why the stretch asked for must not be trusted, whatever is made of it.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        list of str
            Such as that a large part of the file could not be read. That a recording was cut
            says nothing against a stretch that ends before.
        """
        from firmware_bridge.recording import NO_END

        if self.to_s is None or recording.span(self.from_s, self.to_s)[1] == recording.length:
            return recording.reasons
        return [reason for reason in recording.reasons if reason != NO_END]

    def channel_name(self, recording: "Recording") -> str:
        """Return the channel that is meant: the one given, the only one, or the photodiode.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        str
            A name for `Recording.find`.

        Raises
        ------
        ChannelError
            If none was given and it is not clear.
        """
        if self.channel is not None:
            return self.channel
        names = [channel.name for channel in recording.channels]
        if len(names) == 1:
            return str(recording.columns[0])
        usual = [k for k, name in enumerate(names) if name.lower() in _USUAL]
        if len(usual) == 1:
            return str(recording.columns[usual[0]])
        has = listed(recording.channels, recording.columns)
        raise ChannelError(f"{recording.path} has several channels; give --channel: {has}")

    def signal(self, recording: "Recording") -> "Trace":
        """Return the photodiode's trace over the stretch asked for.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        Trace
            NaN where missing or over-range.

        Raises
        ------
        BridgeError
            If there is no such channel or no sample in the stretch.
        """
        return recording.trace(self.channel_name(recording), self.from_s, self.to_s)

    def drive(self, recording: "Recording") -> "Trace | None":
        """Return the drive monitor's trace over the same stretch.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        Trace or None
            None where no drive was named.

        Raises
        ------
        BridgeError
            If there is no such channel.
        """
        if self.drive_channel is None:
            return None
        return recording.trace(self.drive_channel, self.from_s, self.to_s)

    def with_drive(self, recording: "Recording", wanted: str | None = None) -> "Reading":
        """Return how to read the drive too: as given, as wanted, or the channel called "drive".

        Parameters
        ----------
        recording : Recording
            Opened.
        wanted : str, optional
            The drive's column as the bench names it.

        Returns
        -------
        Reading
            The same where there is no such channel, or where it is the one that is read.

        Raises
        ------
        ChannelError
            If the wanted channel is not there, or it is not clear which one is read.
        """
        if self.drive_channel is not None:
            return self
        if wanted is None:
            named = [
                str(column)
                for column, c in zip(recording.columns, recording.channels, strict=True)
                if c.name.strip().lower() == "drive"
            ]
            wanted = named[0] if len(named) == 1 else None
        if wanted is None or recording.find(wanted) == recording.find(self.channel_name(recording)):
            return self
        return replace(self, drive_channel=wanted)

    def tell(self, recording: "Recording") -> None:
        """Write the remarks of a recording on standard error, unless ``--quiet``.

        Parameters
        ----------
        recording : Recording
            Opened.
        """
        reasons = self.reasons(recording) if is_judged() else []
        if not is_quiet():
            for remark in recording.remarks:
                if remark in reasons:
                    continue  # said at the end
                click.echo(f"{recording.path}: {remark}", err=True)
