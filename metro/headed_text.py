"""Texts under a heading, for a terminal: indented, long ones over several lines."""

import textwrap
from collections.abc import Iterable

__all__ = ["headed"]

_WIDTH = 118  # columns of a text; tables are as wide as they need


def headed(title: str, texts: Iterable[str]) -> str:
    """Return texts under a heading.

    Parameters
    ----------
    title : str
        The heading.
    texts : iterable of str
        One a line, or more lines where it is long.

    Returns
    -------
    str
        Empty where there is no text.
    """
    wrapped = [
        textwrap.fill(
            text,
            _WIDTH,
            initial_indent="  ",
            subsequent_indent="    ",
            break_long_words=False,
            break_on_hyphens=False,
        )
        for text in texts
    ]
    return "\n".join([title, *wrapped]) if wrapped else ""
