"""Bytes of a text file to one form: UTF-8 or Latin-1 letters, line feeds as line ends."""

import codecs

__all__ = ["decode_line", "is_text", "plain_text"]

_CONTROL = bytes(set(range(32)) - {7, 8, 9, 10, 11, 12, 13, 27})
_PROBE_BYTES = 65536


def plain_text(data: bytes) -> bytes:
    r"""Return a text as bytes without byte-order mark and with ``\n`` as the line end.

    Parameters
    ----------
    data : bytes
        UTF-8, UTF-16 (with or without its mark), Latin-1 or ASCII.

    Returns
    -------
    bytes
        ASCII-compatible: digits, signs and delimiters are one byte each.
    """
    data = _from_utf16(data.removeprefix(codecs.BOM_UTF8))
    if b"\r" in data:
        # Some boards end a line with CR CR LF: the text was sent through a terminal twice.
        data = data.replace(b"\r\r\n", b"\n").replace(b"\r\n", b"\n").replace(b"\r", b"\n")
    return data


def _from_utf16(data: bytes) -> bytes:
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        return data.decode("utf-16", errors="replace").encode()
    probe = data[:_PROBE_BYTES]
    # Numbers in UTF-16 have a zero in every second byte.
    for start, name in ((1, "utf-16-le"), (0, "utf-16-be")):
        half, other = probe[start::2], probe[1 - start :: 2]
        if len(half) > 3 and half.count(0) > 0.9 * len(half) and not other.count(0):
            return data.decode(name, errors="replace").encode()
    return data


def decode_line(line: bytes) -> str:
    """Return a line as text: UTF-8 where it is that, else Latin-1.

    Parameters
    ----------
    line : bytes
        One line.

    Returns
    -------
    str
        Its text; no byte is refused.
    """
    try:
        return line.decode()
    except UnicodeDecodeError:
        return line.decode("latin-1")


def is_text(data: bytes) -> bool:
    """Tell whether bytes are the beginning of a text.

    Parameters
    ----------
    data : bytes
        As :func:`plain_text` returns it.

    Returns
    -------
    bool
        False where more than a tenth are control characters that no text holds.
    """
    probe = data[:_PROBE_BYTES]
    rest = probe.translate(None, delete=_CONTROL)
    return len(probe) - len(rest) <= 0.1 * len(probe)
