"""One self-contained HTML page: it loads nothing, and prints on A4 and letter."""

from __future__ import annotations

from base64 import b64encode
from dataclasses import dataclass, field
from html import escape
from io import BytesIO
from typing import TYPE_CHECKING, Any

from metro.notebook import html_table

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

__all__ = ["HtmlPage", "bullets", "note", "paragraph", "picture", "table"]

# The policy forbids the browser to load anything: what stands in the page is all there is.
_POLICY = "default-src 'none'; img-src data:; style-src 'unsafe-inline'"

_STYLE = """
:root { color-scheme: light; }
body { font: 15px/1.45 system-ui, sans-serif; color: #111; background: #fff;
  max-width: 180mm; margin: 8mm auto; padding: 0 6mm; }
h1 { font-size: 1.6em; margin: 0 0 .2em; } h2 { font-size: 1.2em; margin: 1.6em 0 .4em;
  border-bottom: 2px solid #0072b2; padding-bottom: .1em; break-after: avoid; }
h3 { font-size: 1em; margin: 1.1em 0 .3em; break-after: avoid; }
table { border-collapse: collapse; margin: .4em 0 .8em; width: 100%; font-size: .88em;
  font-variant-numeric: tabular-nums; }
th, td { text-align: left; padding: .22em .6em .22em 0; border-bottom: 1px solid #ccc;
  vertical-align: top; }
td:not(:first-child):not(:last-child) { white-space: nowrap; }
.long td:last-child { overflow-wrap: anywhere; }
th { border-bottom: 1.5px solid #111; font-weight: 600; }
tr, figure { break-inside: avoid; } tbody tr:nth-child(-n+2) { break-after: avoid; } thead { display: table-header-group; }
figure { margin: .6em 0 1em; } figure img { width: 100%; height: auto; }
figcaption { font-size: .88em; color: #333; }
p { margin: .4em 0; } ul { margin: .3em 0 .8em; padding-left: 1.2em; } li { margin: .15em 0; }
.note { border-left: 5px solid #0072b2; background: #eef5fa; padding: .5em .8em; margin: .8em 0; }
.warn { border-left-color: #d55e00; background: #fdf1ea; }
.sub { color: #444; margin: 0 0 1em; }
@page { margin: 14mm 13mm; }
@media print { body { max-width: none; margin: 0; padding: 0; font-size: 10.5pt; }
  .note { print-color-adjust: exact; -webkit-print-color-adjust: exact; } }
@media (max-width: 640px) { body { padding: 0 3mm; } table { font-size: .78em; } }
"""


@dataclass
class HtmlPage:
    """A page of headed sections, each of blocks of HTML.

    Parameters
    ----------
    title : str
        Heading and name of the page.
    subtitle : str
        One line beneath it.
    blocks : list of str
        HTML, in order.
    """

    title: str
    subtitle: str = ""
    blocks: list[str] = field(default_factory=list)

    def add(self, *blocks: str) -> None:
        """Add blocks before the next section; empty ones are left out.

        Parameters
        ----------
        *blocks : str
            HTML.
        """
        self.blocks += [block for block in blocks if block]

    def section(self, heading: str, *blocks: str) -> None:
        """Add a headed section; one without any content is left out.

        Parameters
        ----------
        heading : str
            Plain text.
        *blocks : str
            HTML; empty ones are left out.
        """
        if any(blocks):
            self.add(f"<h2>{escape(heading)}</h2>", *blocks)

    def render(self) -> str:
        """Return the whole document.

        Returns
        -------
        str
            HTML 5, UTF-8.
        """
        head = (
            f'<meta charset="utf-8"><meta http-equiv="Content-Security-Policy" content="{_POLICY}">'
            '<meta name="viewport" content="width=device-width, initial-scale=1">'
            f"<title>{escape(self.title)}</title><style>{_STYLE}</style>"
        )
        top = f'<h1>{escape(self.title)}</h1><p class="sub">{escape(self.subtitle)}</p>'
        body = "\n".join([top, *self.blocks])
        return f'<!DOCTYPE html>\n<html lang="en"><head>{head}</head>\n<body>\n{body}\n</body></html>\n'


def paragraph(text: str) -> str:
    """Return a paragraph of plain text; nothing for an empty one."""
    return f"<p>{escape(text)}</p>" if text else ""


def note(text: str, *, warn: bool = False) -> str:
    """Return a note that stands out, in the colour of a warning where asked."""
    return f'<p class="note{" warn" if warn else ""}">{escape(text)}</p>'


def bullets(texts: Iterable[str], heading: str = "") -> str:
    """Return a list of plain texts under a small heading; nothing for an empty list."""
    items = "".join(f"<li>{escape(text)}</li>" for text in texts)
    head = f"<h3>{escape(heading)}</h3>" if heading else ""
    return f"{head}<ul>{items}</ul>" if items else ""


def table(
    rows: Sequence[Sequence[Any]],
    header: Sequence[str],
    heading: str = "",
    *,
    long_last: bool = False,
) -> str:
    """Return a table under a small heading; nothing without rows.

    Parameters
    ----------
    rows : sequence of sequences
        Cells, as :func:`metro.output.table` takes them.
    header : sequence of str
        Names of the columns.
    heading : str
        Plain text.
    long_last : bool
        Whether the last column may be broken anywhere, such as a hash.

    Returns
    -------
    str
        HTML.
    """
    if not rows:
        return ""
    head = f"<h3>{escape(heading)}</h3>" if heading else ""
    inside = head + html_table(rows, header, style="")
    return f'<div class="long">{inside}</div>' if long_last else inside


def picture(figure: Any, caption: str) -> str:  # noqa: ANN401  # matplotlib's Figure
    """Return a figure as a drawing within the page, with its caption.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        What to show; long curves in it may be rasterised.
    caption : str
        What it shows, also for those who do not see it.

    Returns
    -------
    str
        HTML.
    """
    drawing = BytesIO()
    figure.savefig(drawing, format="svg", dpi=200, metadata={"Date": None})
    inside = b64encode(drawing.getvalue()).decode()
    return (
        f'<figure><img alt="{escape(caption)}" src="data:image/svg+xml;base64,{inside}">'
        f"<figcaption>{escape(caption)}</figcaption></figure>"
    )
