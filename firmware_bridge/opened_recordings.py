"""The recordings that a running command has opened, and what speaks against them."""

from typing import TYPE_CHECKING, Any

import click

from metro.options import distrust

if TYPE_CHECKING:
    from firmware_bridge.reading_choice import Reading
    from firmware_bridge.trace import Recording

__all__ = ["distrust_opened", "is_judged", "judge_opened", "note_opened", "opened_reasons"]

_OPENED = "firmware_bridge.opened"
_JUDGED = "firmware_bridge.judged"


def note_opened(reading: "Reading", recording: "Recording") -> None:
    """Remember a recording; outside a command nothing is remembered.

    Parameters
    ----------
    reading : Reading
        How it is read.
    recording : Recording
        Opened.
    """
    context = click.get_current_context(silent=True)
    if context is not None:
        context.meta.setdefault(_OPENED, []).append((reading, recording))


def judge_opened(*, is_wanted: bool) -> None:
    """Say whether the running command ends with 1 where something speaks against a recording.

    Parameters
    ----------
    is_wanted : bool
        False where nothing is concluded from the samples.
    """
    click.get_current_context().meta[_JUDGED] = is_wanted


def is_judged() -> bool:
    """Return whether the running command judges the recordings that it opens."""
    context = click.get_current_context(silent=True)
    return context is not None and bool(context.meta.get(_JUDGED, False))


def opened_reasons() -> list[str]:
    """Return why the recordings that the running command opened must not be trusted.

    Returns
    -------
    list of str
        Each once, with its file; empty outside a command.
    """
    context = click.get_current_context(silent=True)
    opened: list[tuple[Any, Any]] = [] if context is None else context.meta.get(_OPENED, [])
    reasons = [f"{item.path}: {text}" for reading, item in opened for text in reading.reasons(item)]
    return list(dict.fromkeys(reasons))


def distrust_opened() -> None:
    """End with 1 where something speaks against a recording that was opened."""
    reasons = opened_reasons()
    if reasons:
        distrust(reasons)
