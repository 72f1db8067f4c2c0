"""``midfringe inspect``: whether a recording is sound."""

import math
from typing import Any

import click

from metro.options import ValueType, command, distrust, output_options

__all__ = ["inspect"]


@command(example="midfringe inspect run.mfr")
@click.argument("file", metavar="FILE")
@click.option("--time", metavar="NAME", help="The time column of a table.")
@click.option("--rate", type=ValueType("Hz", above=0.0), metavar="F", help="Where there is none.")
@click.option("--lock-in", is_flag=True, help="The board's lock-in results beside the samples.")
@output_options("plot", "json", "overwrite")
def inspect(
    file: str,
    time: str | None,
    rate: float | None,
    lock_in: bool,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Look through a recording: gaps, over-range, channels, the board's clock, and a verdict.

    Ends with 1 if something speaks against the recording. Lock-in results are shown as amplitude and phase of each line, also where a
    recording holds nothing else.
    """
    from firmware_bridge.inspection import inspect_recording
    from firmware_bridge.opening import open_lock_in, open_recording
    from metro.output import to_json
    from metro.units import quantity

    if plot is not None:
        from metro.figure_file import check_figure

        check_figure(plot, overwrite, [file])
    if lock_in:
        recording = open_lock_in(file)
    else:
        given = None if rate is None else quantity(rate, "Hz")
        recording = open_recording(file, time=time, rate=given)
    found = inspect_recording(recording)
    if plot is not None:
        from firmware_bridge.inspection_plot import inspection_figure
        from metro.figure_file import save_figure

        save_figure(inspection_figure(recording, found), plot, overwrite=overwrite)
    if as_json:
        click.echo(to_json(_document(recording, found)))
    else:
        click.echo(_for_people(recording, found))
    if not found.is_sound:
        distrust(found.reasons)


def _value(value: float, unit: str, u: float | None = None) -> dict[str, Any]:
    return {"value": None if math.isnan(value) else value, "unit": unit, "u": u}


def _document(recording: Any, found: Any) -> dict[str, Any]:  # noqa: ANN401  # modules load when called
    return {
        "samples": recording.length,
        "rate": _value(recording.rate_hz, "Hz", recording.rate_u_hz),
        "duration": _value(recording.duration_s, "s"),
        "channels": [
            {
                "name": state.name,
                "column": column,
                "minimum": _value(state.minimum, state.unit),
                "maximum": _value(state.maximum, state.unit),
                "mean": _value(state.mean, state.unit),
                "standard_deviation": _value(state.standard_deviation, state.unit),
                "missing": state.missing,
                "over_range": state.over_range,
                "stuck": _value(state.stuck_samples / recording.rate_hz, "s"),
                "missing_codes": len(state.missing_codes),
            }
            for column, state in zip(recording.columns, found.channels, strict=True)
        ],
        "gaps": [
            {"index": g.index, "length": g.length, "exact": g.exact, "length_u": g.length_u}
            for g in recording.gaps
        ],
        "over_range": recording.over_range,
        "clock": None
        if found.clock is None
        else {
            "offset": _value(found.clock.offset, "1", found.clock.offset_u),
            "span": _value(found.clock.span_s, "s"),
        },
        "repeated_blocks": found.repeated_blocks,
        "jitter": _value(recording.timing.jitter_s, "s", recording.timing.jitter_u_s),
        "remarks": recording.remarks,
        "sound": found.is_sound,
        "reasons": found.reasons,
    }


def _for_people(recording: Any, found: Any) -> str:  # noqa: ANN401
    from metro.output import table

    lines = [
        ["recording", f"{recording.path} ({recording.format})"],
        ["samples", f"{recording.length} at {recording.rate_hz:.9g} Hz{_rate_u(recording)}"],
        ["duration", f"{recording.duration_s:.6g} s"],
        ["gaps", f"{len(recording.gaps)} ({sum(g.length for g in recording.gaps)} samples)"],
        ["over range", f"{recording.over_range} values"],
        ["clock", _clock(found.clock)],
    ]
    is_table = not recording.format.startswith("mfr")
    channels = [
        [
            *([column] if is_table else []),
            s.name,
            s.unit,
            s.minimum,
            s.maximum,
            s.mean,
            s.standard_deviation,
            s.missing,
            s.over_range,
        ]
        for column, s in zip(recording.columns, found.channels, strict=True)
    ]
    names = [
        *(["column"] if is_table else []),
        "channel",
        "unit",
        "minimum",
        "maximum",
        "mean",
        "std dev",
        "missing",
        "over range",
    ]
    parts = [table(lines), table(channels, names)]
    if recording.gaps:
        parts.append(_gap_table(recording))
    parts += [f"remark: {remark}" for remark in recording.remarks]
    parts.append("no reason for distrust found" if found.is_sound else "not sound")
    return "\n\n".join(parts)


def _rate_u(recording: Any) -> str:  # noqa: ANN401
    u = "" if not recording.rate_u_hz else f", u = {recording.rate_u_hz:.2g} Hz"
    jitter_s = recording.timing.jitter_s
    return u + (f", time stamps scatter by {jitter_s:.2g} s" if jitter_s else "")


def _gap_table(recording: Any) -> str:  # noqa: ANN401
    from metro.output import table

    shown = 10
    longest = sorted(recording.gaps, key=lambda gap: -gap.length)[:shown]
    rows = [
        [
            f"{gap.index / recording.rate_hz:.6g} s",
            gap.index,
            gap.length,
            "exact" if gap.exact else f"estimated, u = {gap.length_u:.3g}",
        ]
        for gap in longest
    ]
    text = table(rows, ["gap at", "sample", "length", "length is"])
    more = len(recording.gaps) - shown
    return f"{text}\n… and {more} shorter ones" if more > 0 else text


def _clock(clock: Any) -> str:  # noqa: ANN401
    if clock is None:
        return "not compared with the host's"
    return (
        f"{clock.offset * 1e6:+.1f} ppm against the host's, u = {clock.offset_u * 1e6:.1f} ppm "
        f"(over {clock.span_s:.0f} s)"
    )
