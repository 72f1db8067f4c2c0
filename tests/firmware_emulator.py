"""The emulated board: played from a trace in its memory, or live behind a pseudo-terminal."""

import re
import struct
import subprocess

from firmware_build import FIRMWARE, run, tool

__all__ = ["Emulator", "build", "play", "trace"]

MACHINE = ["-M", "mps2-an385", "-display", "none", "-monitor", "none"]
TRACE_AT = 0x21000000  # PSRAM of the MPS2
MAGIC = 0x31544450


def build(folder):
    """Return the board's image; skips where the tools are missing."""
    tool("arm-none-eabi-gcc")
    tool("qemu-system-arm")
    run([tool("make"), "-s", "-C", FIRMWARE, f"OUT={folder}", f"{folder}/mps2.elf"])
    return folder / "mps2.elf"


def trace(samples, commands, *, ticks, seed):
    """Return the bytes of a trace; ``commands``: pairs of tick and bytes of the wire."""
    script = b"".join(
        struct.pack("<II", tick, len(wire)) + wire.ljust(-(-len(wire) // 4) * 4, b"\0")
        for tick, wire in commands
    )
    head = struct.pack("<5I", MAGIC, seed, ticks, len(script), len(samples))
    return head + script + samples.astype("<i2").tobytes()


def play(elf, data, folder):
    """Run the board on a trace to its end; return every byte that it sends."""
    source, sent = folder / "trace.bin", folder / "sent.bin"
    source.write_bytes(data)
    # One instruction is 32 ns of its time and no host clock is looked at: every run is the same.
    run(
        [tool("qemu-system-arm"), *MACHINE, "-kernel", elf, "-serial", f"file:{sent}",
         "-device", f"loader,file={source},addr={TRACE_AT:#x},force-raw=on",
         "-semihosting-config", "enable=on,target=native", "-icount", "shift=5,sleep=off"],
        timeout=120,
    )  # fmt: skip
    return sent.read_bytes()


class Emulator:
    """The board in real time; ``port`` is the terminal to open. Use it in a ``with`` block."""

    def __init__(self, elf, seed=1):
        self._command = [
            tool("qemu-system-arm"), *MACHINE, "-kernel", str(elf), "-serial", "pty",
            "-device", f"loader,addr={TRACE_AT + 4:#x},data={seed},data-len=4",
        ]  # fmt: skip

    def __enter__(self):
        self.process = subprocess.Popen(
            self._command, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True
        )
        said = self.process.stdout.readline()
        found = re.search(r"redirected to (\S+)", said)
        assert found, said
        self.port = found[1]
        return self

    def __exit__(self, *_):
        self.process.kill()
        self.process.wait()
        self.process.stdout.close()
