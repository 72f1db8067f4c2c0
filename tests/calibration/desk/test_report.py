"""The report: everything asked for stands in one page, which loads nothing from outside."""

import json
import re
import shutil
from html.parser import HTMLParser

import pytest

from calibration.record import load
from metro.commandline import run

pytest.importorskip("matplotlib")


class Reader(HTMLParser):
    """A page's texts and everything in it that a browser would load."""

    VOID = ("meta", "img", "br")

    def __init__(self):
        super().__init__()
        self.texts, self.loads, self.open, self.headings = [], [], [], []

    def handle_starttag(self, tag, attrs):
        if tag not in self.VOID:
            self.open.append(tag)
        self.loads += [v for k, v in attrs if k in ("src", "href", "data", "action", "srcset")]
        assert tag not in ("script", "iframe", "object", "embed", "link", "base", "form")

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if self.open and self.open[-1] == "h2":
            self.headings.append(data)
        if self.open and self.open[-1] != "style":
            self.texts.append(data)


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    folder = tmp_path_factory.mktemp("session")
    assert run(["rehearse", "--seed", "1", "--out", str(folder / "r"), "--quiet"]) in (0, 1)
    return folder / "r"


def report(session, out, *options):
    code = run(["report", str(session / "calibration.json"), "--out", str(out), *options])
    page = Reader()
    page.feed(out.read_text(encoding="utf-8"))
    assert page.open == []
    return code, page


def test_page_has_every_part_and_loads_nothing(session, tmp_path, capsys):
    code, page = report(session, tmp_path / "report.html")
    assert code == 0
    assert page.headings == [
        "Result", "Conditions", "Budget", "Routes and consistency", "Fringe, spectrum, response",
        "Conventions", "What rests on statements", "Cautions", "Files", "Versions",
    ]  # fmt: skip
    assert len(page.loads) == 5
    assert all(source.startswith("data:image/svg+xml;base64,") for source in page.loads)
    text = " ".join(page.texts)
    calibration = load(session / "calibration.json")
    for entry in calibration.actuator:
        value, _, u = str(entry.magnitude).partition(", U = ")
        assert value in text
        assert u.partition(" (")[0] in text
        assert all(item.name in text for item in entry.budget.contributions)
    for record in calibration.recordings:
        assert record["sha256"] in text
    assert "no certificate of an accredited laboratory" in text
    assert "laser safety officer" in text
    assert text.count("unchanged") == len(calibration.recordings)
    assert capsys.readouterr().out == f"report: {tmp_path / 'report.html'}\n"


def test_shares_of_the_budget_add_up_in_the_table(session, tmp_path):
    """Uncorrelated parts in quadrature make the combined row, to the three digits shown."""
    report(session, tmp_path / "r.html")
    html = (tmp_path / "r.html").read_text(encoding="utf-8")
    table = html[
        html.index("<th>cause</th>") : html.index("</table>", html.index("<th>cause</th>"))
    ]
    rows = [re.findall(r"<td>(.*?)</td>", row) for row in table.split("<tr>")[1:]]
    shares = [float(row[1].split()[0]) for row in rows if len(row) > 1 and row[1]]
    budget = load(session / "calibration.json").actuator[0].budget
    groups = {c.group for c in budget.contributions if c.group}
    assert len(shares) == len(budget.contributions) + 1
    if not groups:
        assert sum(s * s for s in shares[:-1]) ** 0.5 == pytest.approx(shares[-1], rel=0.01)


def test_a_changed_recording_is_told_and_not_drawn(session, tmp_path, capsys):
    copy = tmp_path / "copy"
    shutil.copytree(session, copy)
    with (copy / "06-lines-rising.mfr").open("ab") as file:
        file.write(b"x")
    (copy / "05-scan.mfr").unlink()
    (copy / "09-scan.mfr").unlink()
    code, page = report(copy, tmp_path / "r.html")
    assert code == 0
    told = capsys.readouterr().err.splitlines()
    assert "recording lines-rising: 06-lines-rising.mfr is changed since" in told
    assert "recording scan: 05-scan.mfr is not found" in told
    text = " ".join(page.texts)
    assert "06-lines-rising.mfr (lines-rising) is changed since: nothing is drawn from it" in text
    assert not any("A scan over whole fringes" in t for t in page.texts)


def test_what_must_not_be_trusted_says_so_first(session, tmp_path, capsys):
    document = json.loads((session / "calibration.json").read_text())
    document["reasons"] = ["the <scan> & lines disagree"]
    path = tmp_path / "cal.json"
    path.write_text(json.dumps(document))
    out = tmp_path / "r.html"
    assert run(["report", str(path), "--out", str(out)]) == 1
    assert "must not be trusted: the &lt;scan&gt; &amp; lines disagree" in out.read_text()
    assert "the <scan> & lines disagree" in capsys.readouterr().err


def test_json_names_the_file(session, tmp_path, capsys):
    out = tmp_path / "r.html"
    code = run(["report", str(session / "calibration.json"), "--out", str(out), "--json"])
    document = json.loads(capsys.readouterr().out)
    assert (code, document["file"], document["remarks"]) == (0, str(out), [])


@pytest.mark.parametrize(
    ("options", "told"),
    [
        ([], "--out must name the page to write (.html), got none"),
        (["--out", "{}/r.pdf"], "--out must end in .html, got '{}/r.pdf'"),
        (["--out", "{}/r.html", "--recordings", "{}/none"], "recordings must lie in a folder, got"),
    ],
)
def test_bad_input_is_one_line_and_writes_nothing(session, tmp_path, capsys, options, told):
    options = [option.format(tmp_path) for option in options]
    assert run(["report", str(session / "calibration.json"), *options]) == 2
    captured = capsys.readouterr()
    assert (captured.out, len(captured.err.splitlines())) == ("", 1)
    assert told.format(tmp_path) in captured.err
    assert list(tmp_path.iterdir()) == []
