"""The open-loop gain of a servo that holds the mirror, from a table, and what it undoes.

A servo of open-loop gain G leaves 1/(1 + G) of any displacement that would be there without it: the
free displacement is the one seen times 1 + G.
"""

from dataclasses import dataclass
from math import pi
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.file_hash import sha256_of
from calibration.term import OPEN_LOOP, Term
from firmware_bridge.text_table import read_text_table

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["SIGN", "OpenLoop", "OpenLoopError", "load_open_loop"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

_RADIANS = {"rad": 1.0, "deg": pi / 180, "°": pi / 180, "degree": pi / 180, "degrees": pi / 180}
_HERTZ = {"": 1.0, "1": 1.0, "mHz": 1e-3, "Hz": 1.0, "kHz": 1e3, "MHz": 1e6}
_PURE = ("", "1")
NEAR_ZERO = 0.1  # |1 + G| below which the servo rings and nothing is restored
_BETWEEN = 512  # frequencies of a band at which it is looked for, beside the table's own
SIGN = "G is counted such that a large positive one holds the mirror"


class OpenLoopError(CalibrationError):
    """A table of an open-loop gain that breaks a rule, or a frequency outside it."""


@dataclass(frozen=True, eq=False)
class OpenLoop:
    """A measured open-loop gain.

    Parameters
    ----------
    path : str
        The table's file.
    frequency_hz : ndarray, shape (n,)
        Ascending [Hz].
    logarithm : ndarray, shape (n,)
        ln|G| + i·phase, the phase unwrapped [rad].
    relative_u, phase_u : ndarray, shape (n,)
        Standard uncertainty of |G|, relative, and of the phase [rad].
    """

    path: str
    frequency_hz: FloatArray
    logarithm: ComplexArray
    relative_u: FloatArray
    phase_u: FloatArray

    def gain(self, at_hz: float | FloatArray) -> ComplexArray:
        """Return G, between the table's rows straight in logarithms of frequency and gain.

        Parameters
        ----------
        at_hz : float or ndarray, shape (n,)
            Within the table [Hz].

        Returns
        -------
        ndarray, shape (n,)
            Dimensionless.

        Raises
        ------
        OpenLoopError
            If a frequency lies outside the table.
        """
        place = self._place(at_hz)
        logarithm = np.interp(place, np.log(self.frequency_hz), self.logarithm)
        return np.asarray(np.exp(logarithm))

    def factor(self, at_hz: float | FloatArray) -> ComplexArray:
        """Return 1 + G: the free displacement over the one that the servo leaves."""
        return np.asarray(1.0 + self.gain(at_hz))

    def effect(self, at_hz: float | FloatArray) -> tuple[FloatArray, FloatArray, ComplexArray]:
        """Return u of |G| and of its phase, and G/(1 + G), by which they enter ln(1 + G)."""
        place, rows = self._place(at_hz), np.log(self.frequency_hz)
        gain = self.gain(at_hz)
        size, turn = (np.interp(place, rows, u) for u in (self.relative_u, self.phase_u))
        return size, turn, gain / (1.0 + gain)

    def terms(self, at_hz: float) -> list[Term]:
        """Return what the gain's u does to a coefficient multiplied by 1 + G.

        Parameters
        ----------
        at_hz : float
            Of the line [Hz].

        Returns
        -------
        list of Term
            Gain and phase, each on magnitude and phase of the coefficient.
        """
        size, turn, share = (values[0] for values in self.effect(at_hz))
        size, turn, share = float(size), float(turn), complex(share)
        return [
            Term(f"{OPEN_LOOP} gain", None, "1", size, relative=share.real, turn=share.imag),
            Term(f"{OPEN_LOOP} phase", None, "rad", turn, relative=-share.imag, turn=share.real),
        ]

    def reasons(self, at_hz: float) -> list[str]:
        """Return why a line must not be trusted: the servo rings at its frequency."""
        left = float(abs(self.factor(at_hz)[0]))
        return [] if left >= NEAR_ZERO else [_rings("there", left)]

    def band_reasons(self, from_hz: float, to_hz: float) -> list[str]:
        """Return why a band must not be trusted: the servo rings within it.

        Parameters
        ----------
        from_hz, to_hz : float
            Ends of the band, within the table [Hz].

        Returns
        -------
        list of str
            One reason, with the frequency at which |1 + G| is least; empty where there is none.
        """
        rows = self.frequency_hz[(self.frequency_hz > from_hz) & (self.frequency_hz < to_hz)]
        at_hz = np.concatenate([np.linspace(from_hz, to_hz, _BETWEEN), rows])
        left = np.abs(self.factor(at_hz))
        least = int(np.argmin(left))
        if left[least] >= NEAR_ZERO:
            return []
        return [_rings(f"at {at_hz[least]:.4g} Hz", float(left[least]))]

    @property
    def cautions(self) -> list[str]:
        """What counts as exact, because the table says nothing about it."""
        parts = [
            word
            for word, u in (("magnitude", self.relative_u), ("phase", self.phase_u))
            if not u.any()
        ]
        if not parts:
            return []
        columns = ", ".join(f"u_{word}" for word in parts)
        return [
            f"the open-loop gain counts as exact in {' and '.join(parts)}: the table has no {columns}"
        ]

    def to_dict(self) -> dict[str, Any]:
        """Return what a calibration keeps of it."""
        return {"file": Path(self.path).name, "sha256": sha256_of(self.path)}

    def _place(self, at_hz: float | FloatArray) -> FloatArray:
        wanted = np.atleast_1d(np.asarray(at_hz, dtype=np.float64))
        first, last = float(self.frequency_hz[0]), float(self.frequency_hz[-1])
        outside = (wanted < first) | (wanted > last)
        if outside.any():
            raise OpenLoopError(
                f"{self.path} gives the open-loop gain from {first:g} Hz to {last:g} Hz, asked for "
                f"{float(wanted[outside][0]):g} Hz"
            )
        return np.asarray(np.log(wanted))


def _rings(where: str, left: float) -> str:
    return f"the servo rings {where}: |1 + G| is {left:.2g}, at least {NEAR_ZERO:g} is needed"


def load_open_loop(path: str | PathLike[str]) -> OpenLoop:
    """Return the open-loop gain kept in a text table.

    Parameters
    ----------
    path : path
        Columns ``frequency``, ``magnitude``, ``phase`` and, if known, ``u_magnitude`` (of the
        magnitude itself) and ``u_phase``; the phases' header says ``[deg]`` or ``[rad]``, that of
        the frequencies ``[mHz]``, ``[Hz]``, ``[kHz]`` or ``[MHz]``.

    Returns
    -------
    OpenLoop
        Checked; without the u columns the gain counts as exactly known.

    Raises
    ------
    OpenLoopError
        If it cannot be read, a column is missing, or a value breaks a rule.
    """
    try:
        table = read_text_table(Path(path).read_bytes(), str(path))
    except OSError as error:
        raise OpenLoopError(f"{path}: {error.strerror or error}") from None
    columns = {
        name.strip().lower(): (np.asarray(values, dtype=np.float64), unit.strip())
        for name, values, unit in zip(table.names, table.columns, table.units, strict=True)
    }
    missing = [name for name in ("frequency", "magnitude", "phase") if name not in columns]
    if missing:
        raise OpenLoopError(
            f"{path}: an open-loop gain has the columns frequency, magnitude, phase [deg or rad], "
            f"got none named {missing[0]!r}"
        )
    frequency_hz = _scaled(path, columns, "frequency", _HERTZ)
    size = _scaled(path, columns, "magnitude", dict.fromkeys(_PURE, 1.0))
    turn = _scaled(path, columns, "phase", _RADIANS)
    u_size = _scaled(path, columns, "u_magnitude", dict.fromkeys(_PURE, 1.0), size.size)
    u_turn = _scaled(path, columns, "u_phase", _RADIANS, size.size)
    everything = {
        "frequency": frequency_hz,
        "magnitude": size,
        "phase": turn,
        "u_magnitude": u_size,
        "u_phase": u_turn,
    }
    _check(path, everything)
    logarithm = np.log(size) + 1j * np.unwrap(turn)
    return OpenLoop(str(path), frequency_hz, logarithm, u_size / size, u_turn)


def _scaled(
    path: str | PathLike[str],
    columns: dict[str, tuple[FloatArray, str]],
    name: str,
    units: dict[str, float],
    otherwise: int = 0,
) -> FloatArray:
    """Return a column in SI units; zeros where it may be missing."""
    if name not in columns:
        return np.zeros(otherwise)
    values, unit = columns[name]
    if unit not in units:
        named = {"phase": "[rad] or [deg]", "frequency": "[mHz], [Hz], [kHz] or [MHz]"}
        wanted = named.get(name.removeprefix("u_"), "no unit")
        raise OpenLoopError(f"{path}: column {name!r} must have {wanted}, got [{unit}]")
    return values * units[unit]


def _check(path: str | PathLike[str], columns: dict[str, FloatArray]) -> None:
    frequency_hz = columns["frequency"]
    rules: Sequence[tuple[str, FloatArray, NDArray[np.bool_]]] = (
        *((f"{name} must be finite", v, ~np.isfinite(v)) for name, v in columns.items()),
        ("frequency must be > 0 Hz", frequency_hz, ~(frequency_hz > 0)),
        ("magnitude must be > 0", columns["magnitude"], ~(columns["magnitude"] > 0)),
        *(
            (f"{name} must be ≥ 0", columns[name], ~(columns[name] >= 0))
            for name in ("u_magnitude", "u_phase")
        ),
    )
    for rule, values, broken in rules:
        if broken.any():
            row = int(np.argmax(broken))
            raise OpenLoopError(f"{path}, row {row + 1}: {rule}, got {values[row]:g}")
    if frequency_hz.size < 2:
        raise OpenLoopError(f"{path}: an open-loop gain needs at least two rows, got one")
    if not (np.diff(frequency_hz) > 0).all():
        row = int(np.argmax(np.diff(frequency_hz) <= 0)) + 1
        raise OpenLoopError(
            f"{path}, row {row + 1}: frequencies must ascend, got {frequency_hz[row]:g} Hz"
        )
