"""A spectrum as a table: every bin for programs, a few bands for people."""

import numpy as np

from calibration.spectrum import Spectrum

__all__ = ["band_rows", "spectrum_csv"]

_HALF_BAND = 1.0 / 6.0  # octaves


def spectrum_csv(spectrum: Spectrum) -> str:
    """Return every bin as CSV: frequency, density, u and, where known, expected and ratio.

    Parameters
    ----------
    spectrum : Spectrum
        Measured.

    Returns
    -------
    str
        A line of names, a line of units, and the bins.
    """
    unit = f"{spectrum.unit}/Hz**0.5"
    names = ["frequency", "density", "u"]
    columns = [spectrum.welch.frequency_hz, spectrum.welch.density, spectrum.welch.density_u]
    units = ["Hz", unit, unit]
    if spectrum.expected is not None and spectrum.ratio is not None:
        names += ["expected", "ratio"]
        columns += [spectrum.expected.density, spectrum.ratio]
        units += [unit, "1"]
    rows = (",".join(map(repr, row)) for row in np.column_stack(columns).tolist())
    return "\n".join([",".join(names), ",".join(units), *rows]) + "\n"


def band_rows(spectrum: Spectrum) -> list[list[object]]:
    """Return the density at 1, 2, 5, 10 … Hz: medians of a third of an octave, which lines do not move.

    Parameters
    ----------
    spectrum : Spectrum
        Measured.

    Returns
    -------
    list of list
        Frequency and density and, where known, expected and ratio, as text.
    """
    from metro.display import show

    frequency, unit = spectrum.welch.frequency_hz, f"{spectrum.unit}/Hz**0.5"
    rows: list[list[object]] = []
    decades = range(int(np.floor(np.log10(frequency[1]))), int(np.log10(frequency[-1])) + 1)
    for centre in (step * 10.0**decade for decade in decades for step in (1.0, 2.0, 5.0)):
        octaves = np.abs(np.log2(frequency[1:] / centre))
        near = np.flatnonzero(octaves < _HALF_BAND) + 1
        if not len(near) or not frequency[1] <= centre <= frequency[-1]:
            continue
        row: list[object] = [show(centre, "Hz")]
        row.append(show(float(np.median(spectrum.welch.density[near])), unit, 3))
        if spectrum.expected is not None and spectrum.ratio is not None:
            row.append(show(float(np.median(spectrum.expected.density[near])), unit, 3))
            row.append(f"{float(np.median(spectrum.ratio[near])):.3g}")
        rows.append(row)
    return rows
