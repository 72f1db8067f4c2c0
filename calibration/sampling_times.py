"""What unsteady or unknown moments of sampling do to fitted lines."""

import math
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from calibration.line_fit import Line, LineFit
from calibration.phasor_estimate import PhasorEstimate

if TYPE_CHECKING:
    from firmware_bridge.timing import Timing

__all__ = ["HOST_ONLY", "with_timing"]

HOST_ONLY = (
    "phase refused: only the arrival of the samples at this computer tells their times, and samples "
    "lost on the way do not show"
)
"""The reason of lines whose samples have no time of their own."""

_LARGE = 0.2  # (2πfσ)²/2 from which on the jitter's own distribution matters
_SAID = 1e-3


def with_timing(fit: LineFit, timing: "Timing") -> LineFit:
    """Return a line fit with what the moments of sampling took from it put back or refused.

    Parameters
    ----------
    fit : LineFit
        Of samples taken as if evenly spaced.
    timing : Timing
        What their times rest on.

    Returns
    -------
    LineFit
        The same where the times are the board's own and steady.

    Notes
    -----
    Moments of sampling that scatter normally by σ about a regular grid leave exp(−(2πfσ)²/2) of a
    line (the characteristic function of the normal distribution), in the response and in the drive,
    and nothing of it in their ratio. The jitter of the stamps is taken for that of the sampling.
    """
    if not timing.is_by_host and not timing.jitter_s:
        return fit
    lines = tuple(_with_timing(line, timing) for line in fit.lines)
    losses = [1 - math.exp(-_exponent(line, timing)) for line in fit.lines]
    remarks = fit.remarks
    if max(losses, default=0.0) > _SAID:
        put_back = ", ".join(
            f"{loss:.2%} at {line.frequency_hz:.9g} Hz"
            for line, loss in zip(fit.lines, losses, strict=True)
        )
        said = f"the board's time stamps scatter by {timing.jitter_s:.3g} s: what that takes from"
        remarks = (*remarks, f"{said} the lines is put back ({put_back})")
    return replace(fit, lines=lines, remarks=remarks)


def _exponent(line: Line, timing: "Timing") -> float:
    return 0.5 * (2 * math.pi * line.frequency_hz * timing.jitter_s) ** 2


def _with_timing(line: Line, timing: "Timing") -> Line:
    exponent = _exponent(line, timing)
    # d(exponent)/exponent = 2 dσ/σ
    u = 2 * exponent * timing.jitter_u_s / timing.jitter_s if timing.jitter_s else 0.0
    reasons = list(line.distrust_reasons)
    if exponent > _LARGE:
        reasons.append(
            f"the board's time stamps scatter by {timing.jitter_s:.3g} s, too much for a line of "
            f"{line.frequency_hz:.9g} Hz"
        )
    if timing.is_by_host:
        reasons.append(HOST_ONLY)
    return replace(
        line,
        response=_grown(line.response, exponent, u),
        drive=None if line.drive is None else _grown(line.drive, exponent, u),
        distrust_reasons=tuple(reasons),
        is_phase_refused=timing.is_by_host,
    )


def _grown(estimate: PhasorEstimate, exponent: float, u: float) -> PhasorEstimate:
    """Return a phasor times e^exponent, where the exponent has the standard uncertainty u."""
    factor = math.exp(exponent)
    phasor = estimate.phasor * factor
    along = np.array([phasor.real, phasor.imag]) * u
    covariance = estimate.covariance * factor**2 + np.outer(along, along)
    return replace(estimate, phasor=phasor, covariance=covariance)
