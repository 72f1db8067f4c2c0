"""The command line: how it finds commands, what it says, and how it ends."""

import json
import logging
import os
import signal
import subprocess
import sys
import warnings
from importlib.metadata import version

import click
import pytest

from firmware_bridge.errors import DeviceFailedError
from metro import options
from metro.commandline import cli, run
from metro.output import to_json

PROGRAM = [sys.executable, "-m", "metro"]


@options.command(example="midfringe probe --displacement 1pm --arm 0.5m")
@click.argument("file", required=False)
@click.option("--displacement", type=options.ValueType("m"), help="Displacement.")
@click.option("--line", "lines", type=options.ValueType("Hz", above=0.0), multiple=True)
@click.option("--fail", help="How to end.")
@options.bench_options
@options.output_options("json", "overwrite")
def probe(file, displacement, lines, fail, bench, as_json, overwrite):
    """Show what arrived."""
    if fail:
        _fail(fail)
    document = {
        "file": file,
        "displacement": displacement,
        "lines": lines,
        "arm": bench.get("arms.length"),
        "source": bench.source("arms.length"),
        "overwrite": overwrite,
        "quiet": options.is_quiet(),
        "verbose": options.is_verbose(),
    }
    click.echo(to_json(document) if as_json else "shown")


def _fail(how):
    if how == "log":
        logging.getLogger("metro.x").info("some\ndetail")
        logging.getLogger("metro.x").warning("a warning")
        warnings.simplefilter("always")
        warnings.warn("of a library", RuntimeWarning, stacklevel=1)
        return
    raise {
        "device": DeviceFailedError("the port went away;\n12 samples are safe"),
        "os": OSError(28, "No space left on device", "x.csv"),
        "memory": MemoryError(),
        "interrupt": KeyboardInterrupt(),
        "pipe": BrokenPipeError(32, "Broken pipe"),
        "bug": ZeroDivisionError("division\nby zero"),
        "exit": SystemExit(7),
    }[how]


@pytest.fixture(autouse=True)
def with_probe(monkeypatch):
    class Entry:
        module, attr = __name__, "probe"

    monkeypatch.setitem(cli.found, "probe", ("show what arrived", Entry))
    monkeypatch.setattr("metro.lazy_group.import_module", lambda name: sys.modules[name])
    monkeypatch.setitem(sys.modules, __name__, sys.modules.get(__name__) or _here())
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)
    monkeypatch.delenv("MIDFRINGE_DEBUG", raising=False)
    yield
    logging.captureWarnings(capture=False)


def _here():
    class Here:
        pass

    Here.probe = probe
    return Here


def result(capsys, *arguments):
    code = run(list(arguments))
    captured = capsys.readouterr()
    return code, captured.out, captured.err


def shown(capsys, *arguments):
    code, out, err = result(capsys, "probe", "--json", *arguments)
    assert (code, err) == (0, "")
    return json.loads(out)


def test_values_arrive_in_si(capsys):
    document = shown(capsys, "--displacement", "632.8 nm", "--line", "1kHz", "--line", "31.7Hz")
    assert document["displacement"] == 6.328e-7
    assert document["lines"] == [1000.0, 31.7]


def test_a_leading_minus_is_a_value(capsys):
    assert shown(capsys, "--displacement", "-3pm")["displacement"] == -3e-12
    assert shown(capsys, "--displacement=-3pm")["displacement"] == -3e-12
    assert shown(capsys, "--displacement", "-3e-12m")["displacement"] == -3e-12


def test_the_bench_comes_from_option_variable_or_nowhere(capsys, tmp_path, monkeypatch):
    (tmp_path / "bench.toml").write_text('[arms]\nlength = "1 m"\n')
    monkeypatch.chdir(tmp_path)
    assert shown(capsys)["arm"] is None  # no file is picked up silently
    monkeypatch.setenv("MIDFRINGE_BENCH", "bench.toml")
    assert shown(capsys)["arm"]["value"] == 1.0
    (tmp_path / "other.toml").write_text('[arms]\nlength = "2 m"\n')
    assert shown(capsys, "--bench", "other.toml")["arm"]["value"] == 2.0
    document = shown(capsys, "--bench", "other.toml", "--arm", "3m")
    assert (document["arm"]["value"], document["source"]) == (3.0, "option --arm")


