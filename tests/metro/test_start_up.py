"""What starting the program loads, and how long it takes beside its base libraries alone."""

import statistics
import subprocess
import sys
import time

import pytest

EXPECT = ["expect", "--strain", "1e-21", "--arm", "4km", "--wavelength", "1064nm", "--json"]


def loaded_after(code):
    report = f"{code}\nimport sys; print(' '.join(sys.modules), file=sys.stderr)"
    done = subprocess.run(
        [sys.executable, "-c", report], capture_output=True, text=True, check=True
    )
    return set(done.stderr.split())


def test_the_kernel_needs_the_standard_library_only():
    modules = loaded_after("import metro.kernel, metro.kernel.student")
    assert not modules & {"numpy", "pint", "click", "uncertainties"}


def test_options_load_neither_numpy_nor_pint():
    assert not loaded_after("import metro.options, metro.budget") & {"numpy", "pint"}


def test_expect_loads_no_fitting_code():
    modules = loaded_after(f"from metro.commandline import run; assert run({EXPECT!r}) == 0")
    assert "pint" in modules
    assert not modules & {"scipy", "matplotlib", "h5py", "serial", "calibration"}


def seconds(*command):
    start = time.perf_counter()
    subprocess.run([sys.executable, *command], stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - start


@pytest.mark.slow
def test_expect_answers_as_fast_as_its_libraries_load():
    """At most 1.25 times loading numpy and pint with pint's own registry; seen: 0.8."""
    pairs = [
        (
            seconds("-c", "import numpy, pint; pint.UnitRegistry()"),
            seconds("-m", "metro", *EXPECT),
        )
        for _ in range(9)
    ]
    ratio = statistics.median(ours / theirs for theirs, ours in pairs)
    assert ratio < 1.25
