"""What was lost on the way: gaps and over-range, counted since the page's session began."""

from dataclasses import dataclass

__all__ = ["Losses"]


@dataclass(slots=True)
class Losses:
    """Gaps and over-range samples.

    Parameters
    ----------
    gaps, missing : int
        Number of gaps and of samples missing in them.
    over_range : int
        Samples beyond the converter's range.
    gap_at_s, over_at_s : float or None
        Stream time of the last of each [s], None while there was none.
    """

    gaps: int = 0
    missing: int = 0
    over_range: int = 0
    gap_at_s: float | None = None
    over_at_s: float | None = None

    def lose(self, samples: int, at_s: float) -> None:
        """Count a gap.

        Parameters
        ----------
        samples : int
            Its length.
        at_s : float
            Stream time of its first sample [s].
        """
        self.gaps += 1
        self.missing += samples
        self.gap_at_s = at_s

    def exceed(self, samples: int, at_s: float) -> None:
        """Count over-range samples, if there are any, seen at a stream time [s]."""
        if samples:
            self.over_range += samples
            self.over_at_s = at_s

    def document(self, now_s: float) -> dict[str, float | int | None]:
        """Return the counts, and how long ago the last of each was."""
        return {
            "gaps": self.gaps,
            "missing": self.missing,
            "over_range": self.over_range,
            "gap_ago_s": None if self.gap_at_s is None else max(0.0, now_s - self.gap_at_s),
            "over_ago_s": None if self.over_at_s is None else max(0.0, now_s - self.over_at_s),
        }
