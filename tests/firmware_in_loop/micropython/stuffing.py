"""Run by MicroPython: stuff messages of every length about a full run, print them in hex."""

from binascii import hexlify

from wire import stuffed, unstuffed

state = 12345
for length in range(530):
    for zeros in (0, 1, 40):
        data = bytearray()
        for _ in range(length):
            state = 16807 * state % 2147483647
            data.append(0 if state % 100 < zeros else 1 + state % 255)
        out = stuffed(bytes(data))
        assert unstuffed(out) == data
        print(hexlify(bytes(data)).decode() + " " + hexlify(out).decode())
