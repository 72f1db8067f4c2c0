"""``midfringe export``: recording to CSV, NPZ or HDF5."""

from typing import TYPE_CHECKING

import click

from firmware_bridge.reading import Reading, recording_options
from metro.options import command, is_quiet, output_options

if TYPE_CHECKING:
    from firmware_bridge.trace import Recording

__all__ = ["export"]


@command(example="midfringe export night.mfr --out night.csv")
@click.argument("file")
@recording_options(omit=("drive",), is_judged=False)
@click.option("--lock-in", is_flag=True, help="The board's lock-in results beside the samples.")
@output_options("out", "json", "overwrite")
def export(
    file: str,
    reading: Reading,
    lock_in: bool,
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Write the recording FILE as CSV, NPZ or HDF5; the suffix of --out says which.

    There is a column time_s, seconds from the first sample, and one for each channel; samples
    that are missing or out of range are nan. NPZ and HDF5 also hold units, gaps, rate and source.
    Lock-in results are written as amplitude and phase of each line, also where a recording holds nothing else.
    """
    from firmware_bridge.export import export_recording
    from firmware_bridge.opening import open_lock_in

    if out is None:
        raise click.UsageError("--out is needed: a file ending in .csv, .npz or .h5")
    recording = open_lock_in(file) if lock_in else reading.open(file)
    channels = None if reading.channel is None else [reading.channel]
    samples = export_recording(
        recording,
        out,
        channels=channels,
        from_s=reading.from_s,
        to_s=reading.to_s,
        overwrite=overwrite,
    )
    reading.tell(recording)
    if as_json:
        from metro.output import to_json

        document = {"file": out, "samples": samples, "missing": _missing(recording, reading)}
        click.echo(to_json(document))
    elif not is_quiet():
        click.echo(f"{out}: {samples} samples ({_missing(recording, reading)} missing)")


def _missing(recording: "Recording", reading: Reading) -> int:
    """Return how many samples the gaps take from the stretch that was written."""
    start, stop = recording.span(reading.from_s, reading.to_s)
    parts = [(max(gap.index, start), min(gap.index + gap.length, stop)) for gap in recording.gaps]
    return sum(max(0, last - first) for first, last in parts)
