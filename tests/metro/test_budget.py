"""The budget engine against the GUM's own example, and its rules."""

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest

from metro.budget import Budget, BudgetError, Contribution

GUM = tomllib.loads(
    (Path(__file__).parents[1] / "published_values" / "gum_h1.toml").read_text(encoding="utf-8")
)


def gum_budget():
    return Budget([Contribution(value=0.0, **c) for c in GUM["contribution"]], unit="m")


def test_gum_h1():
    expected = GUM["expected"]
    u, dof = gum_budget().combined()
    measured = gum_budget().measured(50.000838e-3)
    checks = {
        "combined_variance_nm2": (u * 1e9) ** 2,
        "combined_u_nm": u * 1e9,
        "effective_dof": dof,
    }
    for name, value in checks.items():
        wanted = expected[name]
        assert value == pytest.approx(wanted["value"], abs=wanted["tolerance"]), name
    # The GUM cuts the degrees of freedom to a whole number before it takes t.
    cut = Budget([Contribution("u", 0, u, 1, "A", "t", math.floor(dof))], unit="m").measured(0.0)
    assert cut.coverage_factor(0.99) == pytest.approx(2.92, abs=0.005)
    assert cut.expanded(0.99).to("nm").magnitude == pytest.approx(93, abs=1)
    assert measured.dof == dof


def test_gum_g4_welch_satterthwaite():
    """JCGM 100:2008, G.4.1 example: 0.25, 0.57, 0.82 % with n = 10, 5, 15; u = 1.03 %, dof 19.0."""
    budget = Budget(
        [
            Contribution("x1", 1, 0.25, 1, "A", "t", 9),
            Contribution("x2", 1, 0.57, 1, "A", "t", 4),
            Contribution("x3", 1, 0.82, 1, "A", "t", 14),
        ]
    )
    u, dof = budget.combined()
    assert u == pytest.approx(1.03, abs=0.005)
    assert dof == pytest.approx(19.0, abs=0.05)


def test_known_contributions_do_not_limit():
    u, dof = Budget([Contribution("a", 1, 3.0, 1), Contribution("b", 1, 4.0, -1)]).combined()
    assert (u, dof) == (5.0, math.inf)
    assert Budget([]).combined() == (0.0, math.inf)


def test_groups_combine_with_their_signs():
    """GUM 5.2.2, note 1: with all r = +1 the combined u is the absolute linear sum."""
    a = Contribution("a", 1, 3.0, 1, group="wavelength")
    b = Contribution("b", 1, 1.0, -1, group="wavelength")
    assert Budget([a, b]).combined()[0] == pytest.approx(2.0)
    assert Budget([a, b], {"wavelength": 0.0}).combined()[0] == pytest.approx(math.sqrt(10))
    assert Budget([a, b], {"wavelength": -1.0}).combined()[0] == pytest.approx(4.0)


def test_group_variance_against_a_covariance_matrix():
    rng = np.random.default_rng(7)
    u, c, r = rng.uniform(0.1, 2, 4), rng.normal(size=4), 0.3
    covariance = np.outer(u, u) * (r + (1 - r) * np.eye(4))
    items = [Contribution(f"x{i}", 0, u[i], c[i], group="g") for i in range(4)]
    assert Budget(items, {"g": r}).combined()[0] ** 2 == pytest.approx(c @ covariance @ c)


def test_group_enters_welch_satterthwaite_as_one():
    a = Contribution("a", 0, 1.0, 1, "A", "t", 4, group="g")
    b = Contribution("b", 0, 1.0, 1, "A", "t", 4, group="g")
    assert Budget([a, b]).combined() == (2.0, 4.0)


@pytest.mark.slow
def test_coverage_of_a_budget_by_trial():
    """Two means of few readings, weighted: the 95 % interval holds the truth in 95 % of trials."""
    rng = np.random.default_rng(11)
    trials, inside = 4000, 0
    x, y = rng.normal(0, 1, (trials, 6)), rng.normal(0, 2, (trials, 4))
    ux, uy = x.std(axis=1, ddof=1) / math.sqrt(6), y.std(axis=1, ddof=1) / math.sqrt(4)
    for n in range(trials):
        budget = Budget(
            [
                Contribution("x", 0, float(ux[n]), 2, "A", "t", 5),
                Contribution("y", 0, float(uy[n]), -1, "A", "t", 3),
            ]
        )
        measured = budget.measured(2 * x[n].mean() - y[n].mean())
        half = measured.coverage_factor() * measured.u_magnitude
        inside += abs(measured.magnitude) < half
    # Welch-Satterthwaite is an approximation, good to about a percent here; σ of the count 0.35 %
    assert inside / trials == pytest.approx(0.95, abs=0.015)


def test_small_numbers_do_not_underflow():
    items = [Contribution("a", 0, 1e-100, 1e-90, "A", "t", 5)]
    u, dof = Budget(items * 2).combined()
    assert dof == pytest.approx(5.0) or u == 0.0


def test_leaving_out_and_doubling():
    budget = gum_budget()
    without = budget.without("length of the standard").combined()[0]
    doubled = budget.scaled("length of the standard", 2.0).combined()[0]
    u = budget.combined()[0]
    assert without == pytest.approx(math.sqrt(u**2 - 25e-9**2))
    assert doubled == pytest.approx(math.sqrt(u**2 + 3 * 25e-9**2))
    with pytest.raises(BudgetError, match="the budget has no contribution 'x', it has length"):
        budget.without("x")


def test_table_and_json():
    budget = gum_budget()
    lines = budget.table().splitlines()
    header = "contribution u in result of u² kind distribution dof group"
    assert " ".join(lines[0].split()) == header
    assert lines[1].startswith("length of the standard")
    assert lines[-1].split() == ["combined", "32", "nm", "16.7"]
    assert Budget.from_dict(budget.to_dict()).combined() == budget.combined()
    assert budget.to_dict()["dof"] == pytest.approx(16.74, abs=0.01)
    with pytest.raises(BudgetError, match="not a budget"):
        Budget.from_dict({"unit": "m"})


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"u": -1.0}, "a: u must be finite and ≥ 0, got -1.0"),
        ({"u": math.nan}, "a: u must be finite and ≥ 0, got nan"),
        ({"sensitivity": math.inf}, "a: sensitivity must be finite, got inf"),
        ({"kind": "C"}, "a: kind must be 'A' or 'B', got 'C'"),
        ({"dof": 0}, "a: dof must be > 0, got 0"),
    ],
)
def test_refused(changes, message):
    with pytest.raises(BudgetError) as caught:
        Contribution(**{"name": "a", "value": 0, "u": 1.0, "sensitivity": 1.0, **changes})
    assert str(caught.value) == message


def test_impossible_correlation():
    items = [Contribution(n, 0, 1.0, 1.0, group="g") for n in "abc"]
    with pytest.raises(BudgetError, match=r"correlation of g must be ≥ -0.5 and ≤ 1 for 3 members"):
        Budget(items, {"g": -0.9}).combined()
