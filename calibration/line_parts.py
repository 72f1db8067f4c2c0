"""Line parts: sums over parts of a recording, for lines of a whole that was never in one place."""

from typing import TYPE_CHECKING, Any

from calibration.errors import CalibrationError
from calibration.line_phasors import LinePhasors, sum_lines
from calibration.line_plan import LinePlan
from calibration.line_record import settle_lines
from calibration.line_source import ArraySource
from calibration.lines import checked_frequencies, plain_samples

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from metro.units import Quantity

__all__ = ["accumulate_lines", "plan_lines"]


def plan_lines(
    samples: "Quantity | NDArray[Any]",
    rate: "Quantity | str",
    frequencies: "Sequence[Quantity | str]",
    drive: "Quantity | NDArray[Any] | None" = None,
    *,
    free: bool = False,
    start_index: int = 0,
) -> LinePlan:
    """Return how the lines of a recording are best summed: carriers, filters, blocks.

    Parameters
    ----------
    samples : Quantity or ndarray, shape (n,)
        The recording itself, or one of the same kind: the first minutes of a long one, say. NaN
        where samples are missing; bare numbers have the unit "1".
    rate : Quantity or str
        Sampling rate, such as ``"4 kHz"``.
    frequencies : sequence of Quantity or str
        The lines, such as ``["31.7 Hz", "87.1 Hz"]``.
    drive : Quantity or ndarray, shape (n,), optional
        The drive, sampled together with ``samples``.
    free : bool
        Fit the frequency of each line too.
    start_index : int
        Number of ``samples[0]`` counted from the recording's first sample.

    Returns
    -------
    LinePlan
        For :func:`calibration.accumulate_lines`.

    Raises
    ------
    MetroError
        If a value lacks its unit.
    CalibrationError
        If a line lies at or above half the rate, or too few samples are given.
    """
    from metro.units import si

    values, unit = plain_samples(samples)
    driven, drive_unit = (None, "1") if drive is None else plain_samples(drive)
    listed = [frequencies] if isinstance(frequencies, str) else list(frequencies)
    rate_hz = float(si(rate, "rate", "Hz", above=0.0))
    wanted = checked_frequencies(
        [float(si(f, "frequencies", "Hz", above=0.0)) for f in listed], rate_hz
    )
    source = ArraySource([values] if driven is None else [values, driven], rate_hz, start_index)
    return settle_lines(source, wanted, free=free, units=(unit, drive_unit)).plan


def accumulate_lines(
    samples: "Quantity | NDArray[Any]",
    plan: LinePlan,
    drive: "Quantity | NDArray[Any] | None" = None,
    *,
    start_index: int = 0,
) -> LinePhasors:
    """Sum a part of a recording; the sums of all parts merge to those of the whole.

    Parameters
    ----------
    samples : Quantity or ndarray, shape (n,)
        The part, of any length, NaN where samples are missing.
    plan : LinePlan
        From :func:`calibration.plan_lines`, the same for all parts.
    drive : Quantity or ndarray, shape (n,), optional
        The drive, where the plan has one.
    start_index : int
        Number of ``samples[0]`` counted from the recording's first sample.

    Returns
    -------
    LinePhasors
        ``a.merge(b, c)`` joins parts in any order, ``fit()`` gives the lines.

    Raises
    ------
    CalibrationError
        If there is nothing to sum, or the units or channels are not those of the plan.

    Notes
    -----
    With the plan of the recording itself, merged parts give what :func:`calibration.fit_lines` gives
    for the whole: amplitudes, phases, u, degrees of freedom and noise within 1e-12 of their value.

    Examples
    --------
    >>> plan = plan_lines(volts, "4 kHz", ["31.7 Hz"])  # doctest: +SKIP
    >>> first = accumulate_lines(volts[:5000], plan)  # doctest: +SKIP
    >>> rest = accumulate_lines(volts[5000:], plan, start_index=5000)  # doctest: +SKIP
    >>> first.merge(rest).fit().lines[0].amplitude  # doctest: +SKIP
    """
    values, unit = plain_samples(samples)
    driven, drive_unit = (None, "1") if drive is None else plain_samples(drive)
    if (plan.width == 2) != (driven is not None):
        raise CalibrationError(
            f"the plan is for {plan.width} channel(s): drive must be given where it was planned"
        )
    if unit != plan.units[0] or (driven is not None and drive_unit != plan.units[1]):
        raise CalibrationError(f"samples must be in {plan.units[0]} as planned, got {unit}")
    if not len(values):
        raise CalibrationError("a part must hold at least one sample, got 0")
    channels = [values] if driven is None else [values, driven]
    return sum_lines(ArraySource(channels, plan.rate_hz, start_index, is_whole=False), plan)
