"""The envelope to count by: straight where that fits, else along the tops and bottoms."""

import numpy as np

from calibration.envelope import Envelope, constant_envelope, running_envelope
from calibration.scan import ScanFit
from calibration.swept_record import SweptRecord

__all__ = ["envelope_of"]


def envelope_of(
    record: SweptRecord, scan: ScanFit, extremes: tuple[float, float] | None
) -> tuple[Envelope, tuple[float, float]]:
    """Return the envelope to count by, and the least and greatest span along the record.

    Parameters
    ----------
    record : SweptRecord
        Ready for counting.
    scan : ScanFit
        Extremes that the record shows.
    extremes : tuple of float or None
        (low, high) where they are given.

    Returns
    -------
    tuple of (Envelope, tuple of float)
        In the record's unit.
    """
    count = len(record.values)
    if extremes is not None:
        straight = constant_envelope(count, *extremes)
    else:
        straight = constant_envelope(count, scan.low, scan.high, scan.drift)
    # swings over most of the range first: where a mirror shakes, small ones are no fringes
    for least_swing in (0.7, 0.15):
        running = running_envelope(record.values, record.noise, least_swing)
        if running is not None and _is_near(straight, running, record.noise):
            return straight, _range(running)
    if running is None:
        return straight, _range(straight)
    return running, _range(running)


def _is_near(straight: Envelope, running: Envelope, noise: float) -> bool:
    """Return whether tops and bottoms lie on a straight envelope."""
    far = np.maximum(np.abs(running.low - straight.low), np.abs(running.high - straight.high))
    limit = 0.06 * float(straight.half_span.mean()) + 5.0 * noise
    return float(np.quantile(far, 0.98)) < limit


def _range(envelope: Envelope) -> tuple[float, float]:
    """Return the least and greatest span along a record, outliers left out."""
    spans = np.quantile(2.0 * envelope.half_span, [0.02, 0.98])
    return float(spans[0]), float(spans[1])
