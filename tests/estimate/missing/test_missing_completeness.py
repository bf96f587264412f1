"""Weights for complete people: exact algebra with a saturated model, statsmodels, and a planted truth."""

from __future__ import annotations

import math

import numpy as np
import pandas as pd
import pytest
from numpy.typing import NDArray
from statsmodels.discrete.discrete_model import Logit

from adjustplan.estimate.missing import complete_weights, completeness_design, fully_observed
from adjustplan.estimate.not_estimable import NotEstimableError

Floats = NDArray[np.float64]


def test_with_a_category_the_weight_is_people_over_complete_people() -> None:
    values = pd.DataFrame({"site": ["a", "a", "b", "b", "c", "c"]})
    counts = np.array([30, 10, 5, 20, 8, 8])
    complete = np.array([True, False] * 3)
    found = complete_weights(completeness_design(values, counts, {"site": "category"}), counts, complete)
    assert found.weights == pytest.approx([40 / 30, 0, 25 / 5, 0, 16 / 8, 0], rel=1e-8)
    assert found.weights @ counts == pytest.approx(counts.sum(), rel=1e-8)
    assert (counts @ found.scores) == pytest.approx(np.zeros(3), abs=1e-6)


def test_the_model_is_the_logistic_regression_on_the_rows() -> None:
    random = np.random.default_rng(1)
    values = pd.DataFrame({"age": np.repeat(np.linspace(40, 70, 11), 2), "sex": np.tile(["f", "m"], 11)})
    values = pd.concat([values, values], ignore_index=True)
    counts = random.integers(1, 30, 44)
    complete = np.repeat([True, False], 22)
    design = completeness_design(values, counts, {"age": "linear", "sex": "category"})
    rows = np.column_stack([np.ones(44), values["age"], values["sex"] == "m"]).astype(float)
    theirs = Logit(np.repeat(complete, counts).astype(float), np.repeat(rows, counts, axis=0)).fit(disp=0, tol=1e-12)
    ours = complete_weights(design, counts, complete)
    assert ours.probabilities == pytest.approx(theirs.predict(rows), rel=1e-7)
    middle = design.T @ (design * (counts * ours.probabilities * (1 - ours.probabilities))[:, None])
    assert ours.information == pytest.approx(middle, rel=1e-9)


def test_the_corrected_variance_of_a_mean_is_that_of_poststratification() -> None:
    """A saturated model: Σ n_v² s_v² / m_v + Σ n_v (ȳ_v - ȳ)², by hand, against the projected influences."""
    random = np.random.default_rng(2)
    site = np.repeat([0.0, 1.0, 2.0], [50, 30, 40])
    complete = random.random(120) < np.array([0.8, 0.4, 0.6])[site.astype(int)]
    outcome = np.where(complete, random.normal(size=120) + site, 0.0)
    values, ones = pd.DataFrame({"site": site}), np.ones(120, dtype=int)
    found = complete_weights(completeness_design(values, ones, {"site": "category"}), ones, complete)
    mean = float(found.weights @ outcome / found.weights.sum())
    strata = [(site == level) & complete for level in range(3)]
    sizes = [int((site == level).sum()) for level in range(3)]
    assert mean == pytest.approx(sum(n * outcome[s].mean() for n, s in zip(sizes, strata, strict=True)) / 120, rel=1e-8)
    known = found.weights * (outcome - mean)
    influence = known - found.learnt(known)
    by_hand = sum(
        n**2 / s.sum() * outcome[s].var() + n * (outcome[s].mean() - mean) ** 2
        for n, s in zip(sizes, strata, strict=True)
    )
    assert influence @ influence == pytest.approx(by_hand, rel=1e-7)
    assert influence @ influence < known @ known


def test_cells_and_rows_give_the_same_weights_and_corrections() -> None:
    random = np.random.default_rng(3)
    rows = pd.DataFrame({"x": random.integers(0, 3, 400).astype(float), "y": random.integers(0, 2, 400).astype(float)})
    complete = random.random(400) < 0.4 + 0.2 * rows["y"].to_numpy()
    ones = np.ones(400, dtype=int)
    entries = {"x": "linear", "y": "category"}
    one = complete_weights(completeness_design(rows, ones, entries), ones, complete)
    cells = rows.assign(complete=complete).groupby(["x", "y", "complete"]).size().reset_index(name="people")
    counts, whole = cells["people"].to_numpy(), cells["complete"].to_numpy()
    many = complete_weights(completeness_design(cells[["x", "y"]], counts, entries), counts, whole)
    pooled = rows.assign(w=one.weights, l=one.learnt(one.weights * rows["x"].to_numpy()), complete=complete)
    pooled = pooled.groupby(["x", "y", "complete"]).mean()
    assert many.weights == pytest.approx(pooled["w"].to_numpy(), rel=1e-8)
    assert many.learnt(counts * many.weights * cells["x"].to_numpy()) == pytest.approx(pooled["l"].to_numpy(), abs=1e-8)


def test_where_everybody_is_complete_the_weight_is_one() -> None:
    """The logistic model has no estimate there; the limit of its likelihood is a probability of 1."""
    values = pd.DataFrame({"site": ["a", "a", "b", "c", "c"]})
    counts, complete = np.array([30, 10, 12, 8, 8]), np.array([True, False, True, True, False])
    found = complete_weights(completeness_design(values, counts, {"site": "category"}), counts, complete)
    assert found.weights == pytest.approx([40 / 30, 0, 1, 2, 0], rel=1e-8)
    assert not found.scores[2].any()
    assert np.isfinite(found.learnt(counts * found.weights)).all()


