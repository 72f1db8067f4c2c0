"""Spectrum: the amplitude spectral density of a recording of any size, and the lines that stand in it."""

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.line_source import RecordingSource
from calibration.welch import OVERLAP, WINDOW, WelchDensity, WelchSum
from metro.display import show
from metro.notebook import NotebookPage, maybe_figure

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from calibration.expected_noise import ExpectedNoise
    from firmware_bridge.gap import Gap
    from firmware_bridge.trace import Recording

__all__ = ["SpectralLine", "Spectrum", "find_spectrum"]

FloatArray = NDArray[np.float64]

_LONGEST = 1 << 16
_SHORTEST = 16
_FINE = 256  # samples: with fewer, lines cannot be told from what lies beside them
_WANTED_SEGMENTS = 16  # the u of a bin is then an eighth of it
_WELL_USED = 0.7
_LITTLE_USED = 0.5
_STANDS_OUT = 30.0  # power over the median beside it, where few segments are averaged
_BESIDE = 24  # bins on each side
_MOST_LINES = 12
_LOBE = 2  # bins: Hann's main lobe


@dataclass(frozen=True, slots=True)
class SpectralLine:
    """A line that stands out of the noise.

    Parameters
    ----------
    frequency_hz : float
        Where its power has its centre [Hz].
    amplitude : float
        Zero to peak, in the unit of the samples, from the power in its main lobe.
    """

    frequency_hz: float
    amplitude: float


@dataclass(frozen=True, eq=False, slots=True)
class Spectrum(NotebookPage):
    """An amplitude spectral density with what it is compared with.

    Parameters
    ----------
    unit : str
        Of the samples.
    welch : WelchDensity
        The density.
    segment : int
        Samples in a segment.
    lines : tuple of SpectralLine
        The strongest first.
    gaps : int
        Gaps in the stretch.
    over_range : int
        Over-range samples in it, left out.
    expected : ExpectedNoise or None
        The noise the bench should have, None where nothing is known.
    remarks : tuple of str
        What a reader should know.
    """

    unit: str
    welch: WelchDensity
    segment: int
    lines: tuple[SpectralLine, ...]
    gaps: int
    over_range: int
    expected: "ExpectedNoise | None" = None
    remarks: tuple[str, ...] = ()

    @property
    def used_fraction(self) -> float:
        """Share of the samples that lie in a segment."""
        return self.welch.used / self.welch.samples

    @property
    def ratio(self) -> FloatArray | None:
        """Measured over expected density, shape (n_bins,)."""
        return None if self.expected is None else self.welch.density / self.expected.density

    def to_numpy(self) -> FloatArray:
        """Return frequency [Hz], density and its standard uncertainty, shape (n_bins, 3)."""
        welch = self.welch
        u = np.broadcast_to(welch.density_u, welch.density.shape)
        return np.stack([welch.frequency_hz, welch.density, u], axis=-1)

    def notebook_tables(self) -> "list[tuple[Sequence[str], Iterable[Sequence[Any]]]]":
        """Return how the spectrum was made, and its strongest lines."""
        made = [
            ("window", f"{WINDOW}, {self.segment} samples, overlap {100 * OVERLAP:g} %"),
            ("noise bandwidth", f"{self.welch.noise_bandwidth_hz:.4g} Hz"),
            ("segments", self.welch.segments),
            ("used", f"{100 * self.used_fraction:.4g} %"),
        ]
        lines = [(f"{x.frequency_hz:.6g} Hz", show(x.amplitude, self.unit)) for x in self.lines]
        return [((), made), (("line", "amplitude"), lines)]

    def notebook_figure(self) -> Any:  # noqa: ANN401  # matplotlib's Figure or None
        """Return the density with what is expected."""
        from calibration.spectrum_plot import spectrum_figure

        return maybe_figure(lambda: spectrum_figure(self, "spectrum", "amplitude"))

    def to_dict(self) -> dict[str, Any]:
        """Return the spectrum as the JSON output has it."""
        unit, welch, expected = f"{self.unit}/Hz**0.5", self.welch, self.expected
        return {
            "frequency": {"value": welch.frequency_hz, "unit": "Hz"},
            "density": {"value": welch.density, "unit": unit, "u": welch.density_u},
            "window": WINDOW,
            "expected": expected
            and {"value": expected.density, "unit": unit, "sources": expected.sources},
            "ratio": None if self.ratio is None else {"value": self.ratio, "unit": "1"},
            "overlap": OVERLAP,
            "segment": self.segment,
            "segments": welch.segments,
            "averages": welch.averages,
            "noise_bandwidth": {"value": welch.noise_bandwidth_hz, "unit": "Hz", "u": 0.0},
            "used_fraction": self.used_fraction,
            "gaps": self.gaps,
            "over_range": self.over_range,
            "lines": [
                {
                    "frequency": {"value": line.frequency_hz, "unit": "Hz", "u": None},
                    "amplitude": {"value": line.amplitude, "unit": self.unit, "u": None},
                }
                for line in self.lines
            ],
            "remarks": list(self.remarks),
        }


