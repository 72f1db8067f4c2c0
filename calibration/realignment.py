"""Reproducibility after realignment: how far a coefficient moves when the beams are set up anew."""

from collections.abc import Sequence

import numpy as np

from calibration.actuator_entry import ActuatorEntry
from calibration.record import Calibration
from calibration.term import REALIGNMENT, Term
from metro.bench import Bench

__all__ = ["realignment_statement", "realignment_term"]

SAME_HZ = 1e-6  # relative: two lines of one frequency


def realignment_term(bench: Bench, entry: ActuatorEntry, repeats: Sequence[Calibration]) -> Term:
    """Return what realignment adds to a line's coefficient.

    Parameters
    ----------
    bench : Bench
        ``actuator.reproducibility``, where it is known beforehand.
    entry : ActuatorEntry
        The line in this session.
    repeats : sequence of Calibration
        Of the same bench after other alignments.

    Returns
    -------
    Term
        The scatter of all sessions, this one included, where there are others; else what the bench
        file states; else an entry without u that says it was not measured. The scatter holds the
        noise of each session too, so that it is rather too large.
    """
    values = [entry.magnitude.magnitude, *_others(entry, repeats)]
    if len(values) > 1:
        u = float(np.std(values, ddof=1) / np.mean(values))
        return Term(REALIGNMENT, None, "1", u, relative=1.0, kind="A", dof=len(values) - 1)
    if bench.get("actuator.reproducibility") is not None:
        u, kind = (
            bench.u("actuator.reproducibility"),
            bench.distribution("actuator.reproducibility"),
        )
        return Term(f"{REALIGNMENT} (stated)", 0.0, "1", u, relative=1.0, distribution=kind)
    return Term(f"{REALIGNMENT} (not measured)", None, "1", 0.0, relative=1.0)


def realignment_statement(bench: Bench, repeats: Sequence[Calibration]) -> str:
    """Return in a sentence where the reproducibility comes from."""
    if repeats:
        return f"{REALIGNMENT}: the scatter of this session and {len(repeats)} other"
    if bench.get("actuator.reproducibility") is not None:
        return f"{REALIGNMENT}: as the bench file states"
    return f"{REALIGNMENT} was not measured"


def _others(entry: ActuatorEntry, repeats: Sequence[Calibration]) -> list[float]:
    at_hz = float(entry.frequency.magnitude)
    return [
        float(other.magnitude.magnitude)
        for repeat in repeats
        for other in repeat.actuator
        if abs(float(other.frequency.magnitude) / at_hz - 1.0) < SAME_HZ
    ]
