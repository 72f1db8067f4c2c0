"""The report's budget: each cause's share at each line, drawn and in full."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calibration.desk import report_figures as figures
from calibration.desk.page import paragraph, picture, table
from metro.display import show

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.record import Calibration
    from metro.budget import Budget

__all__ = ["budget_section", "percent"]


def budget_section(calibration: Calibration) -> list[str]:
    """Return the budget's blocks: shares at all lines, a picture and two tables in full.

    Parameters
    ----------
    calibration : Calibration
        What is reported.

    Returns
    -------
    list of str
        HTML.
    """
    lines = calibration.actuator
    budgets = {show(float(e.frequency.magnitude), "Hz", 6): e.budget for e in lines}
    sizes = [float(entry.magnitude.magnitude) for entry in lines]
    first = next(iter(budgets))
    return [
        paragraph(
            "Relative standard uncertainty by cause, in per cent of the actuator's magnitude; "
            "causes common to several lines carry one sign for all of them."
        ),
        table(_shares(budgets, sizes), ("cause", *budgets)),
        picture(
            figures.budget_figure(lines[0].budget, sizes[0], f"Actuator at {first}"),
            f"Causes of the standard uncertainty of the actuator at {first}, largest first.",
        ),
        _full_table(lines[0].budget, f"Actuator at {first}, in full"),
        _full_table(calibration.readout_budget, "Readout slope, in full"),
    ]


def _shares(budgets: dict[str, Budget], sizes: Sequence[float]) -> list[tuple[str, ...]]:
    """Return one row a cause: its share of u at each line, the sum in quadrature last."""
    columns = [
        {c.name: c.effect / size for c in budget.contributions}
        for budget, size in zip(budgets.values(), sizes, strict=True)
    ]
    names = dict.fromkeys(name for column in columns for name in column)
    rows = [(name, *(percent(column.get(name)) for column in columns)) for name in names]
    sums = [
        percent(budget.combined()[0] / size)
        for budget, size in zip(budgets.values(), sizes, strict=True)
    ]
    return [*rows, ("combined, with correlations", *sums)]


def percent(share: float | None) -> str:
    """Return a share in per cent, without its sign; nothing where there is none."""
    return "" if share is None else f"{100 * abs(share):.3g} %"


def _full_table(budget: Budget, heading: str) -> str:
    rows = [
        (
            item.name,
            show(item.value, item.unit, 7),
            show(item.u, item.unit, 3),
            f"{item.sensitivity:.3g}",
            show(abs(item.effect), budget.unit, 3),
            f"{item.kind}, {item.distribution}",
            "∞" if item.dof == float("inf") else f"{item.dof:.3g}",
        )
        for item in budget.contributions
    ]
    header = ("cause", "value", "u", "sensitivity", "effect", "kind", "dof")
    return table(rows, header, heading)
