"""The drive in integers: lines and an offset on one output, the same codes as the C core gives."""

LINES = 6
ALL_LINES = 255

_FULL = 1 << 30  # full scale
_GAIN_ONE = 1 << 15
_QUARTER = 1 << 30
_MASK = 0xFFFFFFFF
_C1, _C3, _C5, _C7 = 102942, 42325, 5202, 284


def sine(phase: int) -> int:
    """Return 2^14 sin(2π phase / 2^32) within 1.1."""
    x = phase & (_QUARTER - 1)
    if phase & _QUARTER:
        x = _QUARTER - x
    x = (x + 0x2000) >> 14
    square = ((x >> 1) * (x >> 1)) >> 14
    total = _C5 - (square * _C7 >> 16)
    total = _C3 - (square * total >> 16)
    total = _C1 - (square * total >> 16)
    value = (x * (total >> 1) + 0x10000) >> 17
    return -value if phase & (2 * _QUARTER) else value


def _cut(value: int, by: int) -> int:
    """Return value / by, cut towards zero as C does."""
    return value // by if value >= 0 else -(-value // by)


class Line:
    """Phase step and phase in 2^-32 of a turn, amplitude in 2^-16 of full scale."""

    def __init__(self, step: int = 0, phase: int = 0, amplitude: int = 0, turn: int = 0) -> None:
        self.step, self.phase, self.amplitude, self.turn = step, phase, amplitude, turn


class Drive:
    """Limits: (rest, span, low, high, slew) in codes, the last per sample."""

    def __init__(self, limits: tuple) -> None:
        self.limits = limits
        self.code_now = limits[0]
        self.silent = 0
        self._rest()

    def _rest(self) -> None:
        self.lines = [Line() for _ in range(LINES)]
        self.offset = 0
        self.target = 0
        self._left = 0
        self._gain = _GAIN_ONE

    def rate(self, rate: tuple) -> None:
        """Take the sample rate, by which the 2 s of silence are counted."""
        second = rate[0] // rate[1]
        length = second // 20
        self._silence = second * 2 if second else 1
        self._fall = (_GAIN_ONE + length - 1) // length if length else _GAIN_ONE

    def restart(self) -> None:
        """Count the phases of all lines from here."""
        for line in self.lines:
            line.turn = 0

    def code(self) -> int:
        """Return the output's code for the present sample."""
        value = self.offset
        for line in self.lines:
            if line.step:
                value += line.amplitude * sine(line.turn + line.phase + _QUARTER & _MASK)
        if self._gain < _GAIN_ONE:
            value = _cut(value, _GAIN_ONE) * self._gain
        rest, span, low, high, slew = self.limits
        biased = (value + _FULL + 0x4000) >> 15
        code = rest + ((biased * span + 0x4000) >> 15) - span
        code = max(low, min(high, code))
        self.code_now = max(self.code_now - slew, min(self.code_now + slew, code))
        return self.code_now

    def advance(self) -> None:
        """Go on to the next sample."""
        for line in self.lines:
            line.turn = line.turn + line.step & _MASK
        if self._left:
            self._advance_ramp()
        is_falling = self._gain < _GAIN_ONE
        if self.silent < self._silence:
            self.silent += 1
            is_falling = is_falling or self.silent == self._silence
        if is_falling:
            if self._gain > self._fall:
                self._gain -= self._fall
            else:
                self._rest()

    def _advance_ramp(self) -> None:
        self._left -= 1
        step = self._step
        self._carry += self._remainder
        if self._carry >= self._length:
            self._carry -= self._length
            step += 1
        self.offset += step if self.target > self.offset else -step

    def set_line(self, number: int, wanted: Line) -> str:
        """Set a line; return why not, empty if it is done."""
        if number >= LINES or not 0 < wanted.step < 1 << 31:
            return "no such line"
        before = self.lines[number]
        self.lines[number] = wanted
        refusal = self._check()
        if refusal:
            self.lines[number] = before
        return refusal

    def clear_line(self, number: int) -> str:
        """Clear a line or all of them; return why not, empty if it is done."""
        if number >= LINES and number != ALL_LINES:
            return "no such line"
        for k in range(LINES):
            if number in (k, ALL_LINES):
                self.lines[k] = Line()
        return ""

    def ramp(self, target: int, samples: int) -> str:
        """Move the offset to target / 2^15 of full scale; return why not, empty if it is done."""
        if not samples or target == -32768:
            return "no such ramp"
        self._aim(target * _GAIN_ONE, samples)
        refusal = self._check()
        if refusal:
            self._aim(self.offset, 1)
        return refusal

    def _aim(self, target: int, samples: int) -> None:
        distance = abs(target - self.offset)
        self.target = target
        self._length = self._left = samples
        self._step, self._remainder = divmod(distance, samples)
        self._carry = 0

    def _check(self) -> str:
        if self._gain < _GAIN_ONE:
            return "going to rest"
        rest, span, low, high, slew = self.limits
        amplitudes = sum([line.amplitude for line in self.lines])
        ends = (_cut(self.offset, 16384), _cut(self.target, 16384))
        up, down = max(ends) + amplitudes, min(ends) - amplitudes
        if up > 65536 or down < -65536:
            return "out of range"
        if rest + _cut(up * span, 65536) > high or rest + _cut(down * span, 65536) < low:
            return "out of range"
        slope = sum([line.amplitude * (line.step >> 16) for line in self.lines])
        codes = ((slope >> 16) + 1) * span // 256 * 202 // 8192 + 2
        if self._left:
            codes += (self._step >> 15) * span // 32768
        return "too fast" if codes > slew else ""
