"""Contradictions between a bench file and recordings: the converter's step, its rate, the drive.

A recording keeps the volts of a count and the rate as the board announced them; the bench file states
bits, range and rate of the converter and the limit of the drive. Where both are known they must agree.
"""

from collections import defaultdict
from collections.abc import Iterable, Sequence
from pathlib import Path

import numpy as np

from calibration.session import RoleRecord
from metro.bench import Bench
from metro.display import show
from metro.drive import terminal_factor
from metro.kernel.photodiode import step_v

__all__ = ["contradiction_cautions", "remark_cautions", "step_contradiction", "step_reasons"]

STEP_SHARE = (
    0.01  # relative: more than a maker's tolerance of a converter's gain, less than one bit
)
RATE_SHARE = 1e-3  # relative: more than any crystal is off
LIMIT_SHARE = 0.05  # of the limit: the noise of the drive's reading and the divider's tolerance


def step_contradiction(bench: Bench, recorded_v: float) -> str | None:
    """Return how a recorded step contradicts the converter that a bench states.

    Parameters
    ----------
    bench : Bench
        ``adc.bits``, ``adc.range`` and the u of ``adc.reference``, where known.
    recorded_v : float
        Volts of a count, as recorded; > 0.

    Returns
    -------
    str or None
        Both steps, in words; None where they agree or the converter is not stated.
    """
    if bench.get("adc.bits") is None or bench.get("adc.range") is None:
        return None
    range_v, bits = bench.magnitude("adc.range"), bench.magnitude("adc.bits")
    stated_v = step_v(range_v, bits)
    if abs(recorded_v / stated_v - 1.0) <= max(STEP_SHARE, 4.0 * bench.u("adc.reference")):
        return None
    return (
        f"a count is {show(recorded_v, 'V', 4)} in the recording, and {show(stated_v, 'V', 4)} by the "
        f"stated adc.range {show(range_v, 'V', 4)} and adc.bits {bits:g}"
    )


def step_reasons(bench: Bench, records: Iterable[RoleRecord]) -> list[str]:
    """Return the recordings whose step contradicts the bench, all of one step in one line.

    Parameters
    ----------
    bench : Bench
        States the converter.
    records : iterable of RoleRecord
        A session.

    Returns
    -------
    list of str
        Reasons for distrust.
    """
    said = [
        (step_contradiction(bench, record.step_v), record)
        for record in records
        if record.step_v is not None
    ]
    return _grouped([(text, record) for text, record in said if text is not None])


def contradiction_cautions(bench: Bench, records: Sequence[RoleRecord]) -> list[str]:
    """Return where rate or drive of the recordings are not as the bench states.

    Parameters
    ----------
    bench : Bench
        ``adc.rate`` and ``actuator.drive_limit``, where known.
    records : sequence of RoleRecord
        A session.

    Returns
    -------
    list of str
        Cautions that name both values.
    """
    said = [
        (text, record)
        for record in records
        for text in (_rate(bench, record), _drive(bench, record))
        if text is not None
    ]
    return _grouped(said)


def remark_cautions(records: Sequence[RoleRecord]) -> list[str]:
    """Return what the readers of the recordings remarked, each remark once with its files.

    Parameters
    ----------
    records : sequence of RoleRecord
        A session.

    Returns
    -------
    list of str
        Such as that a recording was cut.
    """
    return _grouped([(text, record) for record in records for text in record.remarks])


def _rate(bench: Bench, record: RoleRecord) -> str | None:
    stated_hz, recorded_hz = bench.magnitude("adc.rate", 0.0), record.photodiode.rate_hz
    if not stated_hz:
        return None
    if abs(recorded_hz / stated_hz - 1.0) <= max(RATE_SHARE, 4.0 * bench.u("adc.clock")):
        return None
    return (
        f"the rate is {show(recorded_hz, 'Hz', 6)} in the recording, and adc.rate is stated as "
        f"{show(stated_hz, 'Hz', 6)}"
    )


def _drive(bench: Bench, record: RoleRecord) -> str | None:
    limit_v = bench.magnitude("actuator.drive_limit", 0.0)
    if not limit_v or record.drive is None or not np.isfinite(record.drive.values).any():
        return None
    factor = abs(terminal_factor(bench, recorded=True))
    largest_v = factor * float(np.nanmax(np.abs(record.drive.values)))
    if largest_v <= (1.0 + LIMIT_SHARE) * limit_v:
        return None
    return (
        f"the drive reached {show(largest_v, 'V', 3)} at the actuator, beyond actuator.drive_limit "
        f"{show(limit_v, 'V', 3)}"
    )


def _grouped(said: Sequence[tuple[str, RoleRecord]]) -> list[str]:
    files: dict[str, list[str]] = defaultdict(list)
    for text, record in said:
        files[text].append(Path(record.path).name)
    return [f"{', '.join(dict.fromkeys(names))}: {text}" for text, names in files.items()]
