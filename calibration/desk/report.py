"""The report: one self-contained page on what was calibrated, how well, and from what.

Sections stand in the order a reader asks: result, conditions, budget, consistency, pictures, what was
taken as given, what was not measured, and the files with their hashes.
"""

from __future__ import annotations

import platform
from typing import TYPE_CHECKING, Any

from calibration.desk import report_figures as figures
from calibration.desk.page import HtmlPage, bullets, note, paragraph, picture, table
from calibration.desk.report_budget import budget_section, percent
from calibration.summary import (
    CONVENTIONS,
    expanded_text,
    response_lines,
    route_lines,
    series_lines,
    validity_lines,
    value_text,
)
from metro.display import show

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.desk.evidence import Evidence
    from calibration.record import ActuatorEntry, Calibration
    from metro.bench import Bench
    from metro.measured import Measured

__all__ = ["CAUTIONS", "NO_CERTIFICATE", "report_page"]

NO_CERTIFICATE = (
    "This page was made by the users of the instrument with their own measurements. It is no "
    "certificate of an accredited laboratory; its traceability rests on the wavelength and the "
    "statements named below."
)

CAUTIONS = (
    "Laser: class, eyewear and controlled area are as the laser safety officer decides.",
    "Piezo drivers carry high voltage, and a piezo stays charged after the driver is off.",
    "A drive limit in software is no interlock.",
    "Local rules govern. Nothing on this page is a statement on the safety of a set-up.",
)

_CHAIN = {
    "wavelength": "wavelength in vacuum",
    "index": "refractive index in the arms",
    "round_trips": "round trips",
    "arm_length": "arm length",
    "amplifier_corner": "amplifier's corner",
    "antialias_corner": "anti-alias filter's corner",
    "channel_delay": "drive behind the photodiode",
    "aperture": "converter's averaging time",
    "polarity": "declared polarity of the actuator",
    "drive_factor": "volts at the actuator per volt of the recorded drive",
    "adc_bits": "bits of the converter",
    "adc_range": "range of the converter",
}
_CONDITIONS = {"temperature": "air temperature", "pressure": "air pressure", "humidity": "humidity"}
_ABSOLUTE_ZERO_K = 273.15


def report_page(
    calibration: Calibration,
    evidence: Sequence[Evidence] = (),
    title: str = "",
    bench: Bench | None = None,
) -> str:
    """Return the report of a calibration.

    Parameters
    ----------
    calibration : Calibration
        What to report.
    evidence : sequence of Evidence
        Its recordings as found; pictures are drawn from those that are unchanged.
    title : str
        Heading; a plain one where empty.
    bench : Bench, optional
        For the noise that is expected beside the spectrum.

    Returns
    -------
    str
        One HTML document that loads nothing from outside.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    """
    page = HtmlPage(
        title or "Calibration of an interferometer",
        f"calibrated {calibration.created} with midfringe {calibration.software}",
    )
    page.add(_verdict(calibration), note(NO_CERTIFICATE))
    page.section("Result", *_result(calibration))
    page.section("Conditions", *_conditions(calibration))
    page.section("Budget", *budget_section(calibration))
    page.section("Routes and consistency", *_consistency(calibration))
    page.section("Fringe, spectrum, response", *_pictures(calibration, evidence, bench))
    page.section("Conventions", bullets(CONVENTIONS))
    page.section("What rests on statements", *_statements(calibration))
    page.section("Cautions", bullets(CAUTIONS))
    page.section("Files", *_files(evidence))
    page.section("Versions", _versions(calibration))
    return page.render()


def _verdict(calibration: Calibration) -> str:
    reasons = calibration.all_reasons
    if not reasons:
        return note("No reason for distrust was found.")
    return note("This calibration must not be trusted: " + "; ".join(reasons) + ".", warn=True)


def _result(calibration: Calibration) -> list[str]:
    header = ("line", "displacement per volt", "U (95 %)", "phase", "U (95 %)", "k")
    rows = [_line_row(entry) for entry in calibration.actuator]
    low, high = _extremes(calibration)
    levels: list[tuple[str, Measured | None]] = [
        ("readout slope at mid-fringe", calibration.readout_slope),
        ("fringe low", low),
        ("fringe high", high),
        ("contrast", calibration.contrast),
        ("dark level", calibration.dark),
        ("clock of the board, relative offset", calibration.clock_offset),
    ]
    readout = [(name, *_cells(value)) for name, value in levels]
    return [
        paragraph(
            "Differential displacement per volt at the actuator's terminals, positive when the "
            "x arm grows, and volts per metre of the photodiode's readout. U = k·u is the expanded "
            "uncertainty with its coverage factor k for 95 %."
        ),
        table(rows, header, "Actuator"),
        table(readout, ("quantity", "value", "U (95 %)", "k"), "Readout"),
        bullets([*response_lines(calibration), *series_lines(calibration)], "Between the lines"),
        bullets(route_lines(calibration), "Another route"),
    ]


