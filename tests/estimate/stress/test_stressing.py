"""The planned estimate under stress: what the plan asks is answered, in text and JSON alike."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import pytest
from stress_plans import OBSERVED, TABLE, observed, plan_with

from adjustplan.errors import PlanError
from adjustplan.estimate.stress import Fragility, Observed, TwoByTwo, Yardstick, stress
from adjustplan.plan.stress_schema import Stress

WHOLE = """
[stress]
draws = 2000
seed = 7

[[stress.confounder]]
name = "chronotype"
with_exposure = 2.0
with_outcome = 1.8

[[stress.confounder]]
name = "ambition"
with_exposure = 3.0
with_outcome = 3.0

[[stress.binary_confounder]]
name = "evening type"
among_exposed = { low = 0.3, high = 0.6 }
among_reference = 0.2
outcome_ratio = { low = 1.2, mode = 1.5, high = 2.0 }

[[stress.misclassified_exposure]]
name = "rota"
sensitivity = { low = 0.8, high = 0.95 }
specificity = 0.99

[[stress.misclassified_outcome]]
name = "register"
sensitivity = { alpha = 80, beta = 10 }
specificity = 0.995

[[stress.selection]]
name = "reply"
factor = { low = 0.9, high = 1.2 }
"""


def codes(result: Fragility) -> list[str]:
    return [finding.code for finding in result.findings]


def test_without_a_stress_table_there_are_evalues_and_yardsticks(tmp_path: Path) -> None:
    told = stress(plan_with(tmp_path), OBSERVED)
    assert told.clean
    assert told.confounding is not None
    assert told.confounding.evalue.estimate == pytest.approx(1.62 + math.sqrt(1.62 * 0.62))
    assert told.confounding.evalue.limit == pytest.approx(1.3 + math.sqrt(1.3 * 0.3))
    assert [each.name for each in told.yardsticks] == ["age", "depot"]
    assert told.yardsticks[0].moved.estimate == pytest.approx(1.62 * 1.62 / 1.75)
    assert told.biases == ()


def test_the_graph_says_which_unmeasured_variables_the_evalue_is_about(tmp_path: Path) -> None:
    told = stress(plan_with(tmp_path), OBSERVED)
    assert told.unmeasured == ("chronotype",)  # genes cause the outcome alone, mood is affected by the exposure
    assert "“chronotype” is unmeasured" in str(told)
    assert "at least 2.62" in str(told)


def test_a_named_confounder_is_bounded_at_its_strengths(tmp_path: Path) -> None:
    told = stress(plan_with(tmp_path, WHOLE), OBSERVED)
    assert told.confounding is not None
    ambition, chronotype = told.confounding.named
    assert (ambition.name, ambition.in_graph, chronotype.in_graph) == ("ambition", False, True)
    assert chronotype.bounded.factor == pytest.approx(2.0 * 1.8 / 2.8)  # Ding and VanderWeele 2016
    assert chronotype.bounded.moved.estimate == pytest.approx(1.62 * 2.8 / 3.6)
    assert not chronotype.bounded.explains
    assert ambition.bounded.explains
    assert "With risk ratios of at most 2 and 1.8 it could leave 1.26" in str(told)


def numbers_in(value: Any) -> list[float]:
    if isinstance(value, dict):
        return [number for part in value.values() for number in numbers_in(part)]
    if isinstance(value, list):
        return [number for part in value for number in numbers_in(part)]
    return [value] if isinstance(value, float) else []


def test_text_and_json_say_the_same(tmp_path: Path) -> None:
    result = stress(plan_with(tmp_path, WHOLE), OBSERVED)
    told = json.loads(json.dumps(result.to_dict(), allow_nan=False))
    text = str(result)
    for sentence in [*told["summary"], *(each["said"] for each in told["unmeasured"]), *told["cautions"]]:
        assert sentence in text
    moved = [each["bounded"]["moved"] for each in told["confounding"]["named"]]
    moved += [each["moved"] for each in told["yardsticks"]]
    moved += [each[key] for each in told["biases"] for key in ("systematic", "total")]
    assert len(moved) == 2 + 2 + 8
    for each in moved:
        assert f"{each['estimate']:.3g} ({each['lower']:.3g} to {each['upper']:.3g})" in text
    for row in told["confounding"]["array"]:
        for cell in row:
            assert f"{cell['moved']['estimate']:.3g}" in text
    assert len(numbers_in(told)) > 100


def test_frames_and_notebooks_show_what_remains(tmp_path: Path) -> None:
    result = stress(plan_with(tmp_path, WHOLE), OBSERVED)
    frame = result.to_frame()
    assert list(frame.columns) == ["assumption", "name", "estimate", "lower", "upper"]
    assert len(frame) == 1 + 2 + 2 + 8
    assert "E-value" in result._repr_html_()


def test_the_order_of_lists_in_the_plan_changes_nothing(tmp_path: Path) -> None:
    head, *parts = WHOLE.split("[[")
    turned = head + "".join(f"[[{part}\n" for part in reversed(parts))
    first, other = (stress(plan_with(tmp_path, text), OBSERVED) for text in (WHOLE, turned))
    assert first.biases == other.biases
    assert first.confounding == other.confounding


def test_a_bias_added_to_the_plan_leaves_the_draws_of_the_others(tmp_path: Path) -> None:
    fewer = WHOLE[: WHOLE.index("[[stress.selection]]")]
    told = stress(plan_with(tmp_path, WHOLE), OBSERVED), stress(plan_with(tmp_path, fewer), OBSERVED)
    assert set(told[1].biases) < set(told[0].biases)


def test_a_binary_confounder_says_how_common_it_must_be(tmp_path: Path) -> None:
    text = """
