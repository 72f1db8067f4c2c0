"""What a board says to a command of the drive, for people."""

from firmware_bridge.message import CommandCode, Reply

__all__ = ["ANSWER_S", "UNKNOWN", "answer_text", "drive_command"]

UNKNOWN = 1
"""Status of a reply: the board does not know the command."""

ANSWER_S = 5.0
"""How long a board may owe an answer [s]."""
_NAMES = {
    CommandCode.SET_LINE: "set line",
    CommandCode.CLEAR_LINE: "clear line",
    CommandCode.RAMP: "ramp",
}


def drive_command(reply: Reply) -> CommandCode | None:
    """Return which command of the drive a reply answers.

    Parameters
    ----------
    reply : Reply
        Of the board.

    Returns
    -------
    CommandCode or None
        None where it answers another one.
    """
    return next((code for code in _NAMES if code == reply.code), None)


def answer_text(code: CommandCode, status: int, reason: str) -> tuple[str, bool]:
    """Return what the board says, in one line, and whether it refuses.

    Parameters
    ----------
    code : CommandCode
        What was asked, of the drive.
    status, reason : int and str
        Of the reply.

    Returns
    -------
    tuple of str and bool
        Having no offset refuses nothing: there is nothing to bring to rest.
    """
    if not status:
        return f"{_NAMES[code]}: done", False
    if status == UNKNOWN and code == CommandCode.RAMP:
        return "the board's drive has no offset", False
    if status == UNKNOWN:
        return "the board has no drive lines", True
    return f"the board refuses to {_NAMES[code]}: {reason or 'without a reason'}", True
