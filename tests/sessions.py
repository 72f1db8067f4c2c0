"""Sessions on the simulated bench for tests."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np

import firmware_bridge.simulated as simulated
from calibration.analysis import calibrate
from calibration.record import Calibration
from calibration.rehearsal_script import Step, session_steps
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.playing import record_in_memory
from firmware_bridge.simulated.setup import Drift, Setup, Tone
from metro.bench import Bench, load_bench
from metro.measured import Measured

__all__ = ["built_in_bench", "calibrated", "free_session", "play", "spread", "stated"]

BENCH_FILE = Path(simulated.__file__).with_name("bench.toml")


def built_in_bench() -> Bench:
    """Return the bench that ``midfringe rehearse`` plays."""
    return load_bench(BENCH_FILE)


def stated(bench: Bench, **u: float) -> Bench:
    """Return the bench with other standard uncertainties; ``laser__wavelength=…`` names a key."""
    changed = {}
    for name, value in u.items():
        key = name.replace("__", ".")
        entry = bench.get(key)
        changed[key] = Measured.of(0.0 if entry is None else entry.magnitude, _unit(entry), value)
    return bench.replace(changed)


def _unit(entry) -> str:
    return "1" if entry is None else entry.unit


def play(
    bench: Bench,
    seed: int,
    folder: Path,
    *,
    lines_s: float = 8.0,
    keep: Callable[[Step], bool] = lambda _step: True,
    lean_rad: float = 0.0,
) -> tuple[SimulatedBench, dict[str, list[str]]]:
    """Play a session in memory and return the bench with its truth, and the files by role."""
    simulated_bench = SimulatedBench(bench, seed)
    steps = [step for step in session_steps(bench, lines_s) if keep(step)]
    recordings = [(replace(step.setup, lean_rad=lean_rad), folder / step.file) for step in steps]
    files: dict[str, list[str]] = {}
    for step, path in zip(steps, record_in_memory(simulated_bench, recordings), strict=True):
        files.setdefault(step.role.replace("-", "_"), []).append(str(path))
    return simulated_bench, files


def free_session(
    bench: Bench,
    seed: int,
    folder: Path,
    *,
    lines_s: float = 8.0,
    names: tuple[str, ...] = ("01", "05", "06", "07", "09"),
) -> tuple[SimulatedBench, dict[str, list[str]], tuple[Tone, ...]]:
    """Play steps of a session and the lines on a bench that drifts over fringes; return the tones too."""
    simulated_bench = SimulatedBench(bench, seed)
    rng = np.random.default_rng([seed, 1])
    drift = Drift(
        float(rng.uniform(-250e-9, 250e-9)),
        float(rng.uniform(100e-9, 300e-9)),
        float(rng.uniform(4.0, 12.0)),
    )
    steps = session_steps(bench, lines_s)
    tones = next(step.setup.tones for step in steps if step.role == "lines-rising")
    steps = [step for step in steps if step.name[:2] in names]
    free = Setup(lines_s, tones=tones, drift=drift)
    steps.append(Step("20-free", "lines-free", free))
    folder.mkdir(exist_ok=True)
    recordings = [(step.setup, folder / step.file) for step in steps]
    files: dict[str, list[str]] = {}
    for step, path in zip(steps, record_in_memory(simulated_bench, recordings), strict=True):
        files.setdefault(step.role.replace("-", "_"), []).append(str(path))
    return simulated_bench, files, tones


def calibrated(
    bench: Bench, seed: int, folder: Path, **options
) -> tuple[SimulatedBench, Calibration]:
    """Play a session and calibrate it."""
    simulated_bench, files = play(bench, seed, folder, **options)
    return simulated_bench, calibrate(bench, **files)


def spread(values) -> float:
    """Return the root mean square of normalised errors."""
    return float(np.sqrt(np.mean(np.square(values))))
