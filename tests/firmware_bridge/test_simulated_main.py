"""The simulated board at a port: a process that a newcomer starts, records from and ends."""

import signal
import subprocess
import sys

import pytest

from metro.commandline import run

BOARD = [sys.executable, "-m", "firmware_bridge.simulated"]


def test_it_is_recorded_and_ends_at_ctrl_c(tmp_path, capsys):
    with subprocess.Popen([*BOARD, "--seed", "2"], stdout=subprocess.PIPE, text=True) as board:
        port = board.stdout.readline().strip()
        out = tmp_path / "a.mfr"
        code = run(["record", "--port", port, "--duration", "0.5s", "--out", str(out), "--quiet"])
        board.send_signal(signal.SIGINT)
        assert board.wait(20) == 0
    assert code == 0
    assert "2000" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("arguments", "told"),
    [
        (
            ["--bench", "nope.toml"],
            "simulated board: cannot read the bench file nope.toml: no such",
        ),
        (["--triangle", "3"], "simulated board: --triangle must have a unit of voltage"),
        (["--slope", "up"], "simulated board: Invalid value for '--slope'"),
    ],
)
def test_bad_input_is_one_line(arguments, told):
    done = subprocess.run([*BOARD, *arguments], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout, len(done.stderr.splitlines())) == (2, "", 1)
    assert done.stderr.startswith(told)