def test_where_nobody_is_complete_there_is_no_estimate() -> None:
    values = pd.DataFrame({"site": ["a", "a", "b", "c", "c"]})
    counts, complete = np.array([30, 10, 12, 8, 8]), np.array([True, False, False, True, False])
    with pytest.raises(NotEstimableError) as caught:
        complete_weights(completeness_design(values, counts, {"site": "category"}), counts, complete)
    assert caught.value.finding.code == "complete-separation"
    assert caught.value.finding.message.startswith("12 people ")


def test_a_straight_line_that_splits_complete_from_incomplete_is_separation() -> None:
    values = pd.DataFrame({"age": np.arange(20.0)})
    counts = np.ones(20, dtype=int)
    with pytest.raises(NotEstimableError) as caught:
        complete_weights(completeness_design(values, counts, {"age": "linear"}), counts, values["age"].to_numpy() > 8)
    assert caught.value.finding.code == "complete-separation"


def test_without_a_fully_observed_variable_it_equals_complete_cases() -> None:
    values, counts = pd.DataFrame({"a": [1.0, np.nan, 2.0]}), np.array([5, 6, 9])
    assert fully_observed(values, counts, ["a"]) == ()
    found = complete_weights(completeness_design(values, counts, {}), counts, np.array([True, False, True]))
    assert found.weights == pytest.approx([20 / 14, 0, 20 / 14], rel=1e-8)
    assert [finding.code for finding in found.findings] == ["complete-constant"]


def test_complete_data_and_no_data_are_told_apart() -> None:
    design, counts = np.column_stack([np.ones(2), [0.0, 1.0]]), np.array([4, 6])
    found = complete_weights(design, counts, np.array([True, True]))
    assert found.weights.tolist() == [1.0, 1.0]
    assert [finding.code for finding in found.findings] == ["complete-everybody"]
    assert found.learnt(np.ones(2)).tolist() == [0.0, 0.0]
    with pytest.raises(NotEstimableError) as caught:
        complete_weights(design, counts, np.array([False, False]))
    assert caught.value.finding.code == "complete-nobody"


def test_rarely_complete_people_are_counted() -> None:
    values = pd.DataFrame({"site": ["a", "a", "b", "b"]})
    counts, complete = np.array([900, 100, 2, 98]), np.array([True, False, True, False])
    found = complete_weights(completeness_design(values, counts, {"site": "category"}), counts, complete)
    assert [finding.code for finding in found.findings] == ["complete-rare"]
    # Kish: (900 · 10/9 + 2 · 50)² / (900 · (10/9)² + 2 · 50²)
    effective = (1000 + 100) ** 2 / (900 * (10 / 9) ** 2 + 2 * 2500)
    message = found.findings[0].message
    assert "100 of 1100 people" in message
    assert "below 5 %" in message
    assert "largest weight is 50" in message
    assert f"count like {effective:.0f}" in message


def test_empty_cells_and_collinear_columns_change_nothing() -> None:
    design = np.column_stack([np.ones(5), [0.0, 0, 1, 1, 7]])
    counts, complete = np.array([30, 10, 5, 20, 0]), np.array([True, False, True, False, True])
    plain = complete_weights(design[:4], counts[:4], complete[:4])
    odd = complete_weights(np.column_stack([design, 2 * design[:, 1]]), counts, complete)
    assert odd.weights[:4] == pytest.approx(plain.weights, rel=1e-8)
    sums = plain.weights * np.array([1.0, 2, 3, 4])
    assert odd.learnt(np.append(sums, 0.0))[:4] == pytest.approx(plain.learnt(sums), abs=1e-9)


def test_corrected_intervals_hold_a_planted_slope() -> None:
    """Missingness depends on the outcome: complete cases are biased, weighted ones are not, 95 % intervals hold.

    400 studies of 600 people; y = x + e, complete with probability expit(0.5 - y + 0.3 x).
    """
    random = np.random.default_rng(4)
    held, weighted, naive, errors = 0, [], [], []
    for _ in range(400):
        x = random.normal(size=600)
        y = x + random.normal(size=600)
        complete = random.random(600) < 1 / (1 + np.exp(-0.5 + y - 0.3 * x))
        found = complete_weights(np.column_stack([np.ones(600), x, y]), np.ones(600, dtype=int), complete)
        columns = np.column_stack([np.ones(600), x])
        bread = np.linalg.inv(columns.T @ (columns * found.weights[:, None]))
        beta = bread @ columns.T @ (found.weights * y)
        known = (columns * (found.weights * (y - columns @ beta))[:, None]) @ bread
        influence = (known - found.learnt(known))[:, 1]
        error = math.sqrt(influence @ influence)
        held += abs(beta[1] - 1) < 1.96 * error
        weighted.append(beta[1])
        errors.append(error)
        naive.append(np.linalg.lstsq(columns[complete], y[complete], rcond=None)[0][1])
    assert abs(np.mean(naive) - 1) > 10 * np.std(naive) / 20
    assert abs(np.mean(weighted) - 1) < 4 * np.std(weighted) / 20
    assert abs(held / 400 - 0.95) < 4 * math.sqrt(0.95 * 0.05 / 400)
    assert np.mean(errors) == pytest.approx(np.std(weighted), rel=4 / math.sqrt(2 * 400))