def test_every_override_is_there(capsys):
    _, out, _ = result(capsys, "probe", "--help")
    for name in (
        *("bench", "arm", "wavelength", "round-trips", "contrast", "power", "responsivity"),
        *("quantum-efficiency", "transimpedance", "adc-bits", "adc-range", "temperature"),
        *("pressure", "humidity", "low", "high", "json", "overwrite", "quiet", "verbose"),
    ):
        assert f"--{name}" in out
    assert out.endswith("Example:\n  midfringe probe --displacement 1pm --arm 0.5m\n")


def test_quiet_and_verbose(capsys):
    assert shown(capsys, "--quiet")["quiet"] is True
    assert shown(capsys, "-v")["verbose"] is True
    _, _, err = result(capsys, "probe", "--fail", "log")
    assert err == "warning: a warning\n"
    assert result(capsys, "probe", "--fail", "log", "--quiet")[2] == ""
    lines = result(capsys, "probe", "--fail", "log", "--verbose")[2].splitlines()
    assert lines[:2] == ["info: some detail", "warning: a warning"]
    assert "RuntimeWarning: of a library" in lines[2]


USAGE = " (see 'midfringe probe --help')"
BAD = [
    (["exepct"], "unknown command 'exepct'; the nearest is 'expect' (see 'midfringe --help')"),
    (["xyzzy"], "unknown command 'xyzzy' (see 'midfringe --help')"),
    (["--versoin"], "unknown option '--versoin'; the nearest is '--version' (see 'midfringe --help')"),
    (["-x"], "unknown option '-x' (see 'midfringe --help')"),
    (["probe", "--dispalcement", "1pm"], f"unknown option '--dispalcement'; the nearest is '--displacement'{USAGE}"),
    (["probe", "--lwo", "1V"], f"unknown option '--lwo'; the nearest is '--low'{USAGE}"),
    (["probe", "-z"], f"unknown option '-z'{USAGE}"),
    (["probe", "--json=yes"], None),
    (["probe", "--displacement"], None),
    (["probe", "a", "b"], None),
    (["probe", "--displacement", "--arm"], "--displacement needs a value, got the option '--arm'"),
    (["probe", "--displacement", "1"], "--displacement must have a unit of length (such as '0.5 m'), got '1'"),
    (["probe", "--displacement", "3kg"], "--displacement must have a unit of length (such as '0.5 m'), got '3kg'"),
    (["probe", "--displacement", "nan"], "--displacement must be a finite number, got 'nan'"),
    (["probe", "--displacement", "nan m"], None),
    (["probe", "--displacement", "inf m"], None),
    (["probe", "--displacement", "1e400m"], None),
    (["probe", "--displacement", "1,5um"], "--displacement must be written with a decimal point, not a comma, got '1,5um'"),
    (["probe", "--displacement", "1.5.5 m"], None),
    (["probe", "--displacement", ""], None),
    (["probe", "--displacement", "m"], None),
    (["probe", "--displacement", "3 m+1 m"], None),
    (["probe", "--displacement", "3 nmm"], None),
    (["probe", "--displacement", "1 rad"], None),
    (["probe", "--line", "0Hz"], "--line must be > 0.0 Hz, got '0Hz'"),
    (["probe", "--line", "-1Hz"], None),
    (["probe", "--line", "1kHz", "--line", "5s"], None),
    (["probe", "--arm", "0.5"], "--arm must have a unit of length (such as '0.5 m'), got '0.5'"),
    (["probe", "--arm", "3kg"], None),
    (["probe", "--arm", "-1m"], "--arm must be > 0.0 m, got '-1m'"),
    (["probe", "--arm", "0m"], None),
    (["probe", "--wavelength", "nan"], "--wavelength must be a finite number, got 'nan'"),
    (["probe", "--wavelength", "1,5um"], None),
    (["probe", "--wavelength", "633"], None),
    (["probe", "--wavelength", "-633nm"], None),
    (["probe", "--round-trips", "0"], None),
    (["probe", "--round-trips", "1.5"], "--round-trips must be a whole number, got '1.5'"),
    (["probe", "--round-trips", "1m"], None),
    (["probe", "--contrast", "0"], None),
    (["probe", "--contrast", "1.01"], "--contrast must be ≤ 1.0, got '1.01'"),
    (["probe", "--contrast", "120%"], None),
    (["probe", "--contrast", "x"], None),
    (["probe", "--power", "80"], None),
    (["probe", "--power", "80 uV"], "--power must have a unit of power (such as '80 uW'), got '80 uV'"),
    (["probe", "--power", "-1W"], None),
    (["probe", "--responsivity", "0.4"], None),
    (["probe", "--responsivity", "0.4 V/W"], None),
    (["probe", "--quantum-efficiency", "1.2"], None),
    (["probe", "--quantum-efficiency", "0"], None),
    (["probe", "--transimpedance", "20k"], None),
    (["probe", "--transimpedance", "20 kF"], None),
    (["probe", "--adc-bits", "0"], None),
    (["probe", "--adc-bits", "64"], None),
    (["probe", "--adc-bits", "12.5"], None),
    (["probe", "--adc-range", "3.3"], None),
    (["probe", "--adc-range", "3.3 A"], None),
    (["probe", "--temperature", "20"], None),
    (["probe", "--temperature", "-280degC"], None),
    (["probe", "--temperature", "20 C"], None),
    (["probe", "--pressure", "1000"], None),
    (["probe", "--pressure", "1000 hpa"], "--pressure has an unknown unit 'hpa' (nearest known: 'hPa'), got '1000 hpa'"),
    (["probe", "--humidity", "50"], "--humidity must be ≤ 1.0, got '50'"),
    (["probe", "--humidity", "-1%"], None),
    (["probe", "--humidity", "50 Pa"], None),
    (["probe", "--low", "1"], None),
    (["probe", "--low", "2V", "--high", "1V"], "low must be < high, got 2 V and 1 V (option --low)"),
    (["probe", "--bench", "/nonexistent/bench.toml"], "cannot read the bench file /nonexistent/bench.toml: no such file or directory"),
    (["probe", "--bench", "/"], "cannot read the bench file /: is a directory"),
    (["probe", "--bench", ""], None),
]  # fmt: skip


