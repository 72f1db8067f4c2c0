"""A whole session on a simulated bench: record, calibrate, convert, compare with the truth."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from math import sqrt
from pathlib import Path
from typing import Any

import numpy as np

from calibration.analysis import calibrate
from calibration.bench_check import check_bench
from calibration.comparison import Comparison, compare
from calibration.convert import ConvertedRecording
from calibration.line_bound import line_bound
from calibration.line_fit import Line
from calibration.lines import fit_lines_si
from calibration.readout import Readout
from calibration.record import Calibration
from calibration.rehearsal_script import LINES_S, Step, session_steps
from firmware_bridge.opening import open_recording
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.playing import record_in_memory, record_through_port
from metro.bench import Bench
from metro.budget import Budget, Contribution
from metro.measured import Measured

__all__ = ["Rehearsal", "check_rehearsal", "rehearse"]

Progress = Callable[[str], None]


@dataclass(frozen=True, eq=False)
class Rehearsal:
    """What a rehearsal left.

    Parameters
    ----------
    seed : int
        Seed of the truth and the noise.
    calibration : Calibration
        What the analysis found.
    comparisons : list of Comparison
        Each quantity beside its truth.
    files : dict of str to Path
        Recordings by step.
    roles : dict of str to list of str
        Their paths by role.
    conversion : ConvertedRecording
        The recording on the rising slope as displacement.
    """

    seed: int
    calibration: Calibration
    comparisons: list[Comparison]
    files: dict[str, Path]
    roles: dict[str, list[str]]
    conversion: ConvertedRecording


def rehearse(
    bench: Bench,
    seed: int,
    folder: Path,
    *,
    through_port: bool = True,
    lines_s: float = LINES_S,
    lean_rad: float = 0.0,
    progress: Progress | None = None,
) -> Rehearsal:
    """Play one session and return its result beside the truth.

    Parameters
    ----------
    bench : Bench
        The bench file; the truth is drawn from it and the analysis sees only it.
    seed : int
        Seed of the truth and all noise.
    folder : Path
        Existing folder for the recordings.
    through_port : bool
        Record through a pseudo-terminal with the recorder; else decode the same bytes in memory.
    lines_s : float
        Duration of a lines recording [s].
    lean_rad : float
        How far from mid-fringe the bench is held, towards the fringe's top [rad].
    progress : callable, optional
        Told what happens next, in a few words.

    Returns
    -------
    Rehearsal
        Calibration, comparison and files.
    """
    say = progress or (lambda _text: None)
    simulated = SimulatedBench(bench, seed)
    steps = session_steps(bench, lines_s)
    play = record_through_port if through_port else record_in_memory
    files = {}
    setups = [replace(step.setup, lean_rad=lean_rad) for step in steps]
    recordings = ((setup, folder / step.file) for setup, step in zip(setups, steps, strict=True))
    for step, path in zip(steps, play(simulated, recordings), strict=True):
        files[step.name] = path
        say(f"recorded {step.name}")
    roles = _by_role(steps, files)
    by_role: dict[str, Any] = dict(roles)  # paths by parameter, beside others of other types
    calibration = calibrate(bench, **by_role)
    say("calibrated")
    conversions = _conversions(calibration, steps, files)
    displacements = _displacements(bench, calibration, steps, conversions)
    say("converted")
    frequencies_hz = [line.frequency_hz for line in bench.lines]
    bounds = {at_hz: line_bound(simulated, steps, at_hz) for at_hz in frequencies_hz}
    return Rehearsal(
        seed=seed,
        calibration=calibration,
        comparisons=compare(calibration, simulated.truth, displacements, bounds),
        files=files,
        roles=roles,
        conversion=conversions["rising"],
    )


def check_rehearsal(bench: Bench, seed: int, lines_s: float) -> None:
    """Refuse what cannot be played or calibrated, before anything is recorded.

    Parameters
    ----------
    bench : Bench
        The bench to play.
    seed : int
        Seed of the truth.
    lines_s : float
        Duration of a lines recording [s].

    Raises
    ------
    MidfringeError
        What the bench lacks.
    """
    check_bench(bench)
    SimulatedBench(bench, seed).start(session_steps(bench, lines_s)[0].setup)


def _by_role(steps: list[Step], files: Mapping[str, Path]) -> dict[str, list[str]]:
    by_role: dict[str, list[str]] = {}
    for step in steps:
        by_role.setdefault(step.role.replace("-", "_"), []).append(str(files[step.name]))
    return by_role


def _conversions(
    calibration: Calibration, steps: list[Step], files: Mapping[str, Path]
) -> dict[str, ConvertedRecording]:
    """Return the first recording of each slope as displacement."""
    found: dict[str, ConvertedRecording] = {}
    for step in steps:
        slope = step.role.removeprefix("lines-")
        if slope != step.role and slope not in found:
            source = open_recording(str(files[step.name]))
            found[slope] = ConvertedRecording(
                source, "photodiode", calibration, "displacement", slope
            )
    return found


def _displacements(
    bench: Bench,
    calibration: Calibration,
    steps: list[Step],
    conversions: Mapping[str, ConvertedRecording],
) -> dict[float, tuple[float, Measured]]:
    """Return the first line's amplitude in the converted recordings, beside its true drive.

    What adds to the photodiode without motion has opposite signs on the two slopes: the mean
    amplitude is free of it to first order.
    """
    tone = next(step.setup.tones[0] for step in steps if step.role == "lines-rising")
    fitted = [_fit(conversions[slope], bench, calibration) for slope in ("rising", "falling")]
    correction = 1.0 / abs(Readout(bench).electronics.response(tone.frequency_hz))
    amplitude_m = correction * float(np.mean([abs(line.phasor) for line in fitted]))
    worth = [conversions[slope].judge() for slope in ("rising", "falling")]
    budget = Budget(
        [
            *(
                Contribution(
                    f"line fit, {slope}",
                    abs(line.phasor),
                    float(line.amplitude.u_magnitude),
                    correction / 2,
                    kind="A",
                    dof=line.dof,
                )
                for slope, line in zip(conversions, fitted, strict=True)
            ),
            Contribution("scale of the conversion", 1.0, worth[0].scale_u, amplitude_m),
            *(Contribution("power drift", 0.0, each.drift_u, amplitude_m / 2) for each in worth),
            Contribution(
                "readout response", 0.0, _response_u(bench, tone.frequency_hz), amplitude_m
            ),
        ],
        unit="m",
    )
    return {tone.frequency_hz: (tone.amplitude_v, budget.measured(amplitude_m))}


def _fit(conversion: ConvertedRecording, bench: Bench, calibration: Calibration) -> Line:
    """Return the first of the bench's lines, fitted in displacement beside the others."""
    offset = calibration.clock_offset
    scale = 1.0 if offset is None else 1.0 + float(offset.magnitude)
    fit = fit_lines_si(
        conversion.trace("displacement").values,
        conversion.rate_hz,
        [line.frequency_hz * scale for line in bench.lines],
        mains_hz=bench.magnitude("mains.frequency", 50.0),
        value_unit="m",
    )
    return fit.lines[0]


def _response_u(bench: Bench, frequency_hz: float) -> float:
    terms = Readout(bench).photodiode_terms(frequency_hz)
    return sqrt(sum((term.relative * term.u) ** 2 for term in terms))
