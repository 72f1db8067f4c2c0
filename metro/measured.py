"""A measured value: the estimate, its standard uncertainty and its degrees of freedom."""

import math
from functools import cache
from typing import TYPE_CHECKING, Any

from metro.errors import MetroError

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["Measured"]


class Measured:
    """A value with its standard uncertainty, scalar or array.

    Parameters
    ----------
    value : Quantity
        The estimate; an array where several are kept together.
    u : Quantity, optional
        Standard uncertainty, same dimension and shape; None where unknown.
    dof : float
        Effective degrees of freedom of ``u``; infinite where ``u`` is taken as known.

    Raises
    ------
    MetroError
        If ``u`` is negative or of another dimension.

    References
    ----------
    JCGM 100:2008 (GUM), clauses 3.3, 6 and annex G.
    """

    __slots__ = ("_magnitude", "_u", "_unit", "dof")

    def __init__(
        self, value: "Quantity", u: "Quantity | None" = None, dof: float = math.inf
    ) -> None:
        from metro.unit_scale import scaled

        unit, *scale = _si_unit(value)
        self._magnitude: Any = scaled(value.magnitude, *scale)
        self._unit = unit
        self._u: Any = None if u is None else _difference(u, unit)
        self.dof = dof
        self._check()

    @classmethod
    def of(cls, magnitude: Any, unit: str, u: Any = None, dof: float = math.inf) -> "Measured":  # noqa: ANN401  # float or ndarray
        """Return a measured value from plain numbers.

        Parameters
        ----------
        magnitude : float or ndarray
            The estimate, in ``unit``.
        unit : str
            A coherent SI unit as JSON writes it (``"m"``, ``"V"``, ``"m/Hz**0.5"``, ``"1"``).
        u : float or ndarray, optional
            Standard uncertainty, in ``unit``.
        dof : float
            Effective degrees of freedom.

        Returns
        -------
        Measured
            The same numbers; pint is not asked.
        """
        made = cls.__new__(cls)
        made._magnitude, made._unit, made._u, made.dof = magnitude, unit, u, dof  # noqa: SLF001  # own class
        made._check()  # noqa: SLF001  # own class
        return made

    def _check(self) -> None:
        if not self.dof > 0:
            raise MetroError(f"dof must be > 0, got {self.dof!r}")
        if self._u is not None and _any_negative(self._u):
            raise MetroError(f"u must be ≥ 0 {self._unit}, got {self._u!r}")

    @property
    def magnitude(self) -> Any:  # noqa: ANN401  # float or ndarray
        """The estimate as a plain number or array, in :attr:`unit`."""
        return self._magnitude

    @property
    def u_magnitude(self) -> Any:  # noqa: ANN401  # float, ndarray or None
        """The standard uncertainty as a plain number or array in :attr:`unit`, None if unknown."""
        return self._u

    @property
    def unit(self) -> str:
        """The coherent SI unit, as JSON writes it."""
        return self._unit

    @property
    def value(self) -> "Quantity":
        """The estimate, in SI units."""
        from metro.units import quantity

        return quantity(self._magnitude, self._unit)

    @property
    def u(self) -> "Quantity | None":
        """The standard uncertainty, in SI units; None where unknown."""
        from metro.units import quantity

        return None if self._u is None else quantity(self._u, self._unit)

    @property
    def relative_u(self) -> Any:  # noqa: ANN401  # float, ndarray or None
        """The standard uncertainty over the absolute value; None where unknown."""
        if self._u is None:
            return None
        if isinstance(self._magnitude, float) and self._magnitude == 0:
            return math.inf if self._u else 0.0
        return self._u / abs(self._magnitude)

    def coverage_factor(self, p: float = 0.95) -> float:
        """Return the coverage factor k for a coverage probability.

        Parameters
        ----------
        p : float
            Coverage probability, between 0 and 1.

        Returns
        -------
        float
            Student's t for the effective degrees of freedom, two-sided.
        """
        return _coverage_factor(p, self.dof)

    def expanded(self, p: float = 0.95) -> "Quantity":
        """Return the expanded uncertainty U = k·u, the half-width of the interval.

        Parameters
        ----------
        p : float
            Coverage probability, between 0 and 1.

        Returns
        -------
        Quantity
            In SI units.

        Raises
        ------
        MetroError
            If the standard uncertainty is unknown.
        """
        from metro.units import quantity

        if self._u is None:
            raise MetroError(f"the standard uncertainty of {self} is unknown")
        return quantity(self.coverage_factor(p) * self._u, self._unit)

    def to_dict(self, *, with_dof: bool = False) -> dict[str, Any]:
        """Return the JSON form: ``{"value": 4e-18, "unit": "m", "u": 1e-20}``.

        Parameters
        ----------
        with_dof : bool
            Add ``"dof"``, null where infinite, for files that are read back.

        Returns
        -------
        dict
            Plain floats, lists and None; what is not finite is None.
        """
        document = {
            "value": _plain(self._magnitude),
            "unit": self._unit,
            "u": None if self._u is None else _plain(self._u),
        }
        if with_dof:
            document["dof"] = self.dof if math.isfinite(self.dof) else None
        return document

    @classmethod
    def from_dict(cls, document: dict[str, Any]) -> "Measured":
        """Return the measured value that :meth:`to_dict` wrote.

        Parameters
        ----------
        document : dict
            With ``value``, ``unit``, ``u`` and perhaps ``dof``.

        Returns
        -------
        Measured
            The same value.

        Raises
        ------
        MetroError
            If a key is missing.
        """
        try:
            value, unit, u = document["value"], document["unit"], document["u"]
        except (KeyError, TypeError):
            raise MetroError(f"a quantity must have value, unit and u, got {document!r}") from None
        dof = document.get("dof")
        return cls.of(_restored(value), unit, _restored(u), math.inf if dof is None else dof)

    def to_ufloat(self) -> Any:  # noqa: ANN401  # of uncertainties, scalar or array
        """Return the value as the ``uncertainties`` package holds it, in SI units.

        Returns
        -------
        uncertainties.UFloat or ndarray of UFloat
            Standard deviation NaN where the uncertainty is unknown. Values from one result are
            taken as independent; degrees of freedom are not carried along.
        """
        from uncertainties import ufloat

        u = math.nan if self._u is None else self._u
        if not getattr(self._magnitude, "shape", ()):
            return ufloat(float(self._magnitude), float(u))
        from uncertainties.unumpy import uarray

        return uarray(self._magnitude, u + 0 * self._magnitude)

    def to_numpy(self) -> Any:  # noqa: ANN401  # ndarray, shape (…, 2)
        """Return value and standard uncertainty as one array, in SI units.

        Returns
        -------
        ndarray, shape (..., 2)
            The value, then its standard uncertainty; NaN where that is unknown.
        """
        import numpy as np

        value = np.asarray(self._magnitude, dtype=float)
        u = (
            np.full_like(value, np.nan)
            if self._u is None
            else np.broadcast_to(self._u, value.shape)
        )
        return np.stack([value, u], axis=-1)

    def _repr_html_(self) -> str:
        from html import escape

        return escape(str(self))

    def __str__(self) -> str:
        from metro.display import show_measured

        return show_measured(self)

    def __repr__(self) -> str:
        return f"Measured({self._magnitude!r} {self._unit}, u={self._u!r}, dof={self.dof!r})"

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Measured):
            return NotImplemented
        return self.to_dict(with_dof=True) == other.to_dict(with_dof=True)

    __hash__ = None  # type: ignore[assignment]  # may hold arrays


