"""Whatever stands in a plan, a graph or a seal file: a check ends in findings that say something, never in a fault."""

from __future__ import annotations

import tempfile
import warnings
from functools import lru_cache
from pathlib import Path

from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from adjustplan.check import check, check_plan
from adjustplan.check.plan_files import find_plans
from adjustplan.errors import AdjustplanWarning
from adjustplan.plan import read_plan
from adjustplan.plan.sealing import amend, seal

GRAPH = """\
age, site  -> night_work
age        -> diabetes              : incidence rises with age
site       -> diabetes
night_work -> sleep_debt -> diabetes
night_work, diabetes -> sick_leave
chronotype -> night_work            : "evening types, mostly"
chronotype: unmeasured, "Chronotype"
age:        wave=0, cost=0
in_post:    restricted
sleep_log:  proxy of sleep_debt
"""
PLAN = """\
title = "Night work and diabetes"
graph = "g.edges"

[question]
exposure = "night_work"
outcome = "diabetes"
effect = "total"
contrast = { exposed = true, reference = false }
other_exposures = ["sleep_debt"]

[study]
design = "cohort"
lost = "in_post"
exposure_begins = 2015-01-01
exposure_known = 2016-01-01
follow_up_begins = 2015-06-01
size = 10000
assumed_risk = 0.05
exposed_share = 0.4

[adjustment]
set = ["age", "site"]
rationale = '''On file.'''

[[adjustment.alternative]]
set = ["age"]

[analysis]
measure = "risk ratio"
data = "no.csv"
forms = { age = "spline(4)" }

[[waiver]]
rule = "graph-reason"
reason = "draft"
"""
PIECES = st.sampled_from(
    [
        *("[", "]", "{", "}", '"', "'", '"""', "=", ",", "#", ":", "->", "->?", "→"),
        *("\n", "\t", "\r", "\x00", "\x1b", "\ufeff"),
        *("inf", "-1", "nan", "0", "1e400", "9" * 25, "true", "2015-13-01", "[[study]]", "case-control", "case-series"),
        *("trial", "cross-sectional", "ecological", "direct", "night_work", "diabetes", "in_post", "sleep_debt"),
        *("sick_leave", "chronotype", "restricted", "unmeasured", "wave=3", "wave=-1", "cost=nan", "proxy of age"),
        *("odds ratio", "mean difference", "hazard ratio", "linear", "..", "/", "*"),
    ]
)
EDITS = st.lists(
    st.tuples(st.floats(0, 1), st.integers(0, 12), PIECES | st.text(max_size=6) | st.just("")), min_size=1, max_size=6
)
BYTES = st.binary(max_size=300) | st.text(max_size=200).map(lambda text: text.encode("utf-8", "surrogatepass"))


def edited(text: str, edits: list[tuple[float, int, str]]) -> bytes:
    """A text in which pieces have been replaced: at a share of its length, so many letters, by this."""
    for share, length, piece in edits:
        place = int(share * len(text))
        text = text[:place] + piece + text[place + length :]
    return text.encode("utf-8", "surrogatepass")


def swapped(text: str, old: str, new: str) -> bytes:
    return text.replace(old, new).encode("utf-8", "surrogatepass")