def find_spectrum(
    recording: "Recording",
    channel: str,
    *,
    from_s: float | None = None,
    to_s: float | None = None,
    resolution_hz: float | None = None,
) -> Spectrum:
    """Return the amplitude spectral density of a channel, in bounded memory.

    Parameters
    ----------
    recording : Recording
        Opened; of volts, or converted as it is read.
    channel : str
        As :meth:`firmware_bridge.trace.Recording.find` takes it.
    from_s, to_s : float, optional
        The stretch [s].
    resolution_hz : float, optional
        Distance of the bins [Hz]; by default what leaves about sixteen segments, or fewer
        where a record is so short that those would resolve no line.

    Returns
    -------
    Spectrum
        Without what it is compared with.

    Raises
    ------
    CalibrationError
        If the stretch is too short for the resolution, or its gaps leave no whole segment.
    """
    position = recording.find(channel)
    source = RecordingSource(recording, [position], from_s, to_s)
    first, last = source.start, source.start + source.length
    gaps = [g for g in recording.gaps if g.index < last and g.index + g.length > first and g.length]
    segment = _segment(source, gaps, resolution_hz)
    total = WelchSum(segment, recording.rate_hz)
    for _, (values,) in source.chunks(1):
        total.add(values)
    welch = total.result()
    if not welch.segments:
        raise CalibrationError(
            f"no {segment} samples in a row are there and in range; give a coarser --resolution than "
            f"{recording.rate_hz / segment:.3g} Hz"
        )
    remarks = []
    if welch.used < _LITTLE_USED * welch.samples:
        remarks.append(
            f"only {100 * welch.used / welch.samples:.3g} % of the samples lie in a segment without "
            "a gap; a coarser --resolution uses more"
        )
    return Spectrum(
        recording.channels[position].unit,
        welch,
        segment,
        _lines(welch),
        len(gaps),
        source.over_range[0],
        remarks=tuple(remarks),
    )


def _segment(source: RecordingSource, gaps: "Sequence[Gap]", resolution_hz: float | None) -> int:
    """Return the length of a segment, even."""
    if resolution_hz is not None:
        wanted = 2 * round(0.5 * source.rate_hz / resolution_hz)
        if not _SHORTEST <= wanted <= source.length:
            raise CalibrationError(
                f"--resolution must lie between {source.rate_hz / source.length:.3g} Hz and "
                f"{source.rate_hz / _SHORTEST:.3g} Hz for this stretch, got {resolution_hz:.3g} Hz"
            )
        return wanted
    fine = min(_FINE, source.length // 2)  # few long segments of a short record
    most = max(_SHORTEST, min(_LONGEST, max(fine, 2 * source.length // _WANTED_SEGMENTS)))
    segment = int(1 << (most.bit_length() - 1))
    ends = [(g.index, g.index + g.length) for g in gaps]
    starts = np.array([source.start, *(end for _, end in ends)])
    stops = np.array([*(begin for begin, _ in ends), source.start + source.length])
    runs = np.maximum(stops - starts, 0)
    while segment > _SHORTEST:
        used = np.where(runs >= segment, runs // (segment // 2) * (segment // 2), 0).sum()
        if used >= _WELL_USED * runs.sum():
            break
        segment //= 2
    return segment


def _lines(welch: WelchDensity) -> tuple[SpectralLine, ...]:
    """Return what stands out of the noise beside it, the strongest first."""
    power = welch.power
    if len(power) < 4 * _BESIDE:
        return ()
    floor = _floor(power)
    # In noise a mean of K exponential deviates stays below 1 + 6/√K of its mean by far.
    least = min(_STANDS_OUT, 4.0 + 30.0 / np.sqrt(welch.averages))
    inner = power[1:-1]
    tops = 1 + np.flatnonzero(
        (inner > least * floor[1:-1]) & (inner >= power[:-2]) & (inner > power[2:])
    )
    tops = tops[tops > 2 * _LOBE]
    tops = tops[np.argsort(-power[tops])]
    chosen: list[int] = []
    for top in tops.tolist():
        if len(chosen) < _MOST_LINES and all(abs(top - other) > 2 * _LOBE for other in chosen):
            chosen.append(top)
    return tuple(_line(welch, floor, top) for top in chosen)


def _line(welch: WelchDensity, floor: FloatArray, top: int) -> SpectralLine:
    # After Parseval the lobe of a line of amplitude A holds the power A²/2.
    lobe = slice(top - _LOBE, min(top + _LOBE + 1, len(welch.power)))
    over = np.maximum(welch.power[lobe] - floor[lobe], 0.0)
    width = float(welch.frequency_hz[1])
    centre = float((welch.frequency_hz[lobe] * over).sum() / over.sum())
    return SpectralLine(centre, float(np.sqrt(2.0 * over.sum() * width)))


def _floor(power: FloatArray) -> FloatArray:
    """Return the median of the bins beside each, which lines do not move."""
    width = 2 * _BESIDE
    pieces = len(power) // width
    levels = np.median(power[: pieces * width].reshape(pieces, width), axis=1)
    centres = (np.arange(pieces) + 0.5) * width
    levels = np.maximum(levels, max(float(levels.max()) * 1e-30, np.finfo(float).tiny))
    return np.asarray(np.exp(np.interp(np.arange(len(power)), centres, np.log(levels))))
