"""The actuator between the lines drawn: the fitted response, and what it leaves of the lines."""

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from calibration.actuator_entry import ActuatorEntry
from calibration.line_covariance import own_u
from calibration.response import ActuatorResponse

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = ["draw_residuals", "draw_response"]

BLUE, ORANGE, GREY = "#0072b2", "#d55e00", "#777777"  # as on the session's page
_K95 = 1.96


def draw_response(size_axes: "Axes", turn_axes: "Axes", response: ActuatorResponse) -> None:
    """Draw magnitude [nm/V], with its 95 % band, and phase [°] between the lines."""
    grid_hz = np.linspace(response.from_hz, response.to_hz, 400)
    values = response.at(grid_hz)
    size, half = 1e9 * np.abs(values), _K95 * response.u_at(grid_hz)[0]
    size_axes.plot(grid_hz, size, color=BLUE, linewidth=0.9)
    band = (size * (1 - half), size * (1 + half))
    size_axes.fill_between(grid_hz, *band, color=BLUE, alpha=0.15, linewidth=0)
    turn_axes.plot(grid_hz, np.degrees(np.angle(values)), color=ORANGE, linewidth=0.9)


def draw_residuals(
    axes: "Axes", entries: Sequence[ActuatorEntry], response: ActuatorResponse
) -> None:
    """Draw what the response leaves of the lines, with the part of u that is each line's own.

    Parameters
    ----------
    axes : Axes
        To draw on.
    entries : sequence of ActuatorEntry
        Those with a phase count.
    response : ActuatorResponse
        Fitted to them.
    """
    known = [(entry, entry.phase) for entry in entries if entry.phase is not None]
    at_hz = np.array([float(entry.frequency.magnitude) for entry, _ in known])
    size = np.array([float(entry.magnitude.magnitude) for entry, _ in known])
    turn = np.array([float(phase.magnitude) for _, phase in known])
    away = np.log(size * np.exp(1j * turn) / response.at(at_hz))
    own = np.array([own_u(entry.budget) for entry, _ in known]) / size
    own_turn = np.array([own_u(entry.phase_budget) for entry, _ in known])
    for side, values, u, colour, marker, name in (
        (0.995, away.real, own, BLUE, "o", "magnitude / %"),
        (1.005, away.imag, own_turn, ORANGE, "s", "phase / crad"),
    ):
        bars = 100 * _K95 * u
        axes.errorbar(
            side * at_hz, 100 * values, yerr=bars, fmt=marker, color=colour, capsize=4, label=name
        )
    axes.axhline(0, color=GREY, linewidth=0.8)
    axes.set_title(
        f"Lines minus response ({response.shape.text}): chi-square "
        f"{response.chi_square:.3g} for {response.dof} degrees of freedom",
        fontsize=10,
    )
    axes.set(
        xlabel="frequency / Hz",
        ylabel="residual (own u, 95 %)",
        xlim=(0, 1.1 * float(at_hz.max())),
    )
    axes.legend(fontsize=8)
    axes.grid(linewidth=0.3, alpha=0.6)
