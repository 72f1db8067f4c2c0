"""The noise of a bench over frequency, drawn."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.errors import MetroError
from metro.extras import require
from metro.sensitivity import Sensitivity, displacement_noise

if TYPE_CHECKING:
    from collections.abc import Sequence

    from metro.chain import Chain

__all__ = ["noise_figure", "noise_frequencies"]

_POINTS = 121
_LOWEST_HZ = 1.0
_HIGHEST_HZ = 1e5  # where no sampling rate says otherwise


def noise_frequencies(chain: Chain) -> list[float]:
    """Return the frequencies of a noise plot, evenly spread over the decades.

    Parameters
    ----------
    chain : Chain
        For the sampling rate; above half of it nothing is seen.

    Returns
    -------
    list of float
        Frequencies [Hz].
    """
    highest = 0.5 * chain.bench.magnitude("adc.rate", 2.0 * _HIGHEST_HZ)
    lowest = min(_LOWEST_HZ, 1e-3 * highest)
    step = (highest / lowest) ** (1.0 / (_POINTS - 1))
    return [lowest * step**i for i in range(_POINTS)]


def noise_figure(chain: Chain) -> Any:  # noqa: ANN401  # matplotlib's Figure
    """Return a figure of each noise source as displacement density.

    Parameters
    ----------
    chain : Chain
        The signal chain at its working point.

    Returns
    -------
    matplotlib.figure.Figure
        Sources that the bench determines, and their total.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    MetroError
        If no noise source is known: there is nothing to draw.
    """
    figures = require("matplotlib.figure", "bench", "--plot")
    frequencies = noise_frequencies(chain)
    noises = [displacement_noise(chain, f) for f in frequencies]
    if not all(noise.total for noise in noises):
        raise MetroError(
            f"--plot has nothing to draw, no noise is known; needed: {_advice(noises[0])}"
        )
    figure = figures.Figure(figsize=(7.5, 5.0), layout="constrained")
    axes = figure.add_subplot()
    for name in noises[0].densities:
        _draw(axes, frequencies, [n.densities[name] for n in noises], name.replace("_", " "), 1.2)
    _draw(axes, frequencies, [n.total for n in noises], "total", 3.0, color="black", zorder=1)
    axes.set(
        xlabel="frequency [Hz]",
        ylabel="displacement density [m/√Hz]",
    )
    figure.suptitle("Expected noise as differential displacement")
    axes.set_title(_missing(noises[0]), fontsize="small", alpha=0.7, wrap=True)
    axes.grid(visible=True, which="both", alpha=0.25)
    axes.set(xscale="log", yscale="log")
    figure.legend(loc="outside lower center", ncols=4, frameon=False)
    _strain_axis(axes, chain)
    return figure


def _draw(
    axes: Any,  # noqa: ANN401  # matplotlib's Axes
    frequencies: Sequence[float],
    densities: Sequence[float | None],
    label: str,
    width: float,
    **style: Any,  # noqa: ANN401  # of the line
) -> None:
    if all(densities):
        axes.plot(frequencies, densities, label=label, linewidth=width, **style)


def _strain_axis(axes: Any, chain: Chain) -> None:  # noqa: ANN401  # matplotlib's Axes
    """Add strain on the right, at low frequency, where the arm length is known."""
    if chain.bench.get("arms.length") is None:
        return
    length_m = chain.bench.magnitude("arms.length")
    right = axes.secondary_yaxis(
        "right", functions=(lambda x: x / length_m, lambda h: h * length_m)
    )
    right.set_ylabel("strain density [1/√Hz]")


def _advice(noise: Sensitivity) -> str:
    """Return what to give for one source to be known, in one line."""
    return " ".join(next(iter(noise.missing.values()), "every source is given as 0").split())


def _missing(noise: Sensitivity) -> str:
    """Return what no curve is there for; it stands above the axes, where it meets no curve."""
    names = ", ".join(name.replace("_", " ") for name in noise.missing)
    return f"not given: {names}" if names else ""
