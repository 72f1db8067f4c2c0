"""Results in a notebook: escaped tables, pictures inside the page, plain values."""

import base64
import math
import re
from html.parser import HTMLParser

import numpy as np
import pytest

from metro.measured import Measured
from metro.notebook import NotebookPage, html_table


class Page(NotebookPage):
    def notebook_tables(self):
        return [(("name", "value"), [("<b>", Measured.of(3.52e-8, "m/V", 1e-10)), ("x", None)])]

    def notebook_figure(self):
        figure = pytest.importorskip("matplotlib.figure").Figure(figsize=(2, 1))
        figure.add_subplot().plot([0, 1], [1, 0])
        return figure


class Cells(HTMLParser):
    """The cells of a page's tables, as a browser would show them."""

    def __init__(self):
        super().__init__()
        self.texts = []

    def handle_data(self, data):
        self.texts.append(data)


def test_page_shows_the_table_escaped_and_the_picture_inside():
    page = Page()._repr_html_()
    cells = Cells()
    cells.feed(page)
    assert [t for t in cells.texts if t.strip()] == [
        "name", "value", "<b>", "35.2 nm/V, U = 0.2 nm/V (95 %)", "x", "unknown",
    ]  # fmt: skip
    picture = re.search(r'src="data:image/png;base64,([^"]+)"', page)
    assert base64.b64decode(picture[1]).startswith(b"\x89PNG")
    assert "http" not in page


def test_a_page_must_say_its_tables():
    with pytest.raises(NotImplementedError):
        NotebookPage()._repr_html_()


def test_a_table_without_a_header_has_none():
    assert "<thead>" not in html_table([(1.0,)])


def test_scalar_to_uncertainties_and_numpy():
    value = Measured.of(2.0, "V", 0.1)
    doubled = 2 * value.to_ufloat()
    assert (doubled.nominal_value, doubled.std_dev) == pytest.approx((4.0, 0.2))
    assert value.to_numpy() == pytest.approx([2.0, 0.1])
    assert value._repr_html_() == "2.0 V, U = 0.2 V (95 %)"


def test_array_to_uncertainties_and_numpy():
    values = Measured.of(np.array([1.0, 2.0]), "V", np.array([0.1, 0.2]))
    total = sum(values.to_ufloat())
    assert total.std_dev == pytest.approx(math.hypot(0.1, 0.2))
    assert values.to_numpy().tolist() == [[1.0, 0.1], [2.0, 0.2]]


def test_what_has_no_uncertainty_says_nan_in_numpy():
    assert math.isnan(Measured.of(1.0, "V").to_numpy()[1])
    assert math.isnan(Measured.of(1.0, "V").to_ufloat().std_dev)