[[stress.binary_confounder]]
name = "evening type"
among_exposed = 0.4
among_reference = 0.1
outcome_ratio = 4.0
"""
    told = stress(plan_with(tmp_path, text), OBSERVED).prevalences[0]
    assert told.among_exposed is not None
    assert (1 + told.among_exposed * 3) / (1 + 0.1 * 3) == pytest.approx(1.62)  # Bross 1966
    weak = text.replace("4.0", "1.5")
    assert stress(plan_with(tmp_path, weak), OBSERVED).prevalences[0].among_exposed is None


def linear(**changes: Any) -> Observed:
    return Observed(
        "mean difference",
        **{
            "estimate": 0.097,
            "lower": 0.0515,
            "upper": 0.1425,
            "standard_error": 0.0232,
            "outcome_sd": 0.36,
            "degrees_of_freedom": 783.0,
            "yardsticks": {"age": Yardstick(0.1, 0.0091, 0.109), "depot": Yardstick(0.1, 0.6, 0.01)},
            **changes,
        },
    )


def test_a_linear_model_is_put_in_shares_of_variance(tmp_path: Path) -> None:
    text = '[[stress.linear_confounder]]\nname = "mild"\nshare_of_exposure = 0.1\nshare_of_outcome = 0.2\n'
    told = stress(plan_with(tmp_path, text, measure="mean difference"), linear())
    assert told.robustness is not None
    assert told.robustness.value == pytest.approx(0.139, abs=0.001)  # Cinelli and Hazlett 2020, from memory
    (age,) = told.yardsticks
    assert (age.name, age.way) == ("age", "explained variance")
    assert age.moved.estimate == pytest.approx(0.075, abs=0.001)
    assert codes(told) == ["stress-yardstick-too-strong"]
    assert told.linear_confounders[0].move.moved.estimate < 0.05
    assert "robustness value" in str(told)
    assert told.to_dict()["robustness"]["value"] == told.robustness.value


def test_without_a_linear_model_shares_of_variance_are_refused(tmp_path: Path) -> None:
    text = '[[stress.linear_confounder]]\nname = "mild"\nshare_of_exposure = 0.1\nshare_of_outcome = 0.2\n'
    told = stress(plan_with(tmp_path, text), OBSERVED)
    assert codes(told) == ["stress-unfit"]
    lines = (tmp_path / "plan.toml").read_text().splitlines()
    assert told.findings[0].line == lines.index("[[stress.linear_confounder]]") + 1
    assert told.linear_confounders == ()


@pytest.mark.parametrize(
    ("study", "common"),
    [
        ('sampling = "incidence-density"', False),
        ('sampling = "case-cohort"', False),
        ('sampling = "cumulative"\nassumed_risk = 0.02', False),
        ('sampling = "cumulative"\nassumed_risk = 0.2', True),
        ('sampling = "cumulative"', True),
    ],
)
def test_the_sampling_of_controls_decides_what_an_odds_ratio_is(tmp_path: Path, study: str, common: bool) -> None:
    plan = plan_with(tmp_path, measure="odds ratio", design="case-control", study=study)
    told = stress(plan, observed(measure="odds ratio"))
    assert told.confounding is not None
    assert told.confounding.evalue.factor == pytest.approx(math.sqrt(1.62) if common else 1.62)
    assert ("stress-outcome-frequency" in codes(told)) == (study == 'sampling = "cumulative"')


def test_in_a_cohort_the_table_says_whether_the_outcome_is_rare(tmp_path: Path) -> None:
    plan = plan_with(tmp_path, measure="odds ratio")
    rare = stress(plan, observed(measure="odds ratio"))  # 12 % and 7 %
    assert rare.confounding is not None
    assert rare.confounding.evalue.factor == pytest.approx(1.62)
    often = TwoByTwo(160.0, 840.0, 200.0, 2800.0)  # 16 % among the exposed
    common = stress(plan, observed(measure="odds ratio", table=often))
    assert common.confounding is not None
    assert common.confounding.evalue.factor == pytest.approx(math.sqrt(1.62))


def test_a_risk_difference_without_adjusted_risks_takes_the_crude_one_and_says_so(tmp_path: Path) -> None:
    plan = plan_with(tmp_path, measure="risk difference")
    numbers = {"measure": "risk difference", "estimate": 0.05, "lower": 0.03, "upper": 0.07, "standard_error": 0.01}
    told = stress(plan, observed(**numbers, yardsticks={}))
    assert "stress-crude-risk" in codes(told)
    assert told.confounding is not None
    assert told.confounding.evalue.factor == pytest.approx((200 / 3000 + 0.05) / (200 / 3000))
    nothing = stress(plan, observed(**numbers, table=None, yardsticks={}))
    assert nothing.confounding is None
    assert "stress-no-conversion" in codes(nothing)
    assert not nothing.clean
    given = stress(plan, observed(**numbers, risks=(0.10, 0.05)))
    assert given.confounding is not None
    assert given.confounding.evalue.factor == pytest.approx(2.0)
    wrong = stress(plan, observed(**numbers, risks=(0.10, 0.02)))
    assert wrong.confounding is None


def test_a_target_other_than_no_effect_is_moved_to(tmp_path: Path) -> None:
    told = stress(plan_with(tmp_path, "[stress]\ntarget = 1.2\n"), OBSERVED)
    assert told.confounding is not None
    assert told.confounding.evalue.factor == pytest.approx(1.62 / 1.2)
    assert "to 1.2," in str(told)


IMPOSSIBLE = """
[[stress.misclassified_exposure]]
name = "rota"
sensitivity = 0.9
specificity = {specificity}
"""


def test_impossible_draws_are_said_and_never_hidden(tmp_path: Path) -> None:
    # 3000 of 4000 are recorded as not exposed: below a specificity of 0.73 none could be truly so
    never = stress(plan_with(tmp_path, IMPOSSIBLE.format(specificity="0.6")), OBSERVED)
    assert codes(never) == ["stress-no-possible-draw"]
    assert not never.clean
    assert never.biases[0].systematic is None
    assert "20000 of 20000" in str(never)
    often = stress(plan_with(tmp_path, IMPOSSIBLE.format(specificity="{ low = 0.6, high = 0.9 }")), OBSERVED)
    assert codes(often) == ["stress-impossible-draws"]
    assert often.findings[0].severity == "warning"
    assert often.biases[0].systematic is not None


def test_a_normal_distribution_that_is_cut_off_is_said(tmp_path: Path) -> None:
    told = stress(plan_with(tmp_path, IMPOSSIBLE.format(specificity="{ mean = 0.98, sd = 0.02 }")), OBSERVED)
    assert codes(told)[0] == "stress-cut-off"
    assert "15.9 %" in told.findings[0].message  # 1 − Φ(1)


def test_sampling_by_a_misclassified_outcome_is_warned_of(tmp_path: Path) -> None:
    text = '[[stress.misclassified_outcome]]\nname = "register"\nsensitivity = 0.9\nspecificity = 1.0\n'
    plan = plan_with(tmp_path, text, measure="odds ratio", design="case-control", study='sampling = "case-cohort"')
    assert codes(stress(plan, observed(measure="odds ratio"))) == ["stress-sampled-by-outcome"]


def test_a_bias_that_does_not_fit_the_measure_is_left_out_with_a_finding(tmp_path: Path) -> None:
    plan = plan_with(tmp_path, WHOLE, measure="hazard ratio")
    told = stress(plan, observed(measure="hazard ratio"))
    assert codes(told) == ["stress-unfit", "stress-unfit"]
    assert {bias.name for bias in told.biases} == {"evening type", "reply"}


def test_a_covariate_without_an_estimate_is_no_yardstick(tmp_path: Path) -> None:
    told = stress(plan_with(tmp_path), observed(yardsticks={"age": Yardstick()}))
    assert codes(told) == ["stress-no-yardstick"] * 2
    assert told.yardsticks == ()


CONFOUNDER = '[[stress.confounder]]\nname = "{name}"\nwith_exposure = 2.0\nwith_outcome = 2.0\n'


@pytest.mark.parametrize(
    ("text", "code", "words", "below"),
    [
        ('[stress]\nyardsticks = ["agee"]\n', "stress-yardstick", "Did you mean “age”?", 1),
        ("[stress]\ntarget = 0.0\n", "stress-target", "cannot truly be 0", 1),
        (CONFOUNDER.format(name="age"), "stress-confounder", "in the planned set", 1),
        (CONFOUNDER.format(name="sleep_debt"), "stress-confounder", "measured according to the graph", 1),
        (CONFOUNDER.format(name="diabetes"), "stress-confounder", "is the outcome", 1),
        (CONFOUNDER.format(name="u") * 2, "stress-name-twice", "“u” 2 times", 5),
    ],
)
def test_what_does_not_fit_the_plan_is_refused_with_one_finding_and_its_line(
    tmp_path: Path, text: str, code: str, words: str, below: int
) -> None:
    with pytest.raises(PlanError) as caught:
        stress(plan_with(tmp_path, text), OBSERVED)
    (finding,) = caught.value.findings
    assert finding.code == code
    assert words in str(finding)
    lines = (tmp_path / "plan.toml").read_text().splitlines()
    start = next(place for place, line in enumerate(lines, 1) if "[stress" in line)
    assert finding.line == start + below


def test_a_risk_difference_beyond_1_is_refused(tmp_path: Path) -> None:
    plan = plan_with(tmp_path, "[stress]\ntarget = 1.5\n", measure="risk difference")
    with pytest.raises(PlanError, match=r"cannot truly be 1\.5"):
        stress(plan, observed(measure="risk difference", risks=(1.0, 0.0)))


def test_the_whole_example_is_read_as_written() -> None:
    import tomllib

    told = Stress.model_validate(tomllib.loads(WHOLE)["stress"])
    assert (told.draws, told.seed, len(told.confounder)) == (2000, 7, 2)
    assert TABLE.cells[0] == 120.0
