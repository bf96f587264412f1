"""Outcomes per parameter, counted."""

from __future__ import annotations

import pytest

from adjustplan.estimate.diagnostics.outcomes import outcomes_findings, outcomes_per_parameter


def test_the_rarer_of_outcome_and_no_outcome_counts():
    assert outcomes_per_parameter(900, 100, 5).ratio == 20
    assert outcomes_per_parameter(100, 900, 5).ratio == 20
    assert outcomes_per_parameter(900, None, 5).ratio == 180


@pytest.mark.parametrize(("outcomes", "severity"), [(100, None), (99, "note"), (50, "note"), (49, "warning")])
def test_few_outcomes_are_told_with_their_number(outcomes, severity):
    said = outcomes_findings(outcomes_per_parameter(outcomes, 10_000, 10))
    assert [finding.severity for finding in said] == ([severity] if severity else [])
    if said:
        assert said[0].code == "estimate-few-outcomes"
        assert f"{outcomes / 10:.3g} outcomes per parameter ({outcomes} outcomes, 10 parameters)" in said[0].message


def test_a_model_without_parameters_is_refused():
    with pytest.raises(ValueError, match="at least one parameter"):
        outcomes_per_parameter(10, 10, 0)