@cache
def _coverage_factor(p: float, dof: float) -> float:
    from metro.kernel.student import t_quantile

    return t_quantile(p, dof)


def _si_unit(value: "Quantity") -> tuple[str, float, float, float]:
    from metro.si_form import si_form
    from metro.unit_scale import multiplier_and_divisor

    unit, factor, offset = si_form(value.units)
    return unit, *multiplier_and_divisor(factor), offset


def _difference(u: "Quantity", unit: str) -> Any:  # noqa: ANN401  # float or ndarray
    from metro.unit_scale import scaled
    from metro.units import si

    own, multiplier, divisor, _ = _si_unit(u)
    if own == unit:
        return scaled(u.magnitude, multiplier, divisor, 0.0)
    return si(u, "u", unit, difference=True)


def _any_negative(u: Any) -> bool:  # noqa: ANN401  # float or ndarray
    return bool(u < 0) if isinstance(u, (int, float)) else bool((u < 0).any())


def _plain(magnitude: Any) -> Any:  # noqa: ANN401  # float or ndarray to JSON
    if isinstance(magnitude, (int, float)):
        return magnitude if math.isfinite(magnitude) else None
    listed = magnitude.tolist()
    if isinstance(listed, list):
        return [_plain_item(item) for item in listed]
    return _plain_item(listed)


def _plain_item(item: Any) -> Any:  # noqa: ANN401  # nested lists of floats
    if isinstance(item, list):
        return [_plain_item(inner) for inner in item]
    return item if math.isfinite(item) else None


def _restored(value: Any) -> Any:  # noqa: ANN401  # JSON to float or ndarray
    if not isinstance(value, list):
        return value
    import numpy as np

    return np.array(value, dtype=np.float64)
