/* Codes of the wire, version 1; SPEC.md has every bit. */
#ifndef PD_WIRE_H
#define PD_WIRE_H

enum {
    PD_WIRE_VERSION = 1
};

enum {
    PD_SAMPLES = 0x01,
    PD_ANNOUNCEMENT = 0x02,
    PD_COMMAND = 0x03,
    PD_REPLY = 0x04,
    PD_LOCK_IN = 0x05,
    PD_NOTE = 0x06
};

enum {
    PD_IDENTIFY = 1,
    PD_START = 2,
    PD_STOP = 3,
    PD_RATE = 4,
    PD_SET_LINE = 5,
    PD_CLEAR_LINE = 6,
    PD_RAMP = 7,
    PD_KEEP_ALIVE = 8
};

/* Status of a reply. */
enum {
    PD_DONE = 0,
    PD_UNKNOWN = 1,
    PD_REFUSED = 2
};

/* Flags of a samples frame. */
enum {
    PD_OVER_RANGE = 1,
    PD_OVERRUN = 2
};

/* What start asks for. */
enum {
    PD_SEND_SAMPLES = 1,
    PD_SEND_LOCK_IN = 2
};

/* Line number that means all of them. */
enum {
    PD_ALL_LINES = 255
};

#endif
