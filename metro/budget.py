"""The uncertainty budget: contributions, their combination and their effective degrees of freedom.

References
----------
JCGM 100:2008 (GUM): 5.1.2 eq. (10) and 5.2.2 eq. (13) (combined variance, independent and
correlated), annex G.4.1 eq. (G.2b) (Welch-Satterthwaite, which holds for independent groups only).
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from metro.errors import MetroError
from metro.measured import Measured

__all__ = ["Budget", "BudgetError", "Contribution", "correlation_matrix"]

Correlation = float | Sequence[Sequence[float]]
"""Between any two members of a group, or the matrix of all of them."""

_DISTRIBUTIONS = ("normal", "rectangular", "triangular", "arcsine", "t")


class BudgetError(MetroError):
    """A contribution or correlation that breaks a rule."""


@dataclass(frozen=True, slots=True)
class Contribution:
    """One line of a budget: a quantity, how well it is known, and what the result makes of it.

    Parameters
    ----------
    name : str
        Such as ``"laser wavelength"``.
    value : float
        Its estimate.
    u : float
        Its standard uncertainty, in the unit of the value.
    sensitivity : float
        Signed derivative of the result by this quantity.
    kind : str
        ``"A"`` from repeated observations, ``"B"`` from other knowledge.
    distribution : str
        ``"normal"``, ``"rectangular"``, ``"triangular"``, ``"arcsine"`` or ``"t"``.
    dof : float
        Degrees of freedom of ``u``.
    group : str
        Contributions with the same label share one cause and are combined with their signs before
        the rest; empty for an independent one.
    unit : str
        Of the value, for the table.

    Raises
    ------
    BudgetError
        If u is negative or not finite, or kind, distribution or dof are none.
    """

    name: str
    value: float
    u: float
    sensitivity: float
    kind: str = "B"
    distribution: str = "normal"
    dof: float = math.inf
    group: str = ""
    unit: str = "1"

    def __post_init__(self) -> None:
        if not (math.isfinite(self.u) and self.u >= 0):
            raise BudgetError(f"{self.name}: u must be finite and ≥ 0, got {self.u!r}")
        if not math.isfinite(self.sensitivity):
            raise BudgetError(f"{self.name}: sensitivity must be finite, got {self.sensitivity!r}")
        if self.kind not in ("A", "B"):
            raise BudgetError(f"{self.name}: kind must be 'A' or 'B', got {self.kind!r}")
        if self.distribution not in _DISTRIBUTIONS:
            allowed = ", ".join(_DISTRIBUTIONS)
            raise BudgetError(
                f"{self.name}: distribution must be one of {allowed}, got {self.distribution!r}"
            )
        if not self.dof > 0:
            raise BudgetError(f"{self.name}: dof must be > 0, got {self.dof!r}")

    @property
    def effect(self) -> float:
        """The signed contribution to the result's standard uncertainty: sensitivity times u."""
        return self.sensitivity * self.u


