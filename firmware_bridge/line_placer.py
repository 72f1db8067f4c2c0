"""Lines to their places on the grid as they arrive: what is missing, what is only late."""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.host_clock import ELAPSED_U_S
from firmware_bridge.placed_lines import PlacedLines
from firmware_bridge.stamp_step import StampStep

__all__ = ["LinePlacer"]

_AHEAD_LINES = 64  # lines within which late stamps must have caught up
_AHEAD_S = 0.5  # … or this long, and a few lines
_AHEAD_FEW = 3
_LONG = 20  # samples: a pause and not lost lines
_SURE = 0.1  # samples: a gap known better than this has an exact length
_CLOCK_SET_S = 2.0  # a board's clock that leaves the host's by more was set or started anew


class LinePlacer:
    """Place lines on a regular grid by their stamps.

    A stamp may be late (the line waited in a buffer) but never early, so what is missing before a
    line is the least that the stamps of it and of the lines soon after say. Lines that seem to
    follow a gap are held until that is known, all others come out at once. A clock that goes back
    for good is a restart.

    Parameters
    ----------
    step_s : float
        Time between lines, from the first seconds [s].
    step_u : float
        Its relative standard uncertainty.
    scatter_s : float
        Rms scatter of the stamps [s].
    least : int
        The shortest gap that the stamps can tell.
    by_host : bool
        Whether the stamps are the lines' arrivals, so that no gap is exact.
    """

    def __init__(
        self, step_s: float, step_u: float, scatter_s: float, least: int = 1, by_host: bool = False
    ) -> None:
        self._step = StampStep(step_s, step_u, scatter_s)
        self._least, self._by_host = least, by_host
        self._held: PlacedLines | None = None
        self._arrived_s = 0.0  # of the last line placed
        self._was_away = False
        self.late_lines = 0
        """Lines whose stamps were late, and that were put back."""
        self.worst_late_s = 0.0
        """By how much the latest of them."""

    @property
    def scatter_s(self) -> float:
        """Rms scatter of the stamps about a steady step so far [s]."""
        return self._step.scatter_s

    @property
    def last_stamp_s(self) -> float | None:
        """The latest stamp, held lines included; None before the first."""
        held = self._held
        return self._step.at_s if held is None else float(held.stamps_s[-1])

    def away(self) -> None:
        """Take note that the port was away: lines are missing, however few."""
        self._was_away = True

    def put(
        self,
        rows: NDArray[np.float64],
        stamps_s: NDArray[np.float64],
        arrivals_s: NDArray[np.float64],
    ) -> list[PlacedLines]:
        """Take lines, and return those whose places are known.

        Parameters
        ----------
        rows : ndarray, shape (n, columns)
            Their numbers.
        stamps_s, arrivals_s : ndarray, shape (n,)
            By the board's clock and by the host's.

        Returns
        -------
        list of PlacedLines
            In order.
        """
        new = PlacedLines(rows, stamps_s, arrivals_s)
        self._held = new if self._held is None else self._held.followed_by(new)
        return self._release(float(arrivals_s[-1]) if arrivals_s.size else 0.0)

    def tick(self, now_s: float) -> list[PlacedLines]:
        """Return held lines whose places are known by ``now_s`` of the host's clock.

        Parameters
        ----------
        now_s : float
            The host's clock [s].

        Returns
        -------
        list of PlacedLines
            In order.
        """
        return self._release(now_s)

    def flush(self) -> list[PlacedLines]:
        """Return all that is held: no line will follow.

        Returns
        -------
        list of PlacedLines
            In order.
        """
        return self._release(np.inf, everything=True)

    def _release(self, now_s: float, everything: bool = False) -> list[PlacedLines]:
        out = []
        while self._held is not None and self._held.rows.size:
            held = self._held
            if self._step.at_s is None:
                self._step.begin_before(float(held.stamps_s[0]))
            ahead = self._step.ahead(held.stamps_s)
            jump, kind = self._first_jump(ahead)
            if jump:
                out.append(self._plain(held, ahead, jump))
                continue
            if not everything and held.stamps_s.size <= self._wanted_ahead(held, now_s):
                break
            out.append(self._after_jump(held, ahead, kind))
        return out

    def _wanted_ahead(self, held: PlacedLines, now_s: float) -> float:
        if now_s - float(held.arrivals_s[0]) >= _AHEAD_S:
            return _AHEAD_FEW
        # By the host's clock any number of lines may have waited in its buffers.
        return np.inf if self._by_host else _AHEAD_LINES

    @property
    def _back(self) -> float:
        return -max(3.0, 1.0 / self._step.step_s)

    @property
    def _margin(self) -> float:
        # The least of many scattered stamps is early by twice their scatter.
        return 0.0 if self._by_host else min(2 * self.scatter_s / self._step.step_s, 0.35)

    def _first_jump(self, ahead: NDArray[np.float64]) -> tuple[int, str]:
        """Return the first line that may follow a gap or a restart, and which of them."""
        if self._was_away:
            return 0, "away"
        is_gap = ahead >= self._least - 0.5
        is_back = ahead < self._back
        either = np.flatnonzero(is_gap | is_back)
        if not either.size:
            return ahead.size, ""
        first = int(either[0])
        return first, "back" if is_back[first] else "gap"

    def _plain(self, held: PlacedLines, ahead: NDArray[np.float64], count: int) -> PlacedLines:
        """Give out the first lines as they come, and follow the phase of their stamps."""
        self._step.advance(ahead[:count], 0, self._reach)
        self._arrived_s = float(held.arrivals_s[count - 1])
        return self._taken(held, count)

    @property
    def _reach(self) -> float:
        return max(0.5, self._least - 0.5)

    def _taken(
        self, held: PlacedLines, count: int, missing: int = 0, u: float = 0.0, restart: bool = False
    ) -> PlacedLines:
        rest = held.part(slice(count, None))
        self._held = rest if rest.stamps_s.size else None
        return replace(held.part(slice(count)), missing=missing, missing_u=u, is_restart=restart)

    def _after_jump(self, held: PlacedLines, ahead: NDArray[np.float64], kind: str) -> PlacedLines:
        """Place the first line held, now that enough of those behind it are seen."""
        soon = ahead if self._by_host else ahead[: _AHEAD_LINES + 1]
        if soon.size > _AHEAD_FEW and (soon[: _AHEAD_FEW + 1] < self._back).all():
            return self._restarted(held)
        if kind == "back":
            return self._one(held, ahead, 0, 0.0)  # a stray stamp
        credible = soon[soon >= self._back]
        least = float(credible.min()) if credible.size else 0.0
        missing = max(0, round(least + self._margin))
        if missing < self._least and kind == "gap":
            # What is late now has caught up soon after: the line waited in a buffer.
            self._note_late(float(ahead[0]))
            return self._one(held, ahead, 0, 0.0)
        return self._after_gap(held, ahead, missing)

    def _after_gap(
        self, held: PlacedLines, ahead: NDArray[np.float64], missing: int
    ) -> PlacedLines:
        """Place the first line held behind a gap of the stamps, if the host's clock saw it too."""
        gap_s = missing * self._step.step_s
        elapsed_s = float(held.arrivals_s[0]) - self._arrived_s
        if not self._by_host and gap_s > 1.1 * elapsed_s + _CLOCK_SET_S:
            return self._restarted(held)
        self._was_away = False
        u = self._gap_u(missing, float(ahead[0]) - missing)
        if not self._by_host and u < _SURE:
            return self._one(held, ahead, missing, 0.0)
        placed = self._one(held, ahead, missing, u)
        self._step.begin_at(float(placed.stamps_s[0]))
        return placed

    def _gap_u(self, missing: int, left_over: float) -> float:
        """Return the standard uncertainty of the length of a gap, in samples."""
        own_u_s = ELAPSED_U_S if self._by_host else 1.5 * self.scatter_s
        u = float(np.hypot(own_u_s / self._step.step_s, missing * self._step.step_u))
        if missing > _LONG and not self._by_host:
            # A long pause need not be a whole number of samples: what is left over is uncertain.
            return max(u, abs(left_over))
        return u

    def _note_late(self, ahead: float) -> None:
        if ahead >= 1 and not self._by_host:  # else it is mere jitter
            self.late_lines += 1
            self.worst_late_s = max(self.worst_late_s, ahead * self._step.step_s)

    def _one(
        self, held: PlacedLines, ahead: NDArray[np.float64], missing: int, u: float
    ) -> PlacedLines:
        self._step.advance(ahead[:1], missing, self._reach)
        self._arrived_s = float(held.arrivals_s[0])
        return self._taken(held, 1, missing, u)

    def _restarted(self, held: PlacedLines) -> PlacedLines:
        elapsed_s = float(held.arrivals_s[0]) - self._arrived_s
        missing = max(0, round(elapsed_s / self._step.step_s) - 1)
        self._was_away = False
        self._step.begin_at(float(held.stamps_s[0]))
        self._arrived_s = float(held.arrivals_s[0])
        return self._taken(held, 1, missing, ELAPSED_U_S / self._step.step_s, restart=True)
