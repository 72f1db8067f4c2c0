"""A board as the host sees it: commands in, messages out, one call a sample between them."""

import struct

import wire
from drive import Drive, Line

_LENGTHS = {
    wire.IDENTIFY: 0,
    wire.START: 8,
    wire.STOP: 0,
    wire.RATE: 8,
    wire.SET_LINE: 12,
    wire.CLEAR_LINE: 4,
    wire.RAMP: 8,
    wire.KEEP_ALIVE: 0,
}


class Device:
    """A board of 16-bit samples without a lock-in.

    identity: as for `wire.announcement`; limits: as for `drive.Drive`; rate: numerator and
    denominator; set_rate: takes a rate and returns the true one, or None; seed: differs at every
    start of the board.
    """

    def __init__(
        self,
        identity: dict,
        limits: tuple,
        slots_max: int,
        rate: tuple,
        set_rate: object,
        seed: int,
    ) -> None:
        self.identity, self.slots_max, self.set_rate = identity, slots_max, set_rate
        self.drive = Drive(limits)
        self.stream = seed
        self.is_sending = False
        self.index = 0
        self.sequence = 0
        self._held = bytearray()
        self._is_overrun = False
        self._take_rate(rate)

    def _take_rate(self, rate: tuple) -> None:
        self.rate = rate
        # A frame leaves at least four times a second.
        self.slots = max(1, min(self.slots_max, rate[0] // rate[1] // 4))
        self.drive.rate(rate)

    def obey(self, command: tuple) -> bytes:
        """Do what a command asks; return the answer, empty if there is none."""
        request, code, arguments = command
        self.drive.silent = 0
        if code not in _LENGTHS:
            return wire.reply(request, code, wire.UNKNOWN, "unknown command")
        refusal = "wrong length"
        if len(arguments) == _LENGTHS[code] or (code == wire.START and not arguments):
            refusal = self._act(code, arguments)
        if refusal:
            return wire.reply(request, code, wire.REFUSED, refusal)
        if code == wire.KEEP_ALIVE:
            return b""
        answer = b""
        if code in (wire.IDENTIFY, wire.START, wire.RATE):
            answer += wire.announcement(self.identity, self.stream, self.rate, self.slots)
        if code != wire.IDENTIFY:
            answer += wire.reply(request, code, wire.DONE, "")
        return answer + (self.flush() if code == wire.STOP else b"")

    def _act(self, code: int, arguments: bytes) -> str:
        if code == wire.START:
            return self._start(arguments)
        if code == wire.STOP:
            self.is_sending = False
        elif code == wire.RATE:
            return self._change_rate(struct.unpack("<II", arguments))
        elif code == wire.SET_LINE:
            number, _, amplitude, step, phase = struct.unpack("<BBHII", arguments)
            turn = step * self.index & 0xFFFFFFFF
            return self.drive.set_line(number, Line(step, phase, amplitude, turn))
        elif code == wire.CLEAR_LINE:
            return self.drive.clear_line(arguments[0])
        elif code == wire.RAMP:
            target, _, samples = struct.unpack("<hHI", arguments)
            return self.drive.ramp(target, samples)
        return ""

    def _start(self, arguments: bytes) -> str:
        if self.is_sending:
            return "stop first" if arguments else ""
        if arguments and arguments[0] != 1:
            return "no such start"
        self.index = 0
        self.sequence = 0
        self.stream = self.stream + 1 & 0xFFFFFFFF
        self.is_sending = True
        self._is_overrun = False
        self.drive.restart()
        return ""

    def _change_rate(self, wanted: tuple) -> str:
        if self.is_sending:
            return "stop first"
        rate = self.set_rate(wanted) if wanted[0] and wanted[1] else None
        if rate is None:
            return "no such rate"
        self._take_rate(rate)
        return ""

    def sample(self, values: tuple, clock: int, flags: int = 0) -> bytes:
        """Take the present sample of every channel; return the frame that it completes, if any."""
        sent = b""
        if self.is_sending:
            if not self._held:
                self._index, self._clock = self.index, clock
                self._flags = wire.OVERRUN if self._is_overrun else 0
                self._is_overrun = False
            self._flags |= flags
            self._held.extend(struct.pack("<%dh" % len(values), *values))  # noqa: UP031
            if len(self._held) == 2 * len(values) * self.slots:
                sent = self.flush()
        self._advance()
        return sent

    def missed(self) -> bytes:
        """Leave out the present sample; return the frame that ends before it, if any."""
        sent = self.flush()
        self._is_overrun = self.is_sending
        self._advance()
        return sent

    def _advance(self) -> None:
        self.drive.advance()
        self.index += 1

    def flush(self) -> bytes:
        """Return the frame being filled as it is, empty if nothing is in it."""
        if not self._held:
            return b""
        samples, self._held = bytes(self._held), bytearray()
        channels = len(self.identity["channels"])
        self.sequence += 1
        return wire.frame(
            self.stream,
            self.sequence - 1 & 0xFFFFFFFF,
            self._index,
            self._clock,
            self._flags,
            channels,
            self.slots,
            samples,
        )
