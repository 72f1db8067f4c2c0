"""What missing samples say against a recording, in one line."""

from collections.abc import Sequence

from firmware_bridge.gap import Gap

__all__ = ["counted", "gap_reason"]


def counted(count: int, noun: str) -> str:
    """Return a number with its noun, in the singular where there is one.

    Parameters
    ----------
    count : int
        How many.
    noun : str
        Of what, in the singular; its plural ends in s.

    Returns
    -------
    str
        Such as "1 gap" and "2 gaps".
    """
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def gap_reason(gaps: Sequence[Gap], samples: int) -> str:
    """Return what the gaps say against a recording.

    Parameters
    ----------
    gaps : sequence of Gap
        At least one.
    samples : int
        Length of the recording, gaps included.

    Returns
    -------
    str
        Such as "1 gap, 50 of 60000 samples missing (0.083%)".
    """
    lost = sum(gap.length for gap in gaps)
    return (
        f"{counted(len(gaps), 'gap')}, {lost} of {samples} samples missing ({lost / samples:.3%})"
    )