def test_the_table_of_bad_input_is_long():
    assert len(BAD) >= 60


@pytest.mark.parametrize(("arguments", "message"), BAD, ids=lambda v: " ".join(v)[:40] if v else "")
def test_bad_input_is_one_line_and_2(capsys, arguments, message):
    code, out, err = result(capsys, *arguments)
    assert (code, out) == (2, "")
    assert err.startswith("midfringe: ")
    assert err.endswith("\n")
    assert len(err.splitlines()) == 1
    if message is not None:
        assert err == f"midfringe: {message}\n"


def test_a_bad_bench_names_the_variable(capsys, monkeypatch):
    monkeypatch.setenv("MIDFRINGE_BENCH", "/nonexistent")
    code, out, err = result(capsys, "probe")
    assert (code, out) == (2, "")
    assert err == (
        "midfringe: $MIDFRINGE_BENCH: cannot read the bench file /nonexistent: "
        "no such file or directory\n"
    )


@pytest.mark.parametrize(
    ("how", "code", "message"),
    [
        ("device", 3, "the port went away; 12 samples are safe"),
        ("os", 3, "no space left on device: x.csv"),
        ("memory", 3, "not enough memory"),
        ("interrupt", 130, "interrupted"),
        (
            "bug",
            3,
            "unexpected ZeroDivisionError: division by zero (MIDFRINGE_DEBUG=1 shows where)",
        ),
    ],
)
def test_every_end_has_its_code(capsys, how, code, message):
    assert result(capsys, "probe", "--fail", how) == (code, "", f"midfringe: {message}\n")


