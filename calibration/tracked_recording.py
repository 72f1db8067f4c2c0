"""A free-running recording run backwards through a calibration: its phase tracked by a pilot line.

Beside the quantity stands a channel ``carried``: 0 where a sample was inverted between the fringe's
extremes, 1 where it lies at one and shows the slow course, the pilot and the calibration's lines only, NaN
where the phase is not known. All is done piece by piece, as it is read.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import pi

import numpy as np
from numpy.typing import NDArray

from calibration.channel_volts import channel_volts
from calibration.convert import QUANTITIES, Conversion, per_radian
from calibration.derived_recording import DerivedRecording
from calibration.kept_readout import CORNERS
from calibration.motion_sign import motion_sign
from calibration.own_extremes import own_extremes
from calibration.pilot import check_pilot
from calibration.pilot_drive import driven_pilot
from calibration.record import Calibration
from calibration.tracked_course import PIECE, TrackedCourse
from calibration.tracked_tally import TrackedTally
from calibration.tracking import DECLARED, tracking_assumptions, tracking_reasons
from firmware_bridge.channel import Channel
from firmware_bridge.span import Span
from firmware_bridge.trace import Recording, Trace

__all__ = ["CARRIED", "TrackedConversion", "TrackedRecording"]

FloatArray = NDArray[np.float64]

CARRIED = "carried"
_LEAST_SHARE = 0.5  # of the samples: below, most of the motion is not seen


@dataclass(frozen=True, eq=False)
class TrackedConversion(Conversion):
    """What a tracked recording in other units is worth.

    Parameters
    ----------
    quantity, unit : str
        As for `Conversion`, like the others up to ``cautions``.
    scale_u, drift_u, noise, used_fraction : float
        ``scale_u`` is that of a motion over many fringes.
    reasons, cautions : list of str
        Why it must not be trusted; what a user should know.
    small_u : float
        Relative standard uncertainty of a motion that is small against a fringe.
    periodic_u : float
        Standard uncertainty from the extremes, which comes again in every fringe, in ``unit``.
    carried_noise : float
        Rms of what carried samples leave out, in ``unit``.
    carried_fraction : float
        Part of the samples that is carried.
    assumptions : list of str
        What sign and whole fringes rest on.
    """

    small_u: float = 0.0
    periodic_u: float = 0.0
    carried_noise: float = 0.0
    carried_fraction: float = 0.0
    assumptions: list[str] = field(default_factory=list)


class TrackedRecording(DerivedRecording):
    """A free-running recording in other units, converted piece by piece as it is read.

    Parameters
    ----------
    source : Recording
        The recording; its channel is in the unit of the calibration's extremes.
    channel : str
        Name of the photodiode's channel, as `Recording.find` takes it.
    calibration : Calibration
        Extremes, wavelength, index, the sign of the motion, and for strain the arm length.
    pilot_hz : float
        The pilot [Hz].
    quantity : str
        ``"displacement"``, ``"strain"`` or ``"phase"``.
    drive : str, optional
        Name of the drive's channel: it sets the sign.
    from_s, to_s : float, optional
        The stretch [s] to track; outside nothing is known.
    own : bool
        Whether the extremes are the recording's own instead of the calibration's.
    piece : int
        Samples of a piece, about.

    Raises
    ------
    CalibrationError
        If the quantity has another name, the channel is not in volts, the pilot is not in the drive
        or nowhere seen, strain is asked for without an arm length, or the recording shows no extremes
        of its own.
    """

    def __init__(
        self,
        source: Recording,
        channel: str,
        calibration: Calibration,
        pilot_hz: float,
        quantity: str = "displacement",
        drive: str | None = None,
        from_s: float | None = None,
        to_s: float | None = None,
        *,
        own: bool = False,
        piece: int = PIECE,
    ) -> None:
        check_pilot(pilot_hz, source.rate_hz)
        self.quantity, self.calibration, self.own = quantity, calibration, own
        self._position = source.find(channel)
        self._per_radian = per_radian(calibration, quantity)
        self._volts = channel_volts(source, self._position, calibration)
        self._start, self._stop = source.span(from_s, to_s)
        super().__init__(source, [Channel(quantity, QUANTITIES[quantity]), Channel(CARRIED, "1")])
        span = self._start, self._stop
        found = own_extremes(source, self._position, self._volts, *span)
        self.extremes = found.mean(source.path) if own else calibration.extremes
        self._extremes_reasons = [] if own else found.reasons(calibration)
        seen_hz, self._phase_rad, self._said = self._sign(pilot_hz, drive)
        lines_hz = [float(entry.frequency.magnitude) for entry in calibration.actuator]
        self.course = TrackedCourse(
            self._cosine,
            span[1] - span[0],
            source.rate_hz,
            seen_hz,
            self._phase_rad,
            piece,
            [line_hz * seen_hz / pilot_hz for line_hz in lines_hz],
            in_board_time=self._phase_rad is not None,
        )

    def _sign(self, pilot_hz: float, drive: str | None) -> tuple[float, float | None, str]:
        """Return the pilot's frequency, its motion's phase at the first sample, and in words why."""
        sign = motion_sign(self.calibration, pilot_hz)
        if drive is None or sign is None:
            return pilot_hz, None, DECLARED
        position = self._source.find(drive)
        last = min(self._stop, self._start + PIECE)
        values = self._source.read([position], self._start, last).values[:, 0]
        channel = self._source.channels[position]
        trace = Trace(channel.name, channel.unit, np.ascontiguousarray(values), self.rate_hz)
        seen_hz, driven_rad = driven_pilot(trace, pilot_hz)
        return seen_hz, (driven_rad + sign.phase_rad) % (2.0 * pi), sign.said

    def _cosine(self, first: int, last: int) -> FloatArray:
        """Return samples of the stretch between −1 and 1, shape (last − first,)."""
        start = self._start
        values = self._source.read([self._position], start + first, start + last).values[:, 0]
        volts = self._volts.of(values)
        return np.asarray((volts - self.extremes.mid_v) / self.extremes.swing_v)

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return converted samples and whether they are carried; see `Recording.read`."""
        both = np.full((stop - start, 2), np.nan)
        first, last = max(start, self._start), min(stop, self._stop)
        if first < last:
            piece = self.course.read(first - self._start, last - self._start)
            own = slice(first - start, last - start)
            both[own, 0] = piece.phase_rad * self._per_radian
            both[own, 1] = np.where(piece.known, piece.carried, np.nan)
        over_range = self._source.read([self._position], start, stop).over_range
        return Span(np.ascontiguousarray(both[:, list(channels)]), over_range)

    def judge(self) -> TrackedConversion:
        """Return what the conversion is worth, from one pass over the stretch.

        Returns
        -------
        TrackedConversion
            Uncertainty, share converted, assumptions, reasons and cautions.
        """
        tally, course = TrackedTally(), self.course
        for number in range(course.pieces):
            tally.add(course.piece(number))
        calibration, size, drifts = self.calibration, abs(self._per_radian), not self.own
        known = tally.sums.converted / course.count
        reasons = [*self._extremes_reasons, *tracking_reasons(course, self._phase_rad)]
        if known < _LEAST_SHARE:
            reasons.append(f"the phase is known for {known:.0%} of the samples only")
        return TrackedConversion(
            quantity=self.quantity,
            unit=QUANTITIES[self.quantity],
            scale_u=tally.scale_u(calibration, self.quantity),
            drift_u=0.0,
            noise=tally.sums.noise(size),
            used_fraction=known,
            reasons=[*reasons, *calibration.reasons],
            cautions=self._cautions(),
            small_u=tally.small_u(calibration, self.extremes, self.quantity, drifts=drifts),
            periodic_u=tally.periodic_rad(calibration, self.extremes, drifts=drifts) * size,
            carried_noise=tally.fast_rad * size,
            carried_fraction=tally.carried / course.count,
            assumptions=tracking_assumptions(course, self._phase_rad, self._said),
        )

    def _cautions(self) -> list[str]:
        cautions = [self._volts.caution] if self._volts.caution else []
        if self.own:
            cautions.append("the fringe's extremes are the recording's own, not the calibration's")
        for name in CORNERS:
            corner = self.calibration.chain.get(name)
            if corner is not None:
                cautions.append(
                    f"the {name.replace('_', ' ')} at {float(corner.magnitude):g} Hz is not undone: "
                    "fast motion reads small"
                )
        return [*cautions, *self.calibration.cautions]
