"""What a conversion is worth, in numbers for JSON and in words for people."""

from typing import Any

from calibration.convert import Conversion
from calibration.tracked_recording import TrackedConversion
from metro.display import show
from metro.output import table

__all__ = ["page", "plot_note", "uncertainty_of"]


def uncertainty_of(worth: Conversion) -> dict[str, dict[str, Any]]:
    """Return the parts of a conversion's standard uncertainty, each with value and unit.

    Parameters
    ----------
    worth : Conversion
        As judged.

    Returns
    -------
    dict
        ``systematic`` and ``random``; of a tracked bench also ``small_motion``, ``periodic``, ``carried``.
    """
    parts = {"systematic": (worth.relative_u, "1"), "random": (worth.noise, worth.unit)}
    if isinstance(worth, TrackedConversion):
        parts["small_motion"] = (worth.small_u, "1")
        parts["periodic"] = (worth.periodic_u, worth.unit)
        parts["carried"] = (worth.carried_noise, worth.unit)
    return {
        name: {"value": value, "unit": unit, "u": None} for name, (value, unit) in parts.items()
    }


def plot_note(uncertainty: dict[str, dict[str, Any]]) -> str:
    """Return what a plot says of the uncertainty.

    Parameters
    ----------
    uncertainty : dict
        From `uncertainty_of`.

    Returns
    -------
    str
        A few words.
    """
    common = f"u {_percent(uncertainty['systematic'])} common"
    if "periodic" not in uncertainty:
        return common
    return f"{common}, {_shown(uncertainty['periodic'])} in every fringe; extremes carried"


def page(document: dict[str, Any]) -> str:
    """Return the conversion as text.

    Parameters
    ----------
    document : dict
        What ``convert --json`` prints.

    Returns
    -------
    str
        A table, and what was assumed.
    """
    uncertainty = document["uncertainty"]
    is_tracked = "periodic" in uncertainty
    common = "systematic u, over many fringes" if is_tracked else "systematic u, all samples alike"
    rows: list[list[object]] = [
        ["file", document["file"]],
        ["samples", document["samples"]],
        ["gaps", document["gaps"]],
        ["quantity", document["quantity"]],
        [common, _percent(uncertainty["systematic"])],
        ["random, rms from sample to sample", _shown(uncertainty["random"])],
        ["used", f"{100 * float(document['used_fraction']):.4g} %"],
    ]
    if is_tracked:
        rows[5:5] = [
            ["systematic u, small motions", _percent(uncertainty["small_motion"])],
            ["u that comes again in every fringe", _shown(uncertainty["periodic"])],
        ]
        share = f"{100 * float(document['carried_fraction']):.3g} %"
        left_out = f"{_shown(uncertainty['carried'])} rms of faster motion left out"
        rows.append(["of it carried over extremes", f"{share}, {left_out}"])
    assumed = [f"assumed: {one}" for one in document.get("assumptions", ())]
    return "\n".join([table(rows), *assumed])


def _percent(quantity: dict[str, Any]) -> str:
    return f"{100 * float(quantity['value']):.2g} %"


def _shown(quantity: dict[str, Any]) -> str:
    return show(quantity["value"], quantity["unit"], 2)
