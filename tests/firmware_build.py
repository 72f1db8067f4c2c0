"""Compile the firmware for the tests: for this computer, for the target, for the emulator."""

import shutil
import subprocess
from pathlib import Path

import pytest

import firmware_bridge

__all__ = ["CORE", "FIRMWARE", "flags", "run", "shared_core", "tool"]

FIRMWARE = Path(firmware_bridge.__file__).parent / "firmware"
CORE = FIRMWARE / "core"
# Undefined behaviour stops the test program at once; needs no library at run time.
SANITIZED = ["-fsanitize=undefined", "-fsanitize-undefined-trap-on-error"]


def tool(*names):
    """Return the path of the first of these programs, or skip the test and say what is missing."""
    for name in names:
        found = shutil.which(name)
        if found:
            return found
    return pytest.skip(f"no {names[0]}: apt-get install {PACKAGES.get(names[0], names[0])}")


PACKAGES = {
    "arm-none-eabi-gcc": "gcc-arm-none-eabi",
    "qemu-system-arm": "qemu-system-arm",
    "cc": "gcc",
}


def flags(*names):
    """Return the flags of these files, by default those that everything is compiled with."""
    texts = [(FIRMWARE / name).read_text(encoding="utf-8") for name in names or ("flags",)]
    return " ".join(texts).split()


def run(command, **more):
    """Run a program that must succeed; return what it printed."""
    done = subprocess.run(
        [str(word) for word in command], capture_output=True, text=True, check=False, **more
    )
    assert done.returncode == 0, f"{command}\n{done.stdout}{done.stderr}"
    return done.stdout


def shared_core(folder):
    """Compile the core for this computer and return the library's path."""
    compiler = tool("gcc", "clang", "cc")
    library = Path(folder) / "core.so"
    sources = sorted(CORE.glob("*.c"))
    command = [compiler, *flags(), "-O1", "-shared", "-fPIC", "-o", library, *sources]
    # A compiler without that sanitizer compiles without it.
    trial = subprocess.run([*map(str, command), *SANITIZED], capture_output=True, check=False)
    if trial.returncode:
        run(command)
    return library
