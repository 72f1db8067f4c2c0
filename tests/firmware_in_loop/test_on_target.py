"""The core on the emulated target, through semihosting, against the core on this machine."""

from pathlib import Path

import pytest
from firmware_build import CORE, FIRMWARE, flags, run, tool
from firmware_core import Device, Limits

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.arguments import (
    line_arguments,
    phase_step,
    ramp_arguments,
    rate_arguments,
    start_arguments,
)
from firmware_bridge.decoder import Decoder, LockIn, Samples
from firmware_bridge.frame import CommandCode, encode_command

pytestmark = pytest.mark.firmware

TARGET = Path(__file__).parent / "target"
COMMON = FIRMWARE / "boards" / "common"
AT, TICKS = 30, 3000
MACHINES = {  # machine: processor, linker script
    "microbit": ("cortex-m0", TARGET / "microbit.ld"),
    "mps2-an385": ("cortex-m3", FIRMWARE / "boards" / "mps2" / "board.ld"),
    "mps2-an386": ("cortex-m4", FIRMWARE / "boards" / "mps2" / "board.ld"),
}
ASKED = [
    (CommandCode.IDENTIFY, b""),
    (CommandCode.RATE, rate_arguments(500)),
    (CommandCode.RATE, rate_arguments(50_000)),
    (CommandCode.START, start_arguments(lock_in_channel=1, lock_in_length=700)),
    (CommandCode.SET_LINE, line_arguments(0, phase_step(31.7, 500), 0.3, 1.0)),
    (CommandCode.SET_LINE, line_arguments(5, phase_step(87.1, 500), 0.2)),
    (CommandCode.SET_LINE, line_arguments(1, phase_step(87.1, 500), 0.9)),
    (CommandCode.RAMP, ramp_arguments(0.4, 777)),
    (CommandCode.KEEP_ALIVE, b""),
    (99, b"what?"),
]
SCRIPT = b"".join(encode_command(code, k, arguments) for k, (code, arguments) in enumerate(ASKED))


def image(folder, processor, script):
    bytes_ = ", ".join(map(str, SCRIPT))
    (folder / "script.h").write_text(
        f"enum {{\n    COMMANDS_AT = {AT},\n    TICKS = {TICKS}\n}};\n"
        f"static const uint8_t commands[] = {{{bytes_}}};\n"
    )
    elf = folder / "program.elf"
    sources = [*sorted(CORE.glob("*.c")), COMMON / "reset.c", *sorted(TARGET.glob("*.c"))]
    includes = [f"-I{place}" for place in (CORE, COMMON, TARGET, folder)]
    run([tool("arm-none-eabi-gcc"), *flags("flags", "target-flags"), f"-mcpu={processor}", *includes,
         "-nostdlib", "-nostartfiles", f"-L{COMMON}", f"-T{script}", "-o", elf, *sources,
         "-lgcc"])  # fmt: skip
    return elf


def played_here(core):
    """Return what the core says on this machine."""
    state = 2463534242
    channels = [ChannelInfo("pd", "V", 0.0), ChannelInfo("drive", "V", 0.0)]
    announced = Announcement(
        0, 1000.0, "int24", 20, channels, "target", "1.0", simulated=True, clock_hz=1000
    )
    device = Device(core, announced, Limits(2048, 2047, 48, 4048, 1200), blocks=3, seed=6)
    wire = b""
    for tick in range(TICKS):
        if tick == AT:
            wire += device.obey(SCRIPT)
        state ^= state << 13 & 0xFFFFFFFF
        state ^= state >> 17
        state ^= state << 5 & 0xFFFFFFFF
        wire += device.sample((state & 0xFFFFFF) - 0x800000, tick)
    return wire


@pytest.mark.parametrize("machine", MACHINES)
def test_the_target_says_the_same_bytes(core, tmp_path, machine):
    emulator = tool("qemu-system-arm")
    elf = image(tmp_path, *MACHINES[machine])
    said = tmp_path / "said"
    run(
        [emulator, "-M", machine, "-kernel", elf, "-display", "none", "-monitor", "none",
         "-serial", "none", "-chardev", f"file,id=said,path={said}",
         "-semihosting-config", "enable=on,target=native,chardev=said"],
        timeout=60,
    )  # fmt: skip
    wire = bytes.fromhex(said.read_text())
    assert wire == played_here(core)
    events = Decoder().feed(wire)
    assert sum(len(event.data) for event in events if isinstance(event, Samples)) > 2900
    assert [event.length for event in events if isinstance(event, LockIn)] == [700] * 4