@dataclass(frozen=True)
class Budget:
    """The contributions to one result.

    Parameters
    ----------
    contributions : sequence of Contribution
        In the order they are shown.
    correlations : mapping of str to float or matrix
        By group: the correlation coefficient between any two members, or the matrix of all in their
        order; 1 where not given.
    unit : str
        SI unit of the result.
    """

    contributions: Sequence[Contribution]
    correlations: Mapping[str, Correlation] | None = None
    unit: str = "1"

    def combined(self) -> tuple[float, float]:
        """Return the combined standard uncertainty and its effective degrees of freedom.

        Returns
        -------
        tuple of (float, float)
            u in the result's unit; dof after Welch and Satterthwaite over independent groups,
            infinite where no contribution limits it.

        Raises
        ------
        BudgetError
            If a correlation cannot be (outside −1/(n−1)..1 for n members).
        """
        groups = [self._group_variance(label, members) for label, members in self._groups()]
        variance = math.fsum(v for v, _ in groups)
        # Shares of the variance, so that squares of tiny variances cannot underflow.
        spread = math.fsum((v / variance) ** 2 / dof for v, dof in groups) if variance else 0.0
        return math.sqrt(variance), 1.0 / spread if spread > 0 else math.inf

    def _groups(self) -> list[tuple[str, list[Contribution]]]:
        groups: dict[str, list[Contribution]] = {}
        for place, item in enumerate(self.contributions):
            # An independent contribution is a group of its own; a NUL cannot be in a label's text.
            groups.setdefault(item.group or f"\0{place}", []).append(item)
        return list(groups.items())

    def _group_variance(self, label: str, members: list[Contribution]) -> tuple[float, float]:
        """Return a group's variance, and the least of its members' degrees of freedom."""
        r = (self.correlations or {}).get(label, 1.0)
        effects = [m.effect for m in members]
        if isinstance(r, (int, float)):
            variance = _alike_variance(label, effects, float(r))
        else:
            matrix = correlation_matrix(label, len(members), r)
            variance = math.fsum(
                r * a * b
                for row, a in zip(matrix, effects, strict=True)
                for r, b in zip(row, effects, strict=True)
            )
        dof = min((m.dof for m in members if m.effect), default=math.inf)
        return max(variance, 0.0), dof

    def measured(self, value: float) -> Measured:
        """Return the result with this budget's uncertainty.

        Parameters
        ----------
        value : float
            The result, in the budget's unit.

        Returns
        -------
        Measured
            With the combined u and the effective degrees of freedom.
        """
        u, dof = self.combined()
        return Measured.of(value, self.unit, u, dof)

    def without(self, name: str) -> "Budget":
        """Return the budget that leaves one contribution out.

        Parameters
        ----------
        name : str
            Of the contribution.

        Returns
        -------
        Budget
            Without it.

        Raises
        ------
        BudgetError
            If there is none of this name.
        """
        return self._changed(name, 0.0)

    def scaled(self, name: str, factor: float) -> "Budget":
        """Return the budget with the u of one contribution multiplied.

        Parameters
        ----------
        name : str
            Of the contribution.
        factor : float
            At least 0.

        Returns
        -------
        Budget
            With the other u.

        Raises
        ------
        BudgetError
            If there is none of this name.
        """
        return self._changed(name, factor)

    def _changed(self, name: str, factor: float) -> "Budget":
        if all(c.name != name for c in self.contributions):
            known = ", ".join(c.name for c in self.contributions)
            raise BudgetError(f"the budget has no contribution {name!r}, it has {known}")
        kept = [
            replace(c, u=factor * c.u) if c.name == name else c
            for c in self.contributions
            if c.name != name or factor
        ]
        return replace(self, contributions=kept)

    def table(self) -> str:
        """Return the budget as an aligned table, the largest contributions first.

        Returns
        -------
        str
            One line a contribution, and the combined u with its degrees of freedom below.
        """
        from metro.display import show
        from metro.output import table

        u, dof = self.combined()
        rows = [
            [
                c.name,
                show(c.u, c.unit, 2),
                show(abs(c.effect), self.unit, 2),
                f"{100 * c.effect**2 / u**2:.1f} %" if u else "",
                c.kind,
                c.distribution,
                _dof_text(c.dof),
                c.group,
            ]
            for c in sorted(self.contributions, key=lambda c: -abs(c.effect))
        ]
        rows.append(["combined", "", show(u, self.unit, 2), "", "", "", _dof_text(dof), ""])
        header = ["contribution", "u", "in result", "of u²", "kind", "distribution", "dof", "group"]
        return table(rows, header=header)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form of the budget.

        Returns
        -------
        dict
            ``contributions``, ``correlations``, ``u``, ``dof`` (null where infinite), ``unit``.
        """
        u, dof = self.combined()
        return {
            "contributions": [_contribution_dict(c) for c in self.contributions],
            "correlations": {
                g: _plain_correlation(r) for g, r in (self.correlations or {}).items()
            },
            "u": u,
            "dof": _finite(dof),
            "unit": self.unit,
        }

    @classmethod
    def from_dict(cls, document: Mapping[str, Any]) -> "Budget":
        """Return the budget that :meth:`to_dict` wrote.

        Parameters
        ----------
        document : mapping
            The JSON form.

        Returns
        -------
        Budget
            The same budget.

        Raises
        ------
        BudgetError
            If a key is missing, or a group cannot be correlated so.
        """
        try:
            contributions = [_contribution_of(item) for item in document["contributions"]]
            correlations = document["correlations"]
            for label, correlation in correlations.items():
                members = sum(item.group == label for item in contributions)
                correlation_matrix(label, members, correlation)
            return cls(contributions, correlations, document["unit"])
        except (KeyError, TypeError, AttributeError) as error:
            raise BudgetError(f"not a budget: {type(error).__name__} {error}") from None


def _alike_variance(label: str, effects: Sequence[float], r: float) -> float:
    """Return the variance of a sum whose terms have one correlation with each other."""
    n = len(effects)
    if n > 1 and not -1.0 / (n - 1) <= r <= 1.0:
        raise BudgetError(
            f"correlation of {label} must be ≥ {-1.0 / (n - 1):.3g} and ≤ 1 for {n} members, got {r!r}"
        )
    square = math.fsum(e**2 for e in effects)
    return r * math.fsum(effects) ** 2 + (1.0 - r) * square


def correlation_matrix(label: str, n: int, correlation: Correlation) -> list[list[float]]:
    """Return the checked correlation matrix of a group.

    Parameters
    ----------
    label : str
        The group, for messages.
    n : int
        Its members.
    correlation : float or sequence of sequences, shape (n, n)
        One coefficient for every two members, or the matrix.

    Returns
    -------
    list of list of float, shape (n, n)
        Symmetric, ones on the diagonal, no negative eigenvalue.

    Raises
    ------
    BudgetError
        If no quantities can be correlated so.
    """
    import numpy as np

    if isinstance(correlation, (int, float)):
        rows = [[1.0 if i == j else float(correlation) for j in range(n)] for i in range(n)]
    else:
        rows = [[float(r) for r in row] for row in correlation]
    if len(rows) != n or any(len(row) != n for row in rows):
        raise BudgetError(f"correlation of {label} must be a matrix of {n}×{n} for {n} members")
    matrix = np.array(rows)
    if not (np.allclose(matrix, matrix.T, atol=1e-9) and np.allclose(np.diag(matrix), 1.0)):
        raise BudgetError(f"correlation of {label} must be symmetric with ones on the diagonal")
    least = float(np.linalg.eigvalsh(matrix)[0])
    if least < -1e-9 * n:  # rounding leaves a fully correlated group at −1e-16
        raise BudgetError(
            f"correlation of {label} must have no negative eigenvalue, got one of {least:.3g}"
        )
    return rows


def _contribution_dict(item: Contribution) -> dict[str, Any]:
    return {
        "name": item.name,
        "value": _finite(item.value),
        "unit": item.unit,
        "u": item.u,
        "sensitivity": item.sensitivity,
        "effect": item.effect,
        "kind": item.kind,
        "distribution": item.distribution,
        "dof": _finite(item.dof),
        "group": item.group,
    }


def _contribution_of(item: Mapping[str, Any]) -> Contribution:
    known = {key: value for key, value in item.items() if key != "effect"}
    known["dof"] = math.inf if known["dof"] is None else known["dof"]
    known["value"] = math.nan if known["value"] is None else known["value"]
    return Contribution(**known)


def _plain_correlation(correlation: Correlation) -> float | list[list[float]]:
    if isinstance(correlation, (int, float)):
        return float(correlation)
    return [[float(r) for r in row] for row in correlation]


def _finite(number: float) -> float | None:
    return number if math.isfinite(number) else None


def _dof_text(dof: float) -> str:
    return f"{dof:.3g}" if math.isfinite(dof) and dof < 1e6 else "∞"
