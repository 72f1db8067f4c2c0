"""What many rehearsals show: whether the uncertainties cover, and how near they come to the bound."""

import re
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from calibration.comparison import Comparison
from calibration.trial_bench import NOT_MODELLED, TrialBench
from calibration.trials import Trial
from metro.output import table

__all__ = [
    "Coverage",
    "coverage_of",
    "coverage_table",
    "reasons_text",
    "trials_document",
    "trials_text",
]


@dataclass(frozen=True)
class Coverage:
    """How one quantity's uncertainty did over many seeds.

    Parameters
    ----------
    name : str
        The quantity.
    trials : int
        Number of comparisons.
    inside_95 : float
        Part of them with the truth inside the 95 % interval.
    mean, spread : float
        Mean and standard deviation of the normalised errors (measured − truth)/u.
    relative_u : float or None
        Median of u over the measured value; None for quantities around zero.
    efficiency : float or None
        Median of the least u that the noise allows over the u of the line fits; None for
        quantities that do not rest on a line's noise.
    """

    name: str
    trials: int
    inside_95: float
    mean: float
    spread: float
    relative_u: float | None
    efficiency: float | None = None

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "name": self.name,
            "trials": self.trials,
            "inside_95": self.inside_95,
            "mean": self.mean,
            "spread": self.spread,
            "relative_u": self.relative_u,
            "efficiency": self.efficiency,
        }


def coverage_of(trials: Sequence[Trial]) -> list[Coverage]:
    """Return the coverage of each quantity, and of all together as the last row.

    Parameters
    ----------
    trials : sequence of Trial
        Sessions that the program distrusts do not count.

    Returns
    -------
    list of Coverage
        Empty where no session is trusted.
    """
    by_name: dict[str, list[Comparison]] = {}
    for trial in trials:
        for comparison in trial.comparisons if trial.is_trusted else ():
            by_name.setdefault(comparison.name, []).append(comparison)
    rows = [_coverage(name, found) for name, found in by_name.items()]
    everything = [comparison for found in by_name.values() for comparison in found]
    return [*rows, _coverage("all", everything)] if everything else []


def _coverage(name: str, found: Sequence[Comparison]) -> Coverage:
    errors = np.array([comparison.normalised_error for comparison in found])
    sizes = np.array([abs(c.truth) for c in found])
    around_zero = name == "all" or "phase" in name or "clock" in name
    sizes = np.where(sizes > 0, sizes, 1.0)
    relative = [float(c.measured.u_magnitude) / size for c, size in zip(found, sizes, strict=True)]
    near = [c.efficiency for c in found if c.efficiency is not None]
    return Coverage(
        name=name,
        trials=len(found),
        inside_95=float(np.mean([comparison.inside_95 for comparison in found])),
        mean=float(errors.mean()),
        spread=float(errors.std(ddof=1)) if len(found) > 1 else 0.0,
        relative_u=None if around_zero else float(np.median(relative)),
        efficiency=float(np.median(near)) if near and name != "all" else None,
    )


def coverage_table(rows: Sequence[Coverage]) -> str:
    """Return the coverage as a table for people."""
    lines = [
        [
            row.name,
            row.trials,
            f"{100 * row.inside_95:.1f} %",
            f"{row.mean:+.2f}",
            f"{row.spread:.2f}",
            "" if row.relative_u is None else f"{100 * row.relative_u:.3f} %",
            "" if row.efficiency is None else f"{row.efficiency:.2f}",
        ]
        for row in rows
    ]
    header = ["quantity", "comparisons", "inside 95 %", "mean", "spread", "median u", "bound/u"]
    return table(lines, header=header)


def reasons_text(trials: Sequence[Trial]) -> str:
    """Return how many sessions the program distrusts and why, in one line a reason.

    Parameters
    ----------
    trials : sequence of Trial
        All sessions on one bench.

    Returns
    -------
    str
        The count, then each reason with its numbers left out and how many sessions gave it.
    """
    doubted = [trial for trial in trials if not trial.is_trusted]
    count = f"{len(doubted)} of {len(trials)} sessions are distrusted"
    if not doubted:
        return count
    found = Counter(text for trial in doubted for text in {_plain(r) for r in trial.reasons})
    shown = [f"  {number:4d}  {text}" for text, number in found.most_common(_SHOWN_REASONS)]
    seeds = ", ".join(str(trial.seed) for trial in doubted[:_SHOWN_SEEDS])
    more = ", …" if len(doubted) > _SHOWN_SEEDS else ""
    return "\n".join([f"{count} and left out (seeds {seeds}{more}):", *shown])


_SHOWN_REASONS, _SHOWN_SEEDS = 8, 10


def _plain(reason: str) -> str:
    """Return a reason without its numbers, so that alike ones count together."""
    return re.sub(r"\d[\d.e+-]*", "#", reason)


def trials_text(kind: TrialBench, trials: Sequence[Trial]) -> str:
    """Return what the sessions on one bench showed, for people."""
    rows = coverage_of(trials)
    parts = [f"{kind.name}: {kind.text}", coverage_table(rows) if rows else ""]
    return "\n".join([part for part in parts if part] + [reasons_text(trials)])


def trials_document(played: Mapping[str, Sequence[Trial]]) -> dict[str, Any]:
    """Return what the sessions on each bench showed, in JSON form.

    Parameters
    ----------
    played : mapping of str to sequence of Trial
        By the bench's name.

    Returns
    -------
    dict
        ``truth``, ``measured`` and ``inside_95`` of the first bench session by session,
        ``coverage`` of its quantities, ``benches`` with coverage and distrusted sessions of each,
        ``not_modelled``.
    """
    first = next(iter(played.values()))
    sessions = [trial.comparisons for trial in first]
    return {
        "truth": [{c.name: c.truth_dict() for c in session} for session in sessions],
        "measured": [{c.name: c.measured for c in session} for session in sessions],
        "inside_95": [{c.name: c.inside_95 for c in session} for session in sessions],
        "files": [],
        "coverage": [row.to_dict() for row in coverage_of(first)],
        "benches": {
            name: {
                "coverage": [row.to_dict() for row in coverage_of(trials)],
                "distrusted": {str(t.seed): t.reasons for t in trials if not t.is_trusted},
            }
            for name, trials in played.items()
        },
        "not_modelled": list(NOT_MODELLED),
    }
