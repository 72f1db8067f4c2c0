from pathlib import Path

import numpy as np
import pytest

from metro.commandline import run
from metro.output_files import check_distinct, telling_what_is_kept
from metro.whole_file import OutputError, OutputFailedError


@pytest.fixture(autouse=True)
def folder(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    t = np.arange(2000) / 2000
    rows = np.column_stack((t, np.cos(2 * np.pi * 50 * t)))
    np.savetxt("run.csv", rows, delimiter=",", header="time (s),pd (V)", comments="")


@pytest.mark.parametrize("other", ["x.png", "./x.png", "link.png"])
@pytest.mark.parametrize("mode", [[], ["--overwrite"]])
@pytest.mark.parametrize(
    "command",
    [
        ["lines", "run.csv", "--line", "50Hz"],
        ["spectrum", "run.csv"],
        ["fringe", "run.csv", "--wavelength", "633nm"],
        ["expect", "--wavelength", "633nm"],
        ["plan", "--wavelength", "633nm", "--uncertainty", "1%"],
    ],
)
def test_one_file_for_two_outputs_is_refused_before_anything_is_written(
    command, mode, other, capsys
):
    Path("link.png").symlink_to("x.png")
    assert run([*command, "--out", "x.png", "--plot", other, *mode]) == 2
    said = capsys.readouterr()
    assert said.err.count("\n") == 1
    assert "--out and --plot must name different files" in said.err
    assert not Path("x.png").exists()


def test_a_hyphen_is_no_file(capsys):
    assert run(["lines", "run.csv", "--line", "50Hz", "--out", "-"]) == 2
    assert "an output must be a file, got '-'" in capsys.readouterr().err
    assert not Path("-").exists()


def test_different_names_and_devices_are_taken():
    check_distinct({"--out": "a", "--plot": "b", "--save": None})
    check_distinct({"--out": "/dev/null", "--plot": "/dev/null"})
    with pytest.raises(OutputError, match="different files"):
        check_distinct({"--out": "run.csv", "--plot": str(Path("run.csv").resolve())})


def test_a_disk_that_fills_up_is_told_with_what_is_whole(capsys, monkeypatch):
    def full(*_, **__):
        raise OutputFailedError("writing x.png failed: no space left on device")

    monkeypatch.setattr("metro.figure_file.save_figure", full)
    command = ["lines", "run.csv", "--line", "50Hz", "--out", "x.json", "--plot", "x.png"]
    assert run(command) == 3
    assert "no space left on device; x.json is whole and kept" in capsys.readouterr().err
    assert Path("x.json").exists()


def test_files_that_were_there_before_are_not_told():
    files = {"--out": "run.csv", "--plot": None}
    with pytest.raises(OutputError) as caught, telling_what_is_kept(files):
        raise OutputError("no")
    assert str(caught.value) == "no"
