"""What is said of a calibration's cautions where it is only used: that there are some, in one line."""

from collections.abc import Sequence

__all__ = ["caution_lines"]


def caution_lines(
    cautions: Sequence[str], of_calibration: Sequence[str], *, is_verbose: bool
) -> list[str]:
    """Return cautions as a person is told them.

    Parameters
    ----------
    cautions : sequence of str
        All that hold.
    of_calibration : sequence of str
        Those that the calibration keeps: they were told in full when it was made.
    is_verbose : bool
        Tell them all again.

    Returns
    -------
    list of str
        One line each; of several of the calibration one line together, with the first of them.
    """
    kept = [caution for caution in cautions if caution in of_calibration]
    if is_verbose or len(kept) <= 1:
        return list(cautions)
    own = [caution for caution in cautions if caution not in of_calibration]
    others = f"and {len(kept) - 1} more (--verbose)"
    return [*own, f"of the calibration: {kept[0]}; {others}"]