@lru_cache
def true_seal() -> str:
    """The seal file of the plan, with an amendment."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "plan.toml")
        Path(folder, "g.edges").write_text(GRAPH)
        path.write_text(PLAN.replace("10000", "9000"))
        seal(read_plan(path), by="A. B.")
        path.write_text(PLAN)
        amend(read_plan(path), "More people could be had.", by="A. B.", data_seen=False)
        return path.with_suffix(".seal").read_text(encoding="utf-8")


def assert_said(plan: bytes, graph: bytes = GRAPH.encode(), seal: bytes | None = None) -> None:
    """Check a plan with this graph and this seal file; what is found must have a code and a message."""
    with tempfile.TemporaryDirectory() as folder, warnings.catch_warnings():
        warnings.simplefilter("ignore", AdjustplanWarning)
        path = Path(folder, "plan.toml")
        path.write_bytes(plan)
        Path(folder, "g.edges").write_bytes(graph)
        if seal is not None:
            path.with_suffix(".seal").write_bytes(seal)
        report = check_plan(path)
        for finding in (*report.findings, *(waived.finding for waived in report.waived)):
            assert finding.code
            assert finding.message.strip()
        assert report.read or report.findings
        assert check(find_plans([folder]).paths).to_dict()["findings"] is not None


FUZZ = settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
VALUES = st.sampled_from(
    [
        *('"cohort"', '"total"', "10000", "0.05", "0.4", '["age", "site"]', '["age"]', '["sleep_debt"]', '"in_post"'),
        *('"night_work"', '"diabetes"', '"risk ratio"', '"g.edges"', '"no.csv"', '"spline(4)"', "true", "2015-01-01"),
    ]
)
OTHER_VALUES = st.sampled_from(
    [
        *('"case-control"', '"trial"', '"cross-sectional"', '"ecological"', '"case-series"', '"direct"'),
        *('["age", "age"]', "[]", '["night_work"]', '["diabetes"]', '["in_post"]', '["chronotype"]', '["sick_leave"]'),
        *('"sick_leave"', '"in_post"', '"chronotype"', '"night_work"', '"diabetes"'),
        *('"odds ratio"', '"mean difference"'),
        *('"hazard ratio"', '"."', '"plan.toml"', '"category"', '"linear"', "1", "-5", "inf", "nan", "1e-300", "0.999"),
        *("99999999999999999999", "2015-02-30", "2020-01-01T00:00:00", "{}", "[[]]", '""', '" "', '"\\u0000"', "false"),
    ]
)


@FUZZ
@given(EDITS)
def test_a_broken_plan(edits: list[tuple[float, int, str]]) -> None:
    assert_said(edited(PLAN, edits))


@FUZZ
@given(st.lists(st.tuples(VALUES, OTHER_VALUES), min_size=1, max_size=4))
@example([('"diabetes"', '"night_work"')])
@example([('"in_post"', '"night_work"')])
@example([('["age", "site"]', '["night_work", "diabetes"]')])
def test_a_plan_that_reads_well_and_makes_no_sense(values: list[tuple[str, str]]) -> None:
    plan = PLAN
    for old, new in values:
        plan = plan.replace(old, new)
    assert_said(plan.encode())


@FUZZ
@given(EDITS)
@example(
    [(0.0, len(GRAPH), "night_work -> diabetes\nage, site, in_post, sleep_debt -> diabetes\ndiabetes: restricted")]
)
def test_a_broken_graph(edits: list[tuple[float, int, str]]) -> None:
    assert_said(PLAN.encode(), edited(GRAPH, edits))


@FUZZ
@given(BYTES, BYTES, BYTES)
def test_files_of_anything(plan: bytes, graph: bytes, seal: bytes) -> None:
    assert_said(plan)
    assert_said(PLAN.encode(), graph)
    assert_said(PLAN.encode(), seal=seal)


@FUZZ
@given(EDITS)
def test_a_broken_seal_file(edits: list[tuple[float, int, str]]) -> None:
    assert_said(PLAN.encode(), seal=edited(true_seal(), edits))


def test_toml_that_overtaxes_its_reader() -> None:
    assert_said(f"{PLAN}\nx = {'[' * 5000}".encode())
    assert_said(swapped(PLAN, "10000", "1" * 5000))
    assert_said(swapped(PLAN, "10000", "1" * 400))


def test_a_graph_that_is_a_folder_or_the_plan_itself() -> None:
    assert_said(swapped(PLAN, "g.edges", "."))
    assert_said(swapped(PLAN, "g.edges", "plan.toml"))
    assert_said(swapped(PLAN, "g.edges", "no/such.edges"))
    assert_said(swapped(PLAN, "g.edges", "a\\u0000.edges"))
