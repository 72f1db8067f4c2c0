"""What ``midfringe expect`` prints for people: headed sections, in short at the end.

What a reader asks for stands first, and once more in the last lines, where a terminal ends.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.display import show, show_measured
from metro.headed_text import headed

if TYPE_CHECKING:
    from metro.expectation import Expectation
    from metro.measured import Measured

__all__ = ["expectation_page"]

_DIGITS = 7  # of a number without an uncertainty: a part in a million still shows
_SHORT_DIGITS = 4
_SHORT = ("strain", "displacement", "phase", "voltage", "counts")


def expectation_page(expectation: Expectation) -> str:
    """Return the tables and texts for people.

    Parameters
    ----------
    expectation : Expectation
        What to print.

    Returns
    -------
    str
        Sections with a blank line between them: stages, working point, noise, signal to noise,
        corrections, conventions, the bench, cautions, in short.
    """
    from metro.output import table

    conventions = [f"{name}: {text}" for name, text in expectation.conventions.items()]
    parts = [
        table(_rows(expectation.stages), ("stage", "change")),
        table(_rows(expectation.working_point), ("working point", "")),
        table(_noise_rows(expectation), ("noise", "displacement density", "strain density")),
        table(_rows(expectation.snr), ("signal to noise", "")),
        headed("corrections", [c.text for c in expectation.corrections.values()]),
        headed("conventions", conventions),
        _bench_table(expectation.sources),
        headed("cautions", expectation.cautions),
        headed("in short", _in_short(expectation)),
    ]
    return "\n\n".join(part for part in parts if part)


def _in_short(expectation: Expectation) -> list[str]:
    """Return the stages in one line, and what the noise says of them in another; U stands above."""
    known = [
        f"{name} {_brief(value)}"
        for name, value in expectation.stages.items()
        if name in _SHORT and value is not None
    ]
    snr = expectation.snr
    ratio, time, wanted = snr["value"], snr["duration"], snr["wanted"]
    least = snr["detectable_displacement"]
    lines = [" ↔ ".join(known)]
    if ratio is not None and time is not None and wanted is not None and least is not None:
        lines.append(
            f"signal to noise {_brief(ratio)} after {_brief(time)}; "
            f"by then {_brief(least)} reaches {_brief(wanted)}"
        )
    return lines


def _brief(value: Measured) -> str:
    return show(value.magnitude, value.unit, _SHORT_DIGITS)


def _rows(values: dict[str, Measured | None]) -> list[tuple[str, str]]:
    """Return names and values; no word of uncertainty where the bench gives none."""
    return [(name.replace("_", " "), _cell(value)) for name, value in values.items()]


def _cell(value: Measured | None) -> str:
    if value is None:
        return "unknown"
    if value.u_magnitude is None:
        return show(value.magnitude, value.unit, _DIGITS)
    return show_measured(value)


def _noise_rows(expectation: Expectation) -> list[tuple[str, str, str]]:
    """Return one row a source, those that are not given last and together."""
    displacement, strain = expectation.noise, expectation.noise_strain
    unknown = [name.replace("_", " ") for name, value in displacement.items() if value is None]
    rows = [
        (name.replace("_", " "), _cell(value), _cell(strain[name]))
        for name, value in displacement.items()
        if value is not None
    ]
    return [*rows, *((name, "not given", "") for name in unknown)]


def _bench_table(sources: dict[str, dict[str, str]]) -> str:
    """Return every value of the bench with where it came from, the file named once."""
    from metro.output import table

    if not sources:
        return ""
    files = {
        entry["source"].partition(", [")[0]
        for entry in sources.values()
        if ", [" in entry["source"]
    }
    file = files.pop() if len(files) == 1 else ""
    rows = [
        (
            key,
            entry["value"],
            entry["source"].removeprefix(f"{file}, ") if file else entry["source"],
        )
        for key, entry in sources.items()
    ]
    return table(rows, ("the bench", "value", f"from {file}" if file else "from"))
