"""What the desk's commands load, and what they say where SQLAlchemy is missing."""

import subprocess
import sys

import pytest

HEAVY = {"numpy", "scipy", "matplotlib", "pint", "sqlalchemy", "psycopg"}
WITHOUT = """
import sys
sys.modules["sqlalchemy"] = None  # as if it were not installed
from metro.commandline import run
sys.exit(run(sys.argv[1:]))
"""


@pytest.mark.parametrize("command", ["ledger", "log"])
def test_help_loads_nothing_heavy(command):
    code = f"from metro.commandline import run; run([{command!r}, '--help'])\n"
    code += "import sys; print(' '.join(sys.modules), file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert not set(done.stderr.split()) & HEAVY
    assert "Example:\n  midfringe " + command in done.stdout


@pytest.mark.parametrize(
    "words",
    [
        ["ledger", "list", "--ledger", "a.ledger"],
        ["log", "/dev/none", "--out", "bench", "--ledger", "a.ledger", "--line", "50Hz"],
    ],
)
def test_without_sqlalchemy_one_line_says_what_to_install(words, tmp_path):
    done = subprocess.run(
        [sys.executable, "-c", WITHOUT, *words],
        capture_output=True,
        text=True,
        cwd=tmp_path,
        check=False,
    )
    assert done.returncode == 2
    assert done.stdout == ""
    assert done.stderr == (
        "midfringe: a ledger: needs sqlalchemy; run: pip install 'midfringe[ledger]'\n"
    )
