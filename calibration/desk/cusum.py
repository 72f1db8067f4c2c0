"""Tabular cumulative sums: a lasting shift adds up, chance does not.

C⁺ = max(0, z − k + C⁺) and C⁻ = max(0, −z − k + C⁻) over results z in standard deviations from what
they should be; an alarm where either exceeds h. k is half the shift it is tuned to; h follows from
how many results shall pass, on average, between two false alarms.

References
----------
E. S. Page, *Continuous inspection schemes*, Biometrika 41 (1954) 100-115.
D. C. Montgomery, *Introduction to Statistical Quality Control*, ch. 9.1 (tabular form, N⁺, run
lengths). NIST/SEMATECH *e-Handbook of Statistical Methods*, 6.3.2.3.
"""

import math
from dataclasses import dataclass
from functools import cache

import numpy as np

__all__ = ["Cusum", "CusumRule", "average_run_length"]

_NODES = 64  # of Gauss and Legendre over 0..h: run lengths to more digits than any table has
_HIGHEST_H = 40.0


@dataclass(frozen=True, slots=True)
class CusumRule:
    """How cumulative sums are taken.

    Parameters
    ----------
    k : float
        What each result must exceed to count, in standard deviations.
    h : float
        Where the alarm is, in standard deviations.
    """

    k: float
    h: float

    @classmethod
    def for_run_length(cls, results: float, shift: float = 1.0) -> "CusumRule":
        """Return the rule with so many results, on average, between two false alarms.

        Parameters
        ----------
        results : float
            Average run length of a steady process, both sides together; 10 to 1e12.
        shift : float
            The lasting shift it is tuned to, in standard deviations.

        Returns
        -------
        CusumRule
            k = shift/2, and h to four digits.
        """
        low, high = 0.0, _HIGHEST_H / shift
        while high - low > 1e-4:
            middle = 0.5 * (low + high)
            if average_run_length(0.5 * shift, middle) < results:
                low = middle
            else:
                high = middle
        return cls(0.5 * shift, round(high, 4))

    @property
    def run_length(self) -> float:
        """Results, on average, between two false alarms."""
        return average_run_length(self.k, self.h)

    def results_to_alarm(self, shift: float) -> float:
        """Return how many results pass, on average, until a lasting shift is found.

        Parameters
        ----------
        shift : float
            In standard deviations.

        Returns
        -------
        float
            The result that raises the alarm included.
        """
        return average_run_length(self.k, self.h, shift)


@cache
def average_run_length(k: float, h: float, shift: float = 0.0) -> float:
    """Return the average run length of two-sided cumulative sums of normal results.

    Parameters
    ----------
    k, h : float
        As for :class:`CusumRule`.
    shift : float
        Lasting shift of the mean, in standard deviations.

    Returns
    -------
    float
        Results until the alarm, on average, both sums starting at zero.

    Notes
    -----
    One side solves Page's integral equation L(z) = 1 + L(0)·Φ(k − z) + ∫₀ʰ L(x)·φ(x + k − z) dx, here
    by Gauss-Legendre nodes; the sides combine as 1/L = 1/L⁺ + 1/L⁻ (Kemp 1961).

    References
    ----------
    K. W. Kemp, *The average run length of the cumulative sum chart when a V-mask is used*, J. R.
    Statist. Soc. B 23 (1961) 149-153.
    """
    sides = (_one_sided(k - shift, h), _one_sided(k + shift, h))
    return 1.0 / sum(1.0 / side for side in sides)


def _one_sided(k: float, h: float) -> float:
    nodes, weights = _legendre()
    x, w = 0.5 * h * (nodes + 1.0), 0.5 * h * weights
    start = np.append(x, 0.0)  # the nodes, and zero itself
    kernel = np.exp(-0.5 * (x[None, :] + k - start[:, None]) ** 2) / math.sqrt(2.0 * math.pi)
    to_zero = np.array([0.5 * math.erfc(-(k - z) / math.sqrt(2.0)) for z in start])
    matrix = np.column_stack([kernel * w[None, :], to_zero])
    lengths = np.linalg.solve(np.eye(_NODES + 1) - matrix, np.ones(_NODES + 1))
    length = float(lengths[-1])
    return length if length > 0 else math.inf  # so long that the equation is singular


@cache
def _legendre() -> "tuple[np.ndarray, np.ndarray]":
    return np.polynomial.legendre.leggauss(_NODES)


class Cusum:
    """Both cumulative sums, result by result.

    Parameters
    ----------
    rule : CusumRule
        k and h.
    """

    def __init__(self, rule: CusumRule) -> None:
        self.rule = rule
        self.high = self.low = 0.0
        self.high_run = self.low_run = 0
        """Results since each sum was last zero: when the shift seems to have begun."""

    def add(self, z: float) -> int:
        """Take a result.

        Parameters
        ----------
        z : float
            In standard deviations from what it should be.

        Returns
        -------
        int
            +1 or −1 where it raises the alarm upward or downward, else 0.
        """
        self.high = max(0.0, self.high + z - self.rule.k)
        self.low = max(0.0, self.low - z - self.rule.k)
        self.high_run = self.high_run + 1 if self.high else 0
        self.low_run = self.low_run + 1 if self.low else 0
        if max(self.high, self.low) <= self.rule.h:
            return 0
        return 1 if self.high >= self.low else -1

    def shift(self, side: int) -> float:
        """Return the size of the shift that an alarm found.

        Parameters
        ----------
        side : int
            +1 or −1, as :meth:`add` returned.

        Returns
        -------
        float
            Signed, in standard deviations: k + C/N.
        """
        total, run = (self.high, self.high_run) if side > 0 else (self.low, self.low_run)
        return side * (self.rule.k + total / max(1, run))

    def run(self, side: int) -> int:
        """Return how many results ago the shift seems to have begun, the last one included."""
        return self.high_run if side > 0 else self.low_run

    def reset(self) -> None:
        """Begin anew, as after an alarm."""
        self.high = self.low = 0.0
        self.high_run = self.low_run = 0
