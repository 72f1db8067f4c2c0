"""What ``midfringe fringe`` prints for people: tables of a driven, a swept or a quadrature record."""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from metro.output import table

if TYPE_CHECKING:
    from calibration.count_reading import CountReading
    from calibration.fringe_reading import FringeReading
    from calibration.route import Route

__all__ = ["count_tables", "driven_tables", "route_table"]

_NO_WAVELENGTH = "unknown: no --wavelength"
_NO_DARK = "unknown: no --dark"
_CONTRAST = "(high − low)/(high + low − 2·dark)"
_SOUND = "no reason for distrust found"
_MOST_PASSES = 20


def route_table(routes: Sequence["Route"]) -> str:
    """Return the table of routes with their ranges.

    Parameters
    ----------
    routes : sequence of Route
        In order.

    Returns
    -------
    str
        Aligned lines.
    """
    ways = []
    for route in routes:
        values = route.displacement_amplitude or route.phase_amplitude or []
        ways.append([route.route, ", ".join(map(str, values)) or "none"])
        ways.append(["", f"valid: {route.valid_range}"])
        ways += [["", f"not used: {reason}"] for reason in route.reasons]
    return table(ways, ["route", "amplitude"])


def driven_tables(result: "FringeReading", remarks: Sequence[str] = ()) -> str:
    """Return the tables of a driven record.

    Parameters
    ----------
    result : FringeReading
        Fit and routes.
    remarks : sequence of str, optional
        Lines to add.

    Returns
    -------
    str
        Tables with empty lines between them.
    """
    fit = result.fit
    level: list[list[Any]] = [
        ["low", fit.low, result.extremes_from],
        ["high", fit.high, result.extremes_from],
        ["contrast", fit.contrast or _NO_DARK, _CONTRAST],
        ["working phase", fit.working_phase, "0 at the maximum; the sign cannot be told"],
        ["slope", fit.slope, "dV/dφ there"],
        ["slope per metre", fit.slope_per_metre or _NO_WAVELENGTH, "dV/dx there"],
    ]
    metres: list[Any] = list(fit.displacement_amplitude or ()) or [_NO_WAVELENGTH] * len(
        fit.phase_amplitude
    )
    lines = [
        [f"{frequency:g} Hz", depth, displacement, phase]
        for frequency, depth, displacement, phase in zip(
            result.frequencies_hz, fit.phase_amplitude, metres, fit.phase, strict=True
        )
    ]
    parts = [
        table(level),
        table(lines, ["line", "phase amplitude", "displacement", "phase at t = 0"]),
        route_table(result.routes),
    ]
    if result.agreement is not None:
        word = "consistent" if result.agreement.agree else "not consistent"
        parts.append(f"routes: normalised error {result.agreement.normalised_error:.2g}, {word}")
    return _joined(parts, remarks, result.reasons)


def count_tables(result: "CountReading", remarks: Sequence[str] = ()) -> str:
    """Return the tables of a swept record.

    Parameters
    ----------
    result : CountReading
        Passes and shape.
    remarks : sequence of str, optional
        Lines to add.

    Returns
    -------
    str
        Tables with empty lines between them.
    """
    count = result.count
    metres = result.metres(count.fringes, count.fringes_u)
    level: list[list[Any]] = [
        ["low", result.low, result.extremes_from],
        ["high", result.high, result.extremes_from],
        ["contrast", result.contrast or _NO_DARK, _CONTRAST],
        ["fringes", result.fringes, "of all passes together, whatever their direction"],
        ["displacement", metres or _NO_WAVELENGTH, "the same in metres"],
        ["direction", "up and down" if result.has_drive else "unknown", result.direction],
    ]
    if result.amplitude is not None:
        level.append(["vibration", result.amplitude, "λ/8 a fringe per period, zero to peak"])
    parts = [table(level), _pass_table(result)]
    if result.shape is not None and result.shape.directions:
        parts.append(
            table(
                [
                    [
                        one.direction,
                        _share(one.second, one.second_u),
                        _share(one.third, one.third_u),
                        _share(one.lean, one.lean_u),
                        one.stretches,
                    ]
                    for one in result.shape.directions
                ],
                ["fringe law going", "cos 2φ", "cos 3φ", "sin 2φ", "stretches"],
            )
        )
    return _joined(parts, remarks, result.reasons)


def _share(value: float, u: float) -> str:
    return f"{100.0 * value:+.2f} %, u = {100.0 * u:.2f} %"


def _pass_table(result: "CountReading") -> str:
    rate, first = result.trace.rate_hz, result.trace.start_index
    rows = []
    for one in result.count.passes[:_MOST_PASSES]:
        metres = result.metres(one.fringes, one.fringes_u)
        rows.append(
            [
                f"{(first + one.start_index) / rate:.6g} s",
                f"{(first + one.stop_index) / rate:.6g} s",
                f"{one.fringes:.3f}",
                f"{one.fringes_u:.3f}",
                metres or "unknown",
                {1: "up", -1: "down", 0: "unknown"}[one.direction],
            ]
        )
    text = table(rows, ["pass from", "to", "fringes", "u", "displacement", "direction"])
    more = len(result.count.passes) - _MOST_PASSES
    return text if more <= 0 else f"{text}\n… and {more} more passes"


def _joined(parts: list[str], remarks: Sequence[str], reasons: Sequence[str]) -> str:
    return "\n\n".join([*parts, *remarks, *([] if reasons else [_SOUND])])
