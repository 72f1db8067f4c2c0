"""The bench: what the file, the command line and the defaults say about it, with where from."""

import os
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from metro.bench_entry import NORMAL, BenchError, BenchLine, Entry, MotionPoint, nearest
from metro.bench_keys import KEYS, OPTIONS
from metro.measured import Measured

if TYPE_CHECKING:
    from metro.chain import Chain

__all__ = ["Bench", "BenchError", "BenchLine", "MotionPoint", "load_bench"]


@dataclass(frozen=True)
class Bench:
    """Everything known about the bench, in SI units, with its uncertainty and where it came from.

    Parameters
    ----------
    entries : mapping of str to Entry
        By ``section.key``.
    lines : tuple of BenchLine
        The drive lines, in the order of the file.
    path : str
        The bench file; empty where there is none.
    motion : tuple of MotionPoint
        How much the arms move of themselves, frequencies ascending; empty where nothing is said.
    """

    entries: Mapping[str, Entry] = field(default_factory=dict)
    lines: tuple[BenchLine, ...] = ()
    path: str = ""
    motion: tuple[MotionPoint, ...] = ()

    @classmethod
    def of(cls, **overrides: Any) -> "Bench":  # noqa: ANN401  # quantities, strings, numbers
        """Return a bench from keywords, without a file.

        Parameters
        ----------
        **overrides : Quantity or str or float
            Named as the options (``arm="0.5 m"``, ``wavelength="632.8 nm"``) or as the keys with a
            double underscore for the dot (``adc__rate="10 kHz"``).

        Returns
        -------
        Bench
            With these values.

        Raises
        ------
        BenchError
            If a name is unknown or a value breaks its key's rule.
        """
        return cls().override(overrides, "argument {}", "{}")

    def override(
        self, values: Mapping[str, Any], source: str = "option --{}", label: str = "--{}"
    ) -> "Bench":
        """Return a bench with some values given anew.

        Parameters
        ----------
        values : mapping
            By the name of an option (``"arm"``, ``"round-trips"``) or key; None is left out.
        source : str
            Where they came from; ``{}`` becomes the name.
        label : str
            What messages call a value; ``{}`` becomes the name.

        Returns
        -------
        Bench
            A new bench.

        Raises
        ------
        BenchError
            If a name is unknown or a value breaks its key's rule.
        """
        from metro.bench_values import read_entry

        entries = dict(self.entries)
        for name, value in values.items():
            if value is None:
                continue
            key = _key_of(name)
            entries[key] = read_entry(key, value, label.format(name), source.format(name))
        return _checked(replace(self, entries=entries))

    def replace(self, values: Mapping[str, Measured], source: str = "replaced") -> "Bench":
        """Return a bench with some values replaced, as a draw of the truth or a measurement does.

        Parameters
        ----------
        values : mapping of str to Measured
            By ``section.key``.
        source : str
            Where they came from.

        Returns
        -------
        Bench
            A new bench.

        Raises
        ------
        BenchError
            If a key is unknown or a value has another unit.
        """
        entries = dict(self.entries)
        for key, value in values.items():
            if key not in KEYS:
                raise BenchError(f"the bench has no key {key!r}{nearest(key, KEYS)}")
            if value.unit != KEYS[key].unit:
                raise BenchError(f"{key} must be in {KEYS[key].unit}, got {value.unit}")
            entries[key] = Entry(value, source, self.distribution(key))
        return replace(self, entries=entries)

    def get(self, key: str) -> Measured | None:
        """Return a value, or None where the bench does not say.

        Parameters
        ----------
        key : str
            ``section.key``.

        Returns
        -------
        Measured or None
            In SI units.
        """
        entry = self._entry(key)
        return entry.value if entry is not None and isinstance(entry.value, Measured) else None

    def text(self, key: str) -> str | None:
        """Return a text, or None where the bench does not say.

        Parameters
        ----------
        key : str
            ``section.key``.

        Returns
        -------
        str or None
            As in the file.
        """
        entry = self._entry(key)
        return entry.value if entry is not None and isinstance(entry.value, str) else None

    def magnitude(self, key: str, default: float | None = None) -> float:
        """Return a value's number in SI units.

        Parameters
        ----------
        key : str
            ``section.key``.
        default : float, optional
            What to return where the bench does not say.

        Returns
        -------
        float
            In SI units.

        Raises
        ------
        BenchError
            If the bench does not say and there is no default; the message shows how to say it.
        """
        value = self.get(key)
        if value is not None:
            return float(value.magnitude)
        if default is not None:
            return default
        raise BenchError(self._missing(key))

    def u(self, key: str) -> float:
        """Return a value's standard uncertainty in SI units.

        Parameters
        ----------
        key : str
            ``section.key``.

        Returns
        -------
        float
            0 where the bench gives none.
        """
        value = self.get(key)
        return 0.0 if value is None or value.u_magnitude is None else float(value.u_magnitude)

    def distribution(self, key: str) -> str:
        """Return the distribution from which a value's error is taken to come.

        Parameters
        ----------
        key : str
            ``section.key``.

        Returns
        -------
        str
            ``"normal"`` or ``"rectangular"``.
        """
        entry = self._entry(key)
        return NORMAL if entry is None else entry.distribution

    def source(self, key: str) -> str:
        """Return where a value came from.

        Parameters
        ----------
        key : str
            ``section.key``.

        Returns
        -------
        str
            The file and key, the option, or ``"not given"``.
        """
        entry = self._entry(key)
        return "not given" if entry is None else entry.source

    def _entry(self, key: str) -> Entry | None:
        if key not in KEYS:
            raise BenchError(f"the bench has no key {key!r}{nearest(key, KEYS)}")
        return self.entries.get(key)

    def _missing(self, key: str) -> str:
        section, _, name = key.partition(".")
        rule = KEYS[key]
        example = rule.example if rule.unit == "1" else f'"{rule.example}"'
        option = next((f" or give --{o}" for o, k in OPTIONS.items() if k == key), "")
        where = f"{self.path}: " if self.path else ""
        return (
            f"{where}the bench must give {key}: write {name} = {example} under [{section}]{option}"
        )

    @property
    def in_vacuum(self) -> bool:
        """Whether the arms are taken to be in vacuum: said so, or nothing said about the air."""
        if self.text("air.medium") is not None:
            return self.text("air.medium") == "vacuum"
        return not any(key.startswith("air.") for key in self.entries)

    def index(self) -> Measured:
        """Return the refractive index in the arms: 1 in vacuum, else from the air entry.

        Returns
        -------
        Measured
            Dimensionless.

        Raises
        ------
        BenchError
            If the air entry is incomplete or there is no wavelength.
        """
        given = self.get("air.index")
        if given is not None:
            return given
        if self.in_vacuum:
            return Measured.of(1.0, "1", 0.0)
        from metro.air import index_measured

        return index_measured(
            self._needed("air.temperature"),
            self._needed("air.pressure"),
            self.get("air.humidity") or Measured.of(0.0, "1", 0.0),
            self._needed("laser.wavelength"),
            co2=self.get("air.co2"),
            equation=self.text("air.equation") or "ciddor",
        )

    def _needed(self, key: str) -> Measured:
        value = self.get(key)
        if value is None:
            raise BenchError(self._missing(key))
        return value

    def chain(self) -> "Chain":
        """Return the signal chain of this bench.

        Returns
        -------
        Chain
            From strain to counts, as far as the bench says.
        """
        from metro.chain import Chain

        return Chain(self)

    def provenance(self) -> list[tuple[str, str, str]]:
        """Return every value with where it came from, in the order of the file's sections.

        Returns
        -------
        list of (str, str, str)
            Key, value as written, source; then the drive lines and the arms' own motion.
        """
        entries = [
            (key, str(self.entries[key]), self.entries[key].source)
            for key in KEYS
            if key in self.entries
        ]
        lines = [
            (f"line {number}", str(line), f"{self.path}, [[line]]")
            for number, line in enumerate(self.lines, 1)
        ]
        motion = [
            (f"motion {number}", str(point), f"{self.path}, [[motion]]")
            for number, point in enumerate(self.motion, 1)
        ]
        return [*entries, *lines, *motion]


