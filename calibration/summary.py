"""A calibration in words and a table, for a person."""

from typing import Any

from calibration.record import Calibration
from metro.display import show
from metro.headed_text import headed
from metro.measured import Measured
from metro.output import table

__all__ = [
    "CONVENTIONS",
    "calibration_text",
    "expanded_text",
    "response_lines",
    "route_lines",
    "series_lines",
    "validity_lines",
    "value_text",
]

CONVENTIONS = (
    "displacement is the differential arm length, positive when the x arm grows",
    "amplitudes are zero to peak; phases refer to the drive at the actuator's terminals",
    "u is the standard uncertainty, U = k·u the expanded one at 95 %",
    "the readout slope holds at mid-fringe, in volts at the converter's input",
)


def calibration_text(calibration: Calibration) -> str:
    """Return the result of a calibration as lines for a terminal."""
    rows = [
        [
            show(float(entry.frequency.magnitude), "Hz"),
            value_text(entry.magnitude),
            expanded_text(entry.magnitude),
            "unknown" if entry.phase is None else value_text(entry.phase),
            "" if entry.phase is None else expanded_text(entry.phase),
            "; ".join(entry.reasons) or "no reason for distrust found",
        ]
        for entry in calibration.actuator
    ]
    header = ["line", "actuator", "U (95 %)", "phase", "U (95 %)", "trust"]
    first = calibration.actuator[0]
    at = show(float(first.frequency.magnitude), "Hz")
    found = [*response_lines(calibration), *series_lines(calibration), *route_lines(calibration)]
    parts = [
        table(rows, header=header),
        table(_readout_rows(calibration)),
        f"budget of the actuator at {at}\n{first.budget.table()}",
        f"budget of the readout slope\n{calibration.readout_budget.table()}",
        headed("between the lines, and other routes", found),
        headed("conditions", validity_lines(calibration)),
        headed("checks", [_check(check) for check in calibration.checks]),
        headed("taken as given", calibration.assumptions),
        headed("conventions", CONVENTIONS),
        headed("in short", _in_short(calibration)),
    ]
    return "\n\n".join(part for part in parts if part)


def _in_short(calibration: Calibration) -> list[str]:
    """Return the result once more, for the end of a long page."""
    lines = [
        f"actuator at {show(float(entry.frequency.magnitude), 'Hz')}: {entry.magnitude}"
        for entry in calibration.actuator
    ]
    lines.append(f"readout slope at mid-fringe: {calibration.readout_slope}")
    against = calibration.all_reasons
    lines.append(
        f"not to be trusted: {len(against)} reasons, named below"
        if against
        else "no reason for distrust found"
    )
    return lines


def _readout_rows(calibration: Calibration) -> list[list[str]]:
    values = {
        "readout slope": calibration.readout_slope,
        "contrast": calibration.contrast,
        "dark level": calibration.dark,
        "clock offset": calibration.clock_offset,
    }
    known = {name: value for name, value in values.items() if value is not None}
    return [
        [name, value_text(value), f"U = {expanded_text(value)} (95 %)"]
        for name, value in known.items()
    ]


def response_lines(calibration: Calibration) -> list[str]:
    """Return the response between the lines in words."""
    found = calibration.response
    if found is None:
        return []
    parts = [f"gain {found.gain}", f"delay {found.delay}"]
    for resonance in found.resonances():
        q = resonance["q"]
        damping = "undamped as far as the lines tell" if q is None else f"Q {q}"
        parts.append(f"resonance {resonance['frequency']}, {damping}")
    if found.loss is not None:
        parts.append(f"loss factor {found.loss}")
    return [
        (
            f"response from {show(found.from_hz, 'Hz')} to {show(found.to_hz, 'Hz')}, between the "
            f"lines only ({found.shape.text}): chi-square {found.chi_square:.3g} for {found.dof} "
            "degrees of freedom"
        ),
        *(f"response: {part}" for part in parts),
    ]


def series_lines(calibration: Calibration) -> list[str]:
    """Return what the drive series say, one line each."""
    lines = []
    for series in calibration.drive_series:
        low, high, at_hz = (value_text(_of(series[name])) for name in ("from", "to", "frequency"))
        up_down = "not measured" if series["up_down"] is None else _of(series["up_down"])
        lines.append(
            f"drive series at {at_hz}, {low} to {high}: without drive {_of(series['small_signal'])}; "
            f"grows by {_of(series['amplitude_slope'])}; down minus up {up_down}"
        )
    return lines


def route_lines(calibration: Calibration) -> list[str]:
    """Return the further routes: range, recordings, and their coefficients where others decide."""
    lines = []
    for route in calibration.routes:
        lines.append(f"route {route['route']}: valid with {route['valid_range']}")
        for one in route["recordings"]:
            pilot = "no pilot"
            if one["pilot"] is not None:
                depth, seen = one["depth"]["value"], one["pilot"]["value"]
                pilot = f"pilot {show(seen, 'Hz', 6)} of {show(depth, 'rad', 3)}"
            lines.append(
                f"route {route['route']}: {one['file']}, {pilot}, {one['inverted_fraction']:.0%} of the "
                f"samples inverted, phase known for {one['known_fraction']:.0%}"
            )
        for entry in () if route["decides"] else route["actuator"]:
            at_hz = value_text(_of(entry["frequency"]))
            lines.append(f"route {route['route']} at {at_hz}: {_of(entry['magnitude'])}")
    return lines


def validity_lines(calibration: Calibration) -> list[str]:
    """Return the actuator's conditions in one line."""
    found = calibration.validity
    known = [
        f"{name.replace('_', ' ')} {value_text(_of(found[name]))}"
        for name in ("drive_from", "drive_to", "bias", "temperature")
        if found.get(name) is not None
    ]
    history = found.get("history")
    known.append(f"history {history}" if history else "history not stated")
    return [f"holds for: {'; '.join(known)}"] if found else []


def _of(value: Measured | dict[str, Any]) -> Measured:
    """Return a quantity that may stand in its JSON form."""
    return value if isinstance(value, Measured) else Measured.from_dict(value)


def value_text(measured: Measured) -> str:
    """Return a measured value alone, to the digits that its uncertainty deserves."""
    return str(measured).partition(",")[0]


def expanded_text(measured: Measured) -> str:
    """Return its expanded uncertainty at 95 % alone."""
    _, _, rest = str(measured).partition("U = ")
    return rest.partition(" (")[0]


def _check(check: dict[str, object]) -> str:
    verdict = "consistent" if check["agree"] else "not consistent"
    return f"{check['name']}: {verdict}, normalised error {check['normalised_error']:.2f}"