def _extremes(calibration: Calibration) -> tuple[Measured, Measured]:
    from metro.measured import Measured

    extremes = calibration.extremes
    u_low, u_high = (float(extremes.covariance[i, i]) ** 0.5 for i in (0, 1))
    return (
        Measured.of(extremes.low_v, "V", u_low, extremes.dof),
        Measured.of(extremes.high_v, "V", u_high, extremes.dof),
    )


def _line_row(entry: ActuatorEntry) -> tuple[str, ...]:
    magnitude, u, k = _cells(entry.magnitude)
    phase, phase_u, _ = _cells(entry.phase)
    return (show(float(entry.frequency.magnitude), "Hz", 6), magnitude, u, phase, phase_u, k)


def _cells(value: Measured | None) -> tuple[str, str, str]:
    if value is None:
        return "unknown", "", ""
    if value.u_magnitude is None:
        return value_text(value), "not given", ""
    return value_text(value), expanded_text(value), f"{value.coverage_factor():.3g}"


def _conditions(calibration: Calibration) -> list[str]:
    chain = [(_CHAIN.get(name, name), *_cells(value)) for name, value in calibration.chain.items()]
    air = [(_CONDITIONS.get(n, n), *_condition(n, v)) for n, v in calibration.conditions.items()]
    return [
        table([*chain, *air], ("what", "value", "U (95 %)", "k")),
        bullets(validity_lines(calibration)),
    ]


def _condition(name: str, value: Measured) -> tuple[str, str, str]:
    if name != "temperature":
        return _cells(value)
    from metro.measured import Measured

    number = float(value.magnitude) - _ABSOLUTE_ZERO_K
    celsius, u, k = _cells(Measured.of(number, "K", value.u_magnitude, value.dof))
    return celsius.replace(" K", " °C"), u, k


def _consistency(calibration: Calibration) -> list[str]:
    checks = [
        (
            check["name"],
            f"{check['normalised_error']:.2f}",
            "consistent" if check["agree"] else "not consistent",
        )
        for check in calibration.checks
    ]
    text = (
        "Each comparison is the difference over its expanded uncertainty; up to 1 is called "
        "consistent, which confirms nothing: both sides share the wavelength."
    )
    rows = table(checks, ("comparison", "normalised error", ""))
    return [paragraph(text), rows] if rows else [paragraph("No second route was recorded.")]


def _pictures(
    calibration: Calibration, evidence: Sequence[Evidence], bench: Bench | None
) -> list[str]:
    drawn = [
        picture(figure, caption)
        for figure, caption in figures.session_figures(calibration, evidence, bench)
    ]
    left_out = [
        f"{item.file} ({item.role}) is {item.state}: nothing is drawn from it"
        for item in evidence
        if not item.is_unchanged
    ]
    return [*drawn, bullets(left_out)]


def _statements(calibration: Calibration) -> list[str]:
    unmeasured = [
        f"{item.name}: {_assumed(item.effect / float(entry.magnitude.magnitude))}"
        for entry in calibration.actuator[:1]
        for item in entry.budget.contributions
        if "(not " in item.name
    ]
    return [
        bullets(calibration.assumptions, "Taken as given"),
        bullets([*calibration.cautions, *unmeasured], "Not measured, and other cautions"),
    ]


def _assumed(share: float) -> str:
    return (
        f"{percent(share)} is in the budget for it" if share else "nothing is in the budget for it"
    )


def _files(evidence: Sequence[Evidence]) -> list[str]:
    rows = [
        (e.role, e.file, e.samples, e.missing, e.over_range, e.state, e.sha256) for e in evidence
    ]
    header = ("role", "file", "samples", "missing", "over range", "now", "SHA-256")
    return [table(rows, header, long_last=True)]


def _versions(calibration: Calibration) -> str:
    import numpy as np

    from metro import __version__

    rows: list[tuple[str, Any]] = [
        ("calibration made by midfringe", calibration.software),
        ("report made by midfringe", __version__),
        ("Python", platform.python_version()),
        ("numpy", np.__version__),
        ("system", platform.platform()),
    ]
    return table(rows, ("program", "version"))
