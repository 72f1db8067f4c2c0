"""The README holds: its commands run on a rehearsal's files, its options exist, its links lead somewhere."""

import re
import shlex
from pathlib import Path

import click
import pytest

from metro.commandline import cli, run

README = Path(__file__).resolve().parents[1] / "README.md"
INSTALLS = ("python3 -m venv",)  # .ci/run runs these two lines in fresh clones


def blocks(kind):
    """Return the fenced blocks of one kind."""
    return re.findall(
        rf"^ *```{kind}\n(.*?)^ *```", README.read_text(encoding="utf-8"), re.DOTALL | re.MULTILINE
    )


def commands(kind):
    """Return every line that calls midfringe, split as a shell does, notes cut off."""
    lines = [line.strip() for block in blocks(kind) for line in block.splitlines()]
    called = [line for line in lines if line.startswith("midfringe ")]
    return [shlex.split(re.split(r"\s{3,}", line)[0])[1:] for line in called]


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    folder = tmp_path_factory.mktemp("readme")
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(folder)
        assert run(["rehearse", "--quiet"]) == 0
    return folder


def test_the_two_commands_stand_there():
    lines = [line for block in blocks("sh") for line in block.splitlines()]
    installs = [line for line in lines if line.startswith(INSTALLS)]
    assert len(installs) == 2
    assert installs[0].endswith("midfringe rehearse")
    assert installs[1].endswith("pytest -q -n 2")


def test_every_command_runs(session, monkeypatch):
    """In the order of the page, since later ones use what earlier ones leave."""
    monkeypatch.chdir(session)
    found = commands("sh")
    assert len(found) >= 7
    for arguments in found:
        assert run(arguments) == 0, arguments


@pytest.mark.parametrize("arguments", commands("text"), ids=" ".join)
def test_every_option_of_the_bench_session_exists(arguments):
    command = cli.get_command(click.Context(cli), arguments[0])
    assert command is not None
    if isinstance(command, click.Group):
        command = command.get_command(click.Context(command), arguments[1])
        assert command is not None
    known = {option for param in command.params for option in param.opts}
    assert {word for word in arguments if re.match(r"--[a-z]", word)} <= known


def test_the_printed_table_is_the_one_that_comes(session, monkeypatch, capsys):
    """Every true value is drawn from the seed alone and stands as printed; a measured one may differ
    in its last digits between machines, by less than a twentieth of its U."""
    monkeypatch.chdir(session)
    assert run(["rehearse", "--quiet", "--overwrite"]) == 0
    printed = capsys.readouterr().out.splitlines()
    shown = next(b for b in blocks("text") if b.startswith("quantity")).splitlines()
    assert [re.split(r"\s{2,}", line)[:2] for line in shown] == [
        re.split(r"\s{2,}", line)[:2] for line in printed
    ]
    for ours, theirs in zip(shown[1:13], printed[1:13], strict=True):
        measured, again, expanded = (
            float(re.split(r"\s{2,}", t)[k].split()[0])
            for t, k in (
                (ours, 2),
                (theirs, 2),
                (theirs, 3),
            )
        )
        unit_of_u = re.split(r"\s{2,}", theirs)[3].partition(" ")[2]
        unit = re.split(r"\s{2,}", theirs)[2].partition(" ")[2]
        scale = {("pm", "nm"): 1e-3, ("kV", "MV"): 1e-3}.get((unit_of_u[:2], unit[:2]), 1.0)
        assert abs(measured - again) <= 0.05 * expanded * scale, (ours, theirs)


def test_cautions_are_there():
    text = " ".join(README.read_text(encoding="utf-8").split())
    for words in (
        "laser safety officer",
        "below eye level",
        "nothing reflective",
        "high voltage",
        "stays charged",
        "no interlock",
        "Local rules govern",
    ):
        assert words in text
    assert not re.search(r"\b(is|are) safe\b", text)
