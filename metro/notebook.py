"""Results that show themselves in a notebook: a table, and a picture where there is one."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

__all__ = ["NotebookPage", "html_picture", "html_table", "maybe_figure"]

_DPI = 90  # a notebook's column is some 900 pixels wide
_CELL = "padding:2px 10px;text-align:left;font-variant-numeric:tabular-nums"


class NotebookPage:
    """What a result inherits to be shown by a notebook as tables and a picture.

    A result gives :meth:`notebook_tables`, and :meth:`notebook_figure` where a picture says more.
    """

    __slots__ = ()

    def notebook_tables(self) -> list[tuple[Sequence[str], Iterable[Sequence[Any]]]]:
        """Return the tables: for each its header and its rows.

        Returns
        -------
        list of (sequence of str, iterable of sequences)
            Cells as :func:`metro.output.table` takes them.

        Raises
        ------
        NotImplementedError
            If the result does not say.
        """
        raise NotImplementedError

    def notebook_figure(self) -> Any:  # noqa: ANN401  # matplotlib's Figure or None
        """Return the picture, None where there is none or matplotlib is not installed.

        Returns
        -------
        matplotlib.figure.Figure or None
            Drawn anew at each call.
        """
        return None

    def _repr_html_(self) -> str:
        """Return the page as the notebook wants it.

        Returns
        -------
        str
            HTML that loads nothing from elsewhere.
        """
        tables = [html_table(rows, header) for header, rows in self.notebook_tables()]
        figure = self.notebook_figure()
        return "\n".join([*tables, *([] if figure is None else [html_picture(figure)])])


def maybe_figure(draw: Callable[[], Any]) -> Any:  # noqa: ANN401  # matplotlib's Figure or None
    """Return what a function draws, None where matplotlib is not installed.

    Parameters
    ----------
    draw : callable
        Returns a figure.

    Returns
    -------
    matplotlib.figure.Figure or None
        The figure.
    """
    from metro.extras import MissingExtraError

    try:
        return draw()
    except MissingExtraError:
        return None


def html_table(
    rows: Iterable[Sequence[Any]], header: Sequence[str] = (), style: str = _CELL
) -> str:
    """Return rows as an HTML table.

    Parameters
    ----------
    rows : iterable of sequences
        Cells, as :func:`metro.output.table` takes them.
    header : sequence of str
        Names of the columns.
    style : str
        CSS of each cell; empty where the page has a style sheet of its own.

    Returns
    -------
    str
        One ``<table>``; every text escaped.
    """
    from html import escape

    from metro.display import show_any

    styled = f' style="{style}"' if style else ""

    def line(cells: Sequence[Any], tag: str) -> str:
        inside = "".join(f"<{tag}{styled}>{escape(show_any(cell))}</{tag}>" for cell in cells)
        return f"<tr>{inside}</tr>"

    head = f"<thead>{line(header, 'th')}</thead>" if header else ""
    return f"<table>{head}<tbody>{''.join(line(row, 'td') for row in rows)}</tbody></table>"


def html_picture(figure: Any, text: str = "") -> str:  # noqa: ANN401  # matplotlib's Figure
    """Return a figure as a picture that stands in the page itself.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        What to show.
    text : str
        What the picture says, for those who do not see it.

    Returns
    -------
    str
        An ``<img>`` with the PNG inside.
    """
    from base64 import b64encode
    from html import escape
    from io import BytesIO

    picture = BytesIO()
    figure.savefig(picture, format="png", dpi=_DPI)
    inside = b64encode(picture.getvalue()).decode()
    return f'<img alt="{escape(text)}" src="data:image/png;base64,{inside}">'
