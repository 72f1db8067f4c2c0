"""The structs of the firmware's core, field by field as in its headers."""

import ctypes as c

__all__ = [
    "Board",
    "Channel",
    "Command",
    "DeviceState",
    "Frame",
    "Identity",
    "Limits",
    "Parser",
    "Rate",
    "SetRate",
]

LINES = 6


class Frame(c.Structure):
    _fields_ = [
        ("kind", c.c_uint16),
        ("flags", c.c_uint16),
        ("stream", c.c_uint32),
        ("sequence", c.c_uint32),
        ("channels", c.c_uint8),
        ("format", c.c_uint8),
        ("slots", c.c_uint16),
        ("index", c.c_uint64),
        ("clock", c.c_uint64),
        ("filled", c.c_uint16),
        ("reserved", c.c_uint16),
    ]


class Rate(c.Structure):
    _fields_ = [("numerator", c.c_uint32), ("denominator", c.c_uint32)]


class Channel(c.Structure):
    _fields_ = [
        ("name", c.c_char_p),
        ("unit", c.c_char_p),
        # struct pd_range, in place
        ("scale_f64", c.c_uint64),
        ("offset_f64", c.c_uint64),
        ("low", c.c_int32),
        ("high", c.c_int32),
    ]


class Identity(c.Structure):
    _fields_ = [
        ("board", c.c_char_p),
        ("firmware", c.c_char_p),
        ("channels", c.POINTER(Channel)),
        ("channel_count", c.c_uint8),
        ("format", c.c_uint8),
        ("is_simulated", c.c_bool),
        ("clock_hz", c.c_uint32),
    ]


class Limits(c.Structure):
    _fields_ = [(name, c.c_uint16) for name in ("rest", "span", "low", "high", "slew")]


SetRate = c.CFUNCTYPE(c.c_bool, c.POINTER(Rate))


class Board(c.Structure):
    _fields_ = [
        ("identity", Identity),
        ("drive", Limits),
        ("slots_max", c.c_uint16),
        ("set_rate", SetRate),
    ]


class Parser(c.Structure):
    _fields_ = [
        ("buffer", c.POINTER(c.c_uint8)),
        ("size", c.c_size_t),
        ("at", c.c_size_t),
        ("crc", c.c_uint32),
        ("damaged", c.c_uint32),
        ("code", c.c_uint8),
        ("left", c.c_uint8),
    ]


class Command(c.Structure):
    _fields_ = [
        ("arguments", c.c_uint32 * 3),
        ("length", c.c_uint16),
        ("request", c.c_uint16),
        ("code", c.c_uint8),
    ]


class Ring(c.Structure):
    _fields_ = [
        *[(name, c.c_uint8) for name in ("count", "channels", "format", "in_", "out")],
        ("is_overrun", c.c_bool),
        ("published", c.c_uint8),
        ("taken", c.c_uint8),
        ("block_bytes", c.c_uint16),
        ("slots", c.c_uint16),
        ("blocks", c.POINTER(Frame)),
        ("payload", c.POINTER(c.c_uint8)),
        ("dropped", c.c_uint32),
        ("stream", c.c_uint32),
        ("sequence", c.c_uint32),
    ]


class Line(c.Structure):
    _fields_ = [
        ("step", c.c_uint32),
        ("turn", c.c_uint32),
        ("phase", c.c_uint32),
        ("amplitude", c.c_uint16),
    ]


class Ramp(c.Structure):
    _fields_ = [
        ("target", c.c_int32),
        *[(name, c.c_uint32) for name in ("length", "left", "step", "rest", "carry")],
    ]


class Drive(c.Structure):
    _fields_ = [
        ("gain", c.c_uint16),
        ("fall", c.c_uint16),
        ("code", c.c_uint16),
        ("limits", c.POINTER(Limits)),
        ("silent", c.c_uint32),
        ("silence", c.c_uint32),
        ("offset", c.c_int32),
        ("ramp", Ramp),
        ("lines", Line * LINES),
    ]


class LockIn(c.Structure):
    _fields_ = [
        ("channel", c.c_uint8),
        ("active", c.c_uint8),
        ("is_on", c.c_bool),
        ("is_done", c.c_bool),
        ("length", c.c_uint32),
        ("count", c.c_uint32),
        ("index", c.c_uint64),
        ("done_index", c.c_uint64),
        ("sums", c.c_int64 * (2 * LINES * 2)),
    ]


class DeviceState(c.Structure):
    _fields_ = [
        ("sends", c.c_uint8),
        ("slots", c.c_uint16),
        ("stream", c.c_uint32),
        ("index", c.c_uint64),
        ("board", c.POINTER(Board)),
        ("rate", Rate),
        ("ring", Ring),
        ("drive", Drive),
        ("lock_in", LockIn),
    ]