def _key_of(name: str) -> str:
    option = name.replace("_", "-")
    if option in OPTIONS:
        return OPTIONS[option]
    key = name.replace("__", ".")
    if key in KEYS:
        return key
    raise BenchError(f"the bench has no value {name!r}{nearest(name, [*OPTIONS, *KEYS])}")


def _checked(bench: Bench) -> Bench:
    low, high = bench.get("fringe.low"), bench.get("fringe.high")
    if low is not None and high is not None and not low.magnitude < high.magnitude:
        where = bench.source("fringe.low")
        raise BenchError(
            f"low must be < high, got {low.magnitude:g} V and {high.magnitude:g} V ({where})"
        )
    if bench.text("air.medium") == "vacuum":
        for key in ("air.temperature", "air.pressure", "air.humidity"):
            if bench.source(key).startswith("option"):
                option = bench.source(key).removeprefix("option ")
                where = bench.source("air.medium")
                raise BenchError(f"{option} has no use: the arms are in vacuum ({where})")
    return bench


def load_bench(path: str | os.PathLike[str]) -> Bench:
    """Return the bench that a file describes.

    Parameters
    ----------
    path : path
        A TOML file, see the sections in the README.

    Returns
    -------
    Bench
        Every value checked, in SI units.

    Raises
    ------
    BenchError
        If the file cannot be read, has an unknown key (the nearest known one is named) or a value
        that breaks its rule; the message names file, section and key.
    """
    from metro.bench_values import read_sections

    path = Path(path)
    try:
        document = tomllib.loads(
            path.read_text(encoding="utf-8-sig")
        )  # some editors begin with a mark
    except OSError as error:
        reason = (error.strerror or str(error)).lower()
        raise BenchError(f"cannot read the bench file {path}: {reason}") from None
    except UnicodeDecodeError as error:
        raise BenchError(f"{path} is not UTF-8 text (byte {error.start})") from None
    except tomllib.TOMLDecodeError as error:
        reason = " ".join(str(error).split())
        raise BenchError(f"{path} is not valid TOML: {reason}") from None
    entries, lines, motion = read_sections(document, str(path))
    return _checked(Bench(entries, lines, str(path), motion))