def test_quiet_ends(capsys):
    assert result(capsys, "probe", "--fail", "pipe") == (0, "", "")
    assert result(capsys, "probe", "--fail", "exit") == (7, "", "")


def test_a_bug_can_be_looked_into(capsys, monkeypatch):
    monkeypatch.setenv("MIDFRINGE_DEBUG", "1")
    _, _, err = result(capsys, "probe", "--fail", "bug")
    assert "Traceback" in err


def test_distrust_says_why_and_ends_with_1(capsys):
    with pytest.raises(click.exceptions.Exit) as caught:
        options.distrust(["too near\nthe mains", "clipped"])
    assert caught.value.exit_code == 1
    assert capsys.readouterr() == (
        "",
        "not to be trusted: too near the mains\nnot to be trusted: clipped\n",
    )


def test_help_and_version(capsys):
    for arguments in ([], ["--help"], ["-h"]):
        code, out, err = result(capsys, *arguments)
        assert (code, err) == (0, "")
        assert "expect     one stage in, every stage out, with noise" in out
    assert result(capsys, "--version") == (0, f"midfringe {version('midfringe')}\n", "")


def test_commands_stand_in_the_order_of_the_work():
    names = list(cli.found)
    assert names.index("expect") < names.index("record") < names.index("calibrate")


# The real program, in a process of its own.


def process(*arguments, **settings):
    return subprocess.run(
        [*PROGRAM, *arguments], capture_output=True, text=True, timeout=60, check=False, **settings
    )


def test_help_loads_no_command_and_nothing_heavy():
    code = (
        "import sys; from metro.commandline import run; run(['--help']); "
        "print([m for m in sys.modules if '.commands.' in m or m in "
        "('numpy', 'pint', 'scipy', 'matplotlib', 'serial')], file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stderr.strip() == "[]"


def test_the_module_is_the_program():
    done = process("--version")
    assert (done.returncode, done.stdout) == (0, f"midfringe {version('midfringe')}\n")
    done = process("exepct")
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.count("\n") == 1


def test_a_closed_pipe_is_no_error():
    reader, writer = os.pipe()
    os.close(reader)
    done = subprocess.run(
        [*PROGRAM, "--help"], stdout=writer, stderr=subprocess.PIPE, text=True, check=False
    )
    os.close(writer)
    assert (done.returncode, done.stderr) == (0, "")


@pytest.mark.skipif(not os.access("/dev/full", os.W_OK), reason="no /dev/full on this system")
def test_a_full_disk_behind_stdout_is_3():
    with open("/dev/full", "w", encoding="utf-8") as full:  # noqa: PTH123  # a device
        done = subprocess.run(
            [*PROGRAM, "--help"], stdout=full, stderr=subprocess.PIPE, text=True, check=False
        )
    assert done.returncode == 3
    assert done.stderr == "midfringe: no space left on device\n"


def test_a_terminal_without_our_letters():
    done = process("--help", env={**os.environ, "PYTHONIOENCODING": "ascii"})
    assert done.returncode == 0


def test_shell_completion():
    variables = {
        "_MIDFRINGE_COMPLETE": "bash_complete",
        "COMP_WORDS": "midfringe exp",
        "COMP_CWORD": "1",
    }
    done = process(env={**os.environ, **variables})
    assert done.stdout.split() == ["plain,expect", "plain,export"]


def test_ctrl_c_is_130():
    code = (
        "import os, signal, sys; import metro.commandline as c; "
        "c._invoke = lambda a: os.kill(os.getpid(), signal.SIGINT); sys.exit(c.run(['x']))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (128 + signal.SIGINT, "midfringe: interrupted\n")
