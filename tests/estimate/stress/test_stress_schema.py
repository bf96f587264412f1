"""The plan's ``[stress]``: what it takes, what it refuses, and that order in a list means nothing."""

from __future__ import annotations

import json
from typing import Any

import pytest
from jsonschema import Draft202012Validator
from pydantic import ValidationError

from adjustplan.plan.stress_schema import Distribution, Factor, Probability, Stress

U = {"name": "u", "among_exposed": {"low": 0.3, "high": 0.6}, "among_reference": 0.2, "outcome_ratio": 2}


@pytest.mark.parametrize(
    ("given", "words"),
    [
        ({"low": 0.6, "high": 0.3}, "must rise in the order low, high"),
        ({"low": 0.1, "mode": 0.9, "high": 0.8}, "must rise in the order low, mode, high"),
        ({"low": 0.1, "from": 0.5, "to": 0.4, "high": 0.8}, "must rise in the order low, from, to, high"),
        ({"low": 0.2, "high": 0.2}, "low must be below high"),
        ({"low": 0.2}, "Give a number, { low, high }"),
        ({}, "Give a number, { low, high }"),
        ({"low": 0.1, "high": 0.2, "sd": 1.0}, "Give a number, { low, high }"),
        ({"mean": 0.5, "sd": 0.0}, "sd must be above 0"),
        ({"mean": 1.5, "sd": 0.1}, "between 0 and 1"),
        ({"low": 0.5, "high": 1.2}, "between 0 and 1"),
        (1.2, "between 0 and 1"),
        (-0.1, "between 0 and 1"),
        ({"alpha": 0.0, "beta": 2.0}, "alpha and beta must be above 0"),
        (float("nan"), "finite"),
        (True, "valid dictionary"),
        ("often", "valid dictionary"),
    ],
)
def test_what_is_no_distribution_of_a_probability_is_refused_with_one_reason(given: Any, words: str) -> None:
    with pytest.raises(ValidationError) as caught:
        Probability.model_validate(given)
    (error,) = caught.value.errors()
    assert words in error["msg"]


def test_ratios_are_above_0_and_have_no_beta_distribution() -> None:
    for given in (0.0, {"low": 0.0, "high": 2.0}, {"alpha": 1.0, "beta": 1.0}, 2000.0):
        with pytest.raises(ValidationError):
            Factor.model_validate(given)
    assert Factor.model_validate({"low": 0.5, "high": 2.0}).shape == "uniform"


@pytest.mark.parametrize(
    "stress",
    [
        {"confounder": [{"name": "u", "with_exposure": 0.5, "with_outcome": 2.0}]},
        {"confounder": [{"name": "u", "with_exposure": 2.0, "with_outcome": float("inf")}]},
        {"binary_confounder": [{**U, "outcome_difference": 1.0}]},
        {"binary_confounder": [{key: U[key] for key in ("name", "among_exposed", "among_reference")}]},
        {"selection": [{"name": "s"}]},
        {"selection": [{"name": "s", "factor": 1.2, "exposed_with_outcome": 0.5}]},
        {"selection": [{"name": "s", "exposed_with_outcome": 0.5}]},
        {"linear_confounder": [{"name": "u", "share_of_exposure": 1.0, "share_of_outcome": 0.2}]},
        {"draws": 10},
        {"target": float("nan")},
        {"yardstick": ["age"]},
    ],
)
def test_what_makes_no_sense_is_refused_once(stress: dict[str, Any]) -> None:
    with pytest.raises(ValidationError) as caught:
        Stress.model_validate(stress)
    assert len(caught.value.errors()) == 1


def test_a_plain_number_is_the_distribution_of_a_known_value() -> None:
    assert Distribution.model_validate(2) == Distribution.model_validate({"value": 2.0})
    assert str(Distribution.model_validate(0.25)) == "0.25"
    assert str(Distribution.model_validate({"low": 1, "from": 2, "to": 3, "high": 4})) == (
        "{ low = 1, from = 2, to = 3, high = 4 }"
    )


def test_the_schema_for_editors_allows_a_number_and_a_table() -> None:
    schema = Stress.model_json_schema(by_alias=True)
    json.dumps(schema)
    checker = Draft202012Validator(schema)
    assert checker.is_valid({"binary_confounder": [U]})
    assert not checker.is_valid({"binary_confounder": [{**U, "among_reference": "few"}]})
    assert not checker.is_valid({"binary_confounder": [{**U, "among_reference": {"lo": 0.1}}]})
