"""What a bench's arms, laser and photodiode amount to: trips, contrast, responsivity."""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.errors import MetroError
from metro.kernel import beam, cavity, photodiode

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["cavity_mirrors", "coherence", "contrast", "phase_trips", "responsivity"]


def phase_trips(bench: Bench) -> float:
    """Return how many round trips the phase of a slow displacement is worth.

    Parameters
    ----------
    bench : Bench
        What is known of the arms.

    Returns
    -------
    float
        Round trips of simple or folded arms, the phase gain of Fabry–Perot arms.

    Raises
    ------
    MetroError
        If the arms are said to be folded and Fabry–Perot at once, or the mirrors are in the wrong
        order.
    """
    trips = bench.magnitude("arms.round_trips", 1.0)
    if bench.get("arms.input_reflectance") is None:
        return trips
    if trips != 1.0:
        raise MetroError(
            f"arms.round_trips must be 1 where arms.input_reflectance makes a cavity, got {trips:g}"
        )
    try:
        return cavity.phase_gain(*cavity_mirrors(bench))
    except ValueError as error:
        raise MetroError(f"[arms] {error}") from None


def cavity_mirrors(bench: Bench) -> tuple[float, float]:
    """Return the power reflectances of Fabry–Perot arms.

    Parameters
    ----------
    bench : Bench
        With ``arms.input_reflectance``.

    Returns
    -------
    tuple of float
        Input and end mirror; a perfect end mirror where none is given.
    """
    return bench.magnitude("arms.input_reflectance"), bench.magnitude("arms.end_reflectance", 1.0)


def contrast(bench: Bench) -> float:
    """Return the contrast of a bench: given, or what the laser's coherence leaves.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    float
        Contrast; 1 where neither contrast nor linewidth and mismatch are given.
    """
    if bench.get("arms.contrast") is not None:
        return bench.magnitude("arms.contrast")
    return coherence(bench) or 1.0


def coherence(bench: Bench) -> float | None:
    """Return the contrast that the laser's linewidth leaves at the arms' mismatch.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    float or None
        0 … 1; None where linewidth or mismatch is not given.
    """
    if bench.get("laser.linewidth") is None or bench.get("arms.mismatch") is None:
        return None
    path_m = 2.0 * phase_trips(bench) * bench.magnitude("arms.mismatch")
    return beam.coherence(path_m, bench.magnitude("laser.linewidth"))


def responsivity(bench: Bench) -> float | None:
    """Return the responsivity of a bench's photodiode, given or from its quantum efficiency.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    float or None
        Responsivity [A/W].
    """
    given = bench.get("photodiode.responsivity")
    if given is not None:
        return float(given.magnitude)
    if bench.get("photodiode.quantum_efficiency") is None or bench.get("laser.wavelength") is None:
        return None
    return photodiode.responsivity_a_w(
        bench.magnitude("photodiode.quantum_efficiency"), bench.magnitude("laser.wavelength")
    )
