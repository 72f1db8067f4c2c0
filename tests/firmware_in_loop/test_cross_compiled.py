"""The core for the target: compiled without a warning, within its budget, without a library."""

import re

import pytest
from firmware_build import CORE, FIRMWARE, flags, run, tool

pytestmark = pytest.mark.firmware

TEXT_MAX, RAM_MAX, STACK_MAX = 4096, 512, 160
SOURCES = sorted(CORE.glob("*.c"))
# What gcc's own library does on processors without a divider; no libc, no floating point.
HELPERS = {"__aeabi_idiv", "__aeabi_uidiv", "__aeabi_uidivmod", "__gnu_thumb1_case_uqi"}
CPUS = ["cortex-m0plus", "cortex-m3", "cortex-m4"]


@pytest.fixture(scope="module", params=CPUS)
def objects(request, tmp_path_factory):
    """Return the processor and its folder of object files."""
    gcc = tool("arm-none-eabi-gcc")
    folder = tmp_path_factory.mktemp(request.param)
    command = [gcc, *flags("flags", "target-flags"), f"-mcpu={request.param}", "-c"]
    run([*command, *SOURCES], cwd=folder)
    return request.param, folder


def sizes(folder):
    printed = run([tool("arm-none-eabi-size"), *sorted(folder.glob("*.o"))])
    return [tuple(map(int, line.split()[:3])) for line in printed.splitlines()[1:]]


def test_the_code_is_within_its_budget(objects, record_property):
    cpu, folder = objects
    text, data, bss = map(sum, zip(*sizes(folder), strict=True))
    record_property(f"text_bytes_{cpu}", text)
    print(f"{cpu}: {text} bytes of {TEXT_MAX}")
    assert text <= TEXT_MAX
    assert (data, bss) == (0, 0)  # all state is the caller's


def test_it_calls_nothing_but_itself(objects):
    _, folder = objects
    named = run([tool("arm-none-eabi-nm"), *sorted(folder.glob("*.o"))])
    defined = set(re.findall(r"^\w+ [TRD] (\w+)$", named, re.MULTILINE))
    wanted = set(re.findall(r"^ +U (\w+)$", named, re.MULTILINE))
    assert wanted - defined <= HELPERS
    assert all(name.startswith("pd_") for name in defined)


def test_state_is_within_its_budget(objects, tmp_path):
    cpu, _ = objects
    source = tmp_path / "state.c"
    source.write_text(
        '#include "device.h"\nextern struct pd_device device;\nextern struct pd_parser parser;\n'
        "struct pd_device device;\nstruct pd_parser parser;\n"
    )
    state = tmp_path / "state.o"
    run([tool("arm-none-eabi-gcc"), *flags(), f"-mcpu={cpu}", "-mthumb", f"-I{CORE}", "-c", source,
         "-o", state])  # fmt: skip
    used = run([tool("arm-none-eabi-size"), state]).splitlines()[1].split()
    ram = int(used[1]) + int(used[2])
    print(f"{cpu}: {ram} bytes of state, of {RAM_MAX}")
    assert 300 < ram <= RAM_MAX


def test_stack_use_is_known_and_small(objects):
    cpu, folder = objects
    lines = [line for path in folder.glob("*.su") for line in path.read_text().splitlines()]
    used = {}
    for line in lines:
        place, size, kind = line.split("\t")
        used[place.split(":")[-1]] = int(size)
        assert kind == "static", line
    report = ", ".join(f"{name} {size}" for name, size in sorted(used.items(), key=lambda u: -u[1]))
    print(f"{cpu}: {report}")
    assert len(used) > 30
    assert max(used.values()) <= STACK_MAX


CHECK = ["--std=c99", "--enable=all", "--inconclusive", "--error-exitcode=1", "--quiet"]
# gcc's headers are not read; every public function is used by some board or test, not by all; the
# vector tables' fields are read by the processor.
QUIET = ["missingIncludeSystem", "unusedFunction", "unusedStructMember", "unmatchedSuppression"]


@pytest.mark.parametrize("board", ["core", "mps2", "stm32f405"])
def test_cppcheck_finds_nothing(board):
    checker = tool("cppcheck")
    folders = [CORE]
    if board != "core":
        folders = [FIRMWARE / "boards" / "common", FIRMWARE / "boards" / board]
    includes = [f"-I{folder}" for folder in {CORE, *folders}]
    run([checker, *CHECK, *[f"--suppress={name}" for name in QUIET], *includes, *folders])


def test_the_boards_are_built(tmp_path):
    tool("arm-none-eabi-gcc")
    printed = run([tool("make"), "-C", FIRMWARE, f"OUT={tmp_path}"])
    print(printed.splitlines()[-1])
    assert {path.name for path in tmp_path.glob("*.elf")} == {"mps2.elf", "stm32f405.elf"}
