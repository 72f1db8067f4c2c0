"""Damage for fuzzing: bytes changed, cut, repeated, mixed with others, numbers pushed to their ends."""

import struct

__all__ = ["mutated", "mutated_text"]

_ENDS = (
    *(struct.pack("<B", x) for x in (0, 1, 127, 128, 255)),
    *(struct.pack("<H", x) for x in (0, 1, 255, 256, 32767, 32768, 65535)),
    *(struct.pack("<I", x) for x in (0, 1, 2**31 - 1, 2**31, 2**32 - 1)),
    *(struct.pack("<Q", x) for x in (0, 1, 2**53, 2**63 - 1, 2**63, 2**64 - 1)),
    *(struct.pack("<d", x) for x in (0.0, -0.0, 5e-324, 1.8e308, float("inf"), float("nan"))),
)
_WORDS = (
    b"nan", b"inf", b"-inf", b"1e999", b"-0", b"1e-400", b"0x1p3", b"1_000", b"99999999999999999999",
    b"1,5", b"1.5.5", b"--3", b"+", b"-", b".", b"e5", b"OL", b"n/a", b"#", b'"', b"'", b";", b"\t",
    b",,,,", b"\r", b"\n\n", b"\r\n", b"\x00", b"\xff\xfe", b"\xef\xbb\xbf", b"\xb5", "µ".encode(),
    "√".encode(), "٣".encode(), "½".encode(), b"12:34:56", b"2024-02-30", b"1/0", b"[", b"]", b"{",
    b"}", b"=", b"\\", b"e", b"E+308", b"a" * 300, b"9" * 400, b"[[line]]", b"u =", b"%", b" nm",
    b"**", b"^", b"/", b"(", b")", b"10**10**10", b"degC", b"true", b"1979-05-27", b"[1, 2]",
)  # fmt: skip


def mutated(rng, data, others):
    """Return ``data`` with one to eight changes; ``others`` lend stretches."""
    out = bytearray(data)
    for _ in range(rng.choice((1, 1, 1, 2, 3, 8))):
        _CHANGES[rng.randrange(len(_CHANGES))](rng, out, others)
    return bytes(out)


def mutated_text(rng, data, others):
    """Return text with changes of bytes, words and whole lines."""
    out = bytearray(data)
    for _ in range(rng.choice((1, 1, 1, 2, 3, 8))):
        _TEXT_CHANGES[rng.randrange(len(_TEXT_CHANGES))](rng, out, others)
    return bytes(out)


def _place(rng, out):
    return int(rng.random() * (len(out) + 1))


def _span(rng, out, longest=40):
    start = _place(rng, out)
    return start, min(len(out), start + 1 + int(rng.random() * longest))


def _flip(rng, out, others):
    if out:
        out[int(rng.random() * len(out))] ^= 1 << rng.randrange(8)


def _end(rng, out, others):
    number = rng.choice(_ENDS)
    place = _place(rng, out)
    out[place : place + len(number)] = number


def _cut(rng, out, others):
    start, stop = _span(rng, out)
    del out[start:stop]


def _truncate(rng, out, others):
    del out[_place(rng, out) :]


def _insert(rng, out, others):
    place = _place(rng, out)
    out[place:place] = rng.randbytes(rng.randrange(1, 10))


def _repeat(rng, out, others):
    start, stop = _span(rng, out)
    out[start:start] = out[start:stop] * rng.choice((1, 1, 3, 20))


def _borrow(rng, out, others):
    other = rng.choice(others)
    start, stop = _span(rng, other)
    place = _place(rng, out)
    out[place : place + rng.randrange(3)] = other[start:stop]


def _word(rng, out, others):
    place = _place(rng, out)
    out[place : place + rng.choice((0, 0, 1, 4))] = rng.choice(_WORDS)


def _line(rng, out, others):
    lines = bytes(out).split(b"\n")
    k = rng.randrange(len(lines))
    match rng.randrange(4):
        case 0:
            del lines[k]
        case 1:
            lines.insert(k, lines[rng.randrange(len(lines))])
        case 2:
            lines[k] = rng.choice(_WORDS)
        case _:
            lines[k], lines[k - 1] = lines[k - 1], lines[k]
    out[:] = b"\n".join(lines)


_CHANGES = (_flip, _flip, _end, _cut, _truncate, _insert, _repeat, _borrow)
_TEXT_CHANGES = (_word, _word, _word, _line, _line, _flip, _cut, _repeat, _borrow)
