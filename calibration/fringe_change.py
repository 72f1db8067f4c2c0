"""Change of a driven fringe within its record: amplitude and level that do not stay.

The fit holds one fringe to the whole record. Where light or alignment changed meanwhile, the residuals
follow the fringe with a weight that grows, or bends, along the record.
"""

import math

import numpy as np

from calibration.fringe_search import Found

__all__ = ["change_reasons"]

_MOST_AMPLITUDE = 0.03  # of the half span, from end to end
_MOST_LEVEL = 0.1
_MOST_LEFT = 0.02  # nothing is left where the extremes are fitted
_CLEAR = 6.0  # standard uncertainties of white noise


def _changes(found: Found) -> tuple[float, float, float]:
    """Return the clear changes of amplitude and of level, and what is clearly left of both throughout.

    As shares of the half span.
    """
    model, theta = found.model, found.theta
    offset, half_span = float(theta[0]), float(theta[1])
    length = max(float(model.length), 1.0)
    right, norm = np.zeros(6), np.zeros(6)
    power, count = 0.0, 0
    for start, stop in model.chunks():
        rest = model.residual(theta, start, stop)
        index = model.index[start:stop]
        good = np.isfinite(rest)
        rest, when = rest[good], index[good] / length - 0.5
        cosine = (model.values[start:stop][good] - rest - offset) / half_span
        bent = 6.0 * when**2 - 0.5  # from −0.5 in the middle to 1 at the ends
        one = np.ones_like(when)
        columns = np.stack([when * cosine, bent * cosine, when, bent, one, cosine])
        right += columns @ rest
        norm += np.sum(columns**2, axis=1)
        power, count = power + float(rest @ rest), count + len(rest)
    least = _CLEAR * math.sqrt(power / max(count, 1))
    norm = np.maximum(norm, 1e-300)
    share = np.where(np.abs(right) > least * np.sqrt(norm), np.abs(right) / norm, 0.0)
    share = share / abs(half_span)
    return float(share[:2].max()), float(share[2:4].max()), float(share[4:].max())


def change_reasons(found: Found) -> list[str]:
    """Return whether amplitude or level of the fringe changed within the record, or are not those given.

    Parameters
    ----------
    found : Found
        Finished fit.

    Returns
    -------
    list of str
        One line; empty where nothing was found.
    """
    amplitude, level, left = _changes(found)
    if left > _MOST_LEFT:
        return [
            (
                f"the given extremes disagree with the record: held fixed they leave {left:.1%} of the half "
                "span; give them with their uncertainty, or leave them out"
            )
        ]
    if amplitude < _MOST_AMPLITUDE and level < _MOST_LEVEL:
        return []
    what, share = ("amplitude", amplitude) if amplitude >= _MOST_AMPLITUDE else ("level", level)
    return [
        (
            f"the fringe's {what} changes within the record, by about {share:.0%} of the half span and more: "
            "light or alignment did not stay; low, high and depths hold for none of it"
        )
    ]
