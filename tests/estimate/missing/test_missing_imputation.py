"""Chained imputation on cells against joint distributions known by exact algebra, and what it refuses."""

from __future__ import annotations

from itertools import product

import numpy as np
import pandas as pd
import pytest
from numpy.typing import NDArray

from adjustplan.estimate.missing import Chain, Completed, chains, check_drift, check_traces, impute, impute_one, prepare
from adjustplan.estimate.missing.coding import code, pool
from adjustplan.estimate.not_estimable import NotEstimableError

Whole = NDArray[np.int64]


def expected_cells(probabilities: pd.DataFrame, people: int, lack: dict[str, pd.Series]) -> tuple[pd.DataFrame, Whole]:
    """Cells with their expected counts when each variable of ``lack`` is missing with the given probability.

    ``probabilities`` has a column ``p``; variables go missing independently of each other given their probability.
    """
    names = [name for name in probabilities.columns if name != "p"]
    parts = []
    for gone in product([False, True], repeat=len(lack)):
        part, chance = probabilities[names].astype(object).copy(), probabilities["p"].copy()
        for (name, probability), lost in zip(lack.items(), gone, strict=True):
            chance = chance * (probability if lost else 1 - probability)
            if lost:
                part[name] = None
        parts.append(part.assign(p=chance))
    cells = pd.concat(parts).groupby(names, dropna=False)["p"].sum().reset_index()
    for name in names:
        if name != "site":
            cells[name] = cells[name].astype(float)
    counts = np.round(cells["p"].to_numpy(dtype=float) * people).astype(np.int64)
    return cells[names], counts


def completed_table(copies: list[Completed], names: list[str]) -> pd.DataFrame:
    """Counts of every combination, one column for each copy."""
    tables = [copy.values.assign(people=copy.counts).groupby(names)["people"].sum() for copy in copies]
    return pd.concat(tables, axis=1).fillna(0)


def assert_recovers(copies: list[Completed], truth: pd.DataFrame, people: int) -> None:
    """Mean counts over the copies within four standard errors of the joint distribution."""
    names = [name for name in truth.columns if name != "p"]
    table = completed_table(copies, names)
    wanted = truth.set_index(names)["p"].reindex(table.index) * people
    error = table.std(axis=1) / np.sqrt(len(copies))
    assert (error > 0).all()
    assert ((table.mean(axis=1) - wanted).abs() < 4 * error + 1).all()  # 1: the cells are whole people


def joint(levels: dict[str, list[object]], logs: object) -> pd.DataFrame:
    """The distribution proportional to the exponential of ``logs`` of each combination."""
    table = pd.DataFrame(list(product(*levels.values())), columns=list(levels))
    weight = np.exp([logs(*line) for line in table.itertuples(index=False)])  # type: ignore[operator]
    return table.assign(p=weight / weight.sum())


BASIS: dict[str, list[object]] = {"exposed": [0.0, 1.0], "site": ["a", "b", "c"], "ill": [0.0, 1.0]}


def no_three_way(exposed: float, site: str, ill: float) -> float:
    place = "abc".index(site)
    return 0.4 * exposed * place - 0.5 * ill * place + 0.9 * exposed * ill - ill - 0.3 * place


def test_a_missing_category_is_drawn_from_its_distribution_given_the_others() -> None:
    """Log-linear without a three-way term, so that a logit of site on the other two is exact; MAR on both."""
    truth = joint(BASIS, no_three_way)
    lack = {"site": 0.2 + 0.3 * truth["ill"] + 0.2 * truth["exposed"]}
    cells, counts = expected_cells(truth, 1_000_000, lack)
    data = prepare(cells, counts, dict.fromkeys(BASIS, "category"))
    assert data.missing["site"] == pytest.approx(float((truth["p"] * lack["site"]).sum()), abs=1e-5)
    copies = list(impute(data, 40, 10, seed=1))
    assert all(int(copy.counts.sum()) == int(counts.sum()) for copy in copies)
    assert_recovers(copies, truth, 1_000_000)


def test_chained_draws_recover_a_joint_distribution_with_three_incomplete_variables() -> None:
    truth = joint(BASIS, no_three_way)
    # each variable's chance depends on nothing that can itself be missing, so values are missing at random
    truth["known"] = 1.0 * (truth["site"] == "b") + truth["ill"] * 0
    fourth = pd.concat([truth.assign(known=0.0, p=truth["p"] * 0.5), truth.assign(known=1.0, p=truth["p"] * 0.5)])
    fourth["p"] *= np.exp(0.6 * fourth["known"] * fourth["ill"] + 0.3 * fourth["known"] * fourth["exposed"])
    fourth = fourth.assign(p=fourth["p"] / fourth["p"].sum()).reset_index(drop=True)
    fourth = fourth[["exposed", "site", "known", "ill", "p"]]
    lack = {
        "site": 0.1 + 0.3 * fourth["known"],
        "exposed": 0.3 - 0.2 * fourth["known"],
        "ill": 0.1 + 0.1 * fourth["known"],
    }
    cells, counts = expected_cells(fourth, 2_000_000, lack)
    data = prepare(cells, counts, dict.fromkeys(["exposed", "site", "known", "ill"], "category"))
    copies = list(impute(data, 40, 12, seed=2))
    assert_recovers(copies, fourth, 2_000_000)
    assert list(check_traces(data, [copy.trace for copy in copies])) == []


def test_numbers_are_matched_to_their_distribution_given_the_others() -> None:
    """A number whose mean is linear and whose spread is the same in each group is recovered by matching."""
    levels: dict[str, list[object]] = {"exposed": [0.0, 1.0], "step": [0.0, 1.0, 2.0, 3.0]}
    shares = {0.0: [0.4, 0.3, 0.2, 0.1], 1.0: [0.1, 0.2, 0.3, 0.4]}
    truth = joint(levels, lambda exposed, step: np.log(shares[exposed][int(step)]))
    cells, counts = expected_cells(truth, 400_000, {"step": 0.2 + 0.5 * truth["exposed"]})
    data = prepare(cells, counts, {"exposed": "category", "step": "linear"})
    copies = list(impute(data, 40, 5, seed=3))
    assert_recovers(copies, truth, 400_000)
    assert set(copies[0].values["step"]) == {0.0, 1.0, 2.0, 3.0}


def test_products_among_the_predictors_keep_effect_modification() -> None:
    """P(modifier | exposed, ill) needs their product here; without it the modification is diluted."""
    levels: dict[str, list[object]] = {"exposed": [0.0, 1.0], "old": [0.0, 1.0], "ill": [0.0, 1.0]}
    truth = joint(levels, lambda exposed, old, ill: 1.5 * exposed * old * ill - ill + 0.2 * exposed - 0.3 * old)
    cells, counts = expected_cells(truth, 1_000_000, {"old": 0.5 + 0 * truth["p"]})
    entries = dict.fromkeys(levels, "category")
    group = [["exposed", "old", "ill"]]
    with_product = list(impute(prepare(cells, counts, entries, together=group), 40, 1, seed=4))
    assert_recovers(with_product, truth, 1_000_000)
    without = completed_table(list(impute(prepare(cells, counts, entries), 10, 1, seed=4)), list(levels)).mean(axis=1)

    def modification(table: pd.Series) -> float:
        log = np.log(table)
        ends = [(e, o, i) for e, o, i in product([0.0, 1.0], repeat=3)]
        return float(sum((-1) ** (3 - int(e + o + i)) * log[e, o, i] for e, o, i in ends))

    assert modification(truth.set_index(list(levels))["p"]) == pytest.approx(1.5, rel=1e-9)
    assert modification(completed_table(with_product, list(levels)).mean(axis=1)) == pytest.approx(1.5, abs=0.02)
    assert modification(without) < 1.2


def small() -> tuple[pd.DataFrame, Whole]:
    random = np.random.default_rng(5)
    rows = pd.DataFrame(
        {
            "exposed": random.integers(0, 2, 300).astype(float),
            "site": np.array(["a", "b", "c"], dtype=object)[random.integers(0, 3, 300)],
            "age": random.integers(40, 60, 300).astype(float),
            "ill": random.integers(0, 2, 300).astype(float),
        }
    )
    for name in ("exposed", "site", "age"):
        rows.loc[random.random(300) < 0.2, name] = None
    cells = rows.groupby(list(rows.columns), dropna=False).size().reset_index(name="people")
    return cells[list(rows.columns)], cells["people"].to_numpy(dtype=np.int64) * random.integers(1, 4, len(cells))


ENTRIES = {"exposed": "category", "site": "category", "age": "linear", "ill": "category"}


def assert_same(one: Completed, other: Completed) -> None:
    pd.testing.assert_frame_equal(one.values, other.values)
    assert (one.counts == other.counts).all()
    assert (one.trace.means == other.trace.means).all()


def test_an_imputation_depends_on_its_seed_and_number_alone() -> None:
    data = prepare(*small(), ENTRIES)
    few, many = list(impute(data, 3, 4, seed=9)), list(impute(data, 5, 4, seed=9))
    for one, other in zip(few, many[:3], strict=True):
        assert_same(one, other)
    assert_same(impute_one(data, 4, 9, 4), many[4])
    different = [
        many[0].trace.means.ravel(),
        many[1].trace.means.ravel(),
        impute_one(data, 4, 10, 0).trace.means.ravel(),
    ]
    assert not any(np.array_equal(different[first], different[second]) for first, second in ((0, 1), (0, 2), (1, 2)))


def test_order_of_rows_and_columns_and_how_people_are_grouped_change_nothing() -> None:
    cells, counts = small()
    random = np.random.default_rng(6)
    base = impute_one(prepare(cells, counts, ENTRIES), 3, 1, 0)
    shuffled = random.permutation(len(cells))
    assert_same(impute_one(prepare(cells.iloc[shuffled], counts[shuffled], ENTRIES), 3, 1, 0), base)
    rows = cells.loc[np.repeat(np.arange(len(cells)), counts)]
    assert_same(impute_one(prepare(rows, np.ones(len(rows), dtype=int), ENTRIES), 3, 1, 0), base)
    turned = impute_one(prepare(cells[list(cells.columns[::-1])], counts, ENTRIES), 3, 1, 0)
    pd.testing.assert_frame_equal(turned.values[list(cells.columns)], base.values)


def test_known_values_stay_and_missing_ones_become_values_that_occur() -> None:
    cells, counts = small()
    for copy in impute(prepare(cells, counts, ENTRIES), 3, 3, seed=2):
        assert list(copy.values.columns) == list(cells.columns)
        assert copy.values.notna().all().all()
        assert copy.counts.sum() == counts.sum()
        assert (copy.counts > 0).all()
        assert not copy.values.duplicated().any()
        for name in cells.columns:
            assert set(copy.values[name]) <= set(cells[name].dropna())
        whole = cells.notna().all(axis=1).to_numpy()
        at_least = cells[whole].assign(people=counts[whole]).groupby(list(cells.columns))["people"].sum()
        found = copy.values.assign(people=copy.counts).set_index(list(cells.columns))["people"]
        assert (found.reindex(at_least.index) >= at_least).all()


def test_columns_without_an_entry_are_carried_along() -> None:
    cells, counts = small()
    random = np.random.default_rng(7)
    cluster = pd.Series(random.integers(0, 6, len(cells)).astype(float)).where(np.arange(len(cells)) % 9 > 0)
    data = prepare(cells.assign(cluster=cluster), counts, ENTRIES)
    copy = impute_one(data, 3, 1, 0)
    before = pd.Series(counts).groupby(cluster.to_numpy(), dropna=False).sum()
    after = pd.Series(copy.counts).groupby(copy.values["cluster"].to_numpy(), dropna=False).sum()
    pd.testing.assert_series_equal(before, after)
    assert "cluster" not in data.missing


def test_progress_is_told_after_each_copy() -> None:
    told: list[int] = []
    data = prepare(*small(), ENTRIES)
    stream = impute(data, 3, 1, 1, told.append)
    next(stream)
    next(stream)
    assert told == [1]
    list(stream)
    assert told == [1, 2, 3]


def test_nothing_missing_is_said_and_every_copy_is_the_data() -> None:
    cells, counts = pd.DataFrame({"x": [0.0, 1.0, 1.0], "s": ["a", "a", "b"]}), np.array([3, 4, 0])
    data = prepare(cells, counts, {"x": "category", "s": "category"})
    assert [finding.code for finding in data.findings] == ["impute-nothing-missing"]
    copy = impute_one(data, 5, 1, 0)
    pd.testing.assert_frame_equal(copy.values, cells[:2])
    assert copy.counts.tolist() == [3, 4]


@pytest.mark.parametrize(
    ("change", "entries", "never", "code", "words"),
    [
        ({"age": np.nan}, ENTRIES, (), "impute-all-missing", "“age” is missing in everybody"),
        ({}, ENTRIES, ("age",), "impute-not-imputable", "“age” is missing in"),
        ({}, {**ENTRIES, "site": "linear"}, (), "impute-text-linear", "“site” holds words"),
    ],
)
def test_what_cannot_be_imputed_is_refused(
    change: dict[str, float], entries: dict[str, str], never: tuple[str, ...], code: str, words: str
) -> None:
    cells, counts = small()
    with pytest.raises(NotEstimableError) as caught:
        prepare(cells.assign(**change), counts, entries, never_imputed=never)  # type: ignore[arg-type]
    assert caught.value.finding.code == code
    assert words in caught.value.finding.message


def test_too_few_people_and_too_many_levels_are_refused() -> None:
    few = pd.DataFrame({"x": [0.0, 1, 0, 1], "z": [1.0, 2, 4, np.nan], "s": ["a", "b", "c", "a"]})
    with pytest.raises(NotEstimableError) as caught:
        prepare(few, np.ones(4, dtype=int), {"x": "category", "z": "linear", "s": "category"})
    assert caught.value.finding.code == "impute-few-rows"
    assert "3 people" in caught.value.finding.message
    assert "4 parameters" in caught.value.finding.message
    names = [f"v{place}" for place in range(60)] * 2
    many = pd.DataFrame({"s": [*names, None], "t": [*names[::-1], "v1"]})
    with pytest.raises(NotEstimableError) as caught:
        prepare(many, np.full(121, 1000), {"s": "category", "t": "category"})
    assert caught.value.finding.code == "impute-too-many-levels"
    assert "3540 parameters" in caught.value.finding.message  # 60 · 59


def test_a_variable_with_one_known_value_gets_that_value() -> None:
    cells = pd.DataFrame({"x": [1.0, np.nan, 1.0], "y": [0.0, 1.0, 1.0]})
    data = prepare(cells, np.array([5, 6, 7]), {"x": "category", "y": "category"})
    assert [finding.code for finding in data.findings] == ["impute-one-level"]
    assert "6 missing ones" in data.findings[0].message
    copy = impute_one(data, 2, 1, 0)
    assert copy.values.to_numpy().tolist() == [[1.0, 0.0], [1.0, 1.0]]
    assert copy.counts.tolist() == [5, 13]


def test_values_learnt_from_other_people_alone_are_said() -> None:
    cells = pd.DataFrame({"x": [0.0, 1, 0, 1, np.nan], "site": ["a", "a", "b", "b", "c"]})
    data = prepare(cells, np.array([50, 60, 70, 40, 9]), {"x": "category", "site": "category"})
    assert [finding.code for finding in data.findings] == ["impute-no-donors"]
    assert "“x” is missing in all 9 people with “site” = c" in data.findings[0].message


def test_perfect_prediction_does_not_spoil_the_other_groups() -> None:
    """Nobody at site b has x = 1; elsewhere half have. The draws keep to that, in every copy."""
    cells = pd.DataFrame({"x": [0.0, 1, 0, np.nan, np.nan], "site": ["a", "a", "b", "a", "b"]})
    data = prepare(cells, np.array([500, 500, 1000, 1000, 1000]), {"x": "category", "site": "category"})
    drawn = {"a": [], "b": []}
    for copy in impute(data, 60, 1, seed=3):
        assert copy.trace.augmented == {"x"}
        table = copy.values.assign(people=copy.counts).set_index(["site", "x"])["people"]
        drawn["a"].append(int(table["a", 1.0]) - 500)
        drawn["b"].append(int(table.get(("b", 1.0), 0)))
    # variance of the number at a: 1000 · 1/4 from the draw and as much again from the coefficients
    assert abs(np.mean(drawn["a"]) - 500) < 4 * np.sqrt(500 / 60)
    assert max(drawn["b"]) < 50


def test_perfect_prediction_is_noted_once_for_all_copies() -> None:
    cells = pd.DataFrame({"x": [0.0, 1, 0, np.nan, np.nan], "site": ["a", "a", "b", "a", "b"]})
    data = prepare(cells, np.array([500, 500, 1000, 1000, 1000]), {"x": "category", "site": "category"})
    findings = list(check_traces(data, [copy.trace for copy in impute(data, 3, 1, seed=3)]))
    assert [(finding.code, finding.severity) for finding in findings] == [("impute-perfect-prediction", "note")]
    assert "“x”" in findings[0].message
    assert "3 of 3 imputations" in findings[0].message


def test_normal_draws_have_the_predictive_distribution_of_a_linear_regression() -> None:
    """1,000 people with one value of the predictor: mean a + b x and variance σ², with new values among the old."""
    random = np.random.default_rng(11)
    x = np.tile([0.0, 1.0, 2.0], 2000)
    age = np.round(50 + 3 * x + 2 * random.normal(size=6000), 1)
    rows = pd.DataFrame({"age": age, "x": x})
    rows.loc[(rows.index < 3000) & (x == 2), "age"] = np.nan
    cells = rows.groupby(["age", "x"], dropna=False).size().reset_index(name="people")
    data = prepare(cells[["age", "x"]], cells["people"].to_numpy(), {"age": "linear", "x": "linear"}, normal=["age"])
    known = rows.dropna()
    slope, start = np.polyfit(known["x"], known["age"], 1)
    residual = known["age"] - start - slope * known["x"]
    copies = list(impute(data, 40, 1, seed=1))
    observed = set(known["age"])
    means, squares = [], []
    for copy in copies:
        assert int(copy.counts.sum()) == 6000
        new = copy.values[~copy.values["age"].isin(observed)]
        assert (new["x"] == 2).all()
        assert len(new) == 1000
        means.append(new["age"].mean())
        squares.append(new["age"].var())
        assert copy.trace.means[-1, 0] == pytest.approx(means[-1], rel=1e-12)
    assert abs(np.mean(means) - start - 2 * slope) < 4 * np.std(means) / np.sqrt(40)
    assert abs(np.mean(squares) - residual.var()) < 4 * np.std(squares) / np.sqrt(40)


def test_a_drawn_value_enters_other_models_as_an_observed_one_would() -> None:
    values = pd.Series([40.0, 50.0, 70.0, np.nan], name="age")
    _, coding = code(values, np.array([5, 3, 2, 4]), "linear")
    more = coding.with_values(np.array([70.0, 40.0, 55.0]))
    assert more.columns[3:5, 0] == pytest.approx(coding.columns[[2, 0], 0], rel=1e-12)
    assert more.columns[5, 0] == pytest.approx((55 - 49) / np.sqrt((5 * 81 + 3 * 1 + 2 * 441) / 10), rel=1e-12)


def test_two_incomplete_numbers_keep_their_correlation_whichever_way_they_are_drawn() -> None:
    """Correlation 0.6, both 30 % missing completely at random, in 20,000 people; its standard error is known."""
    random = np.random.default_rng(12)
    one = random.normal(size=20_000)
    rows = pd.DataFrame({"one": one, "two": 0.6 * one + 0.8 * random.normal(size=20_000)}).round(2)
    for name in rows:
        rows.loc[random.random(20_000) < 0.3, name] = np.nan
    entries = {"one": "linear", "two": "linear"}
    for normal in ((), ("one",), ("one", "two")):
        data = prepare(rows, np.ones(20_000, dtype=int), entries, normal=normal)
        found = [
            float(
                np.cov(copy.values.to_numpy().T, fweights=copy.counts)[0, 1]
                / np.prod(np.sqrt(np.diag(np.cov(copy.values.to_numpy().T, fweights=copy.counts))))
            )
            for copy in impute(data, 3, 8, seed=1)
        ]
        # (1 - r²) / √n of the 49 % who have both values is more than the standard error with the others
        assert abs(np.mean(found) - 0.6) < 4 * 0.64 / np.sqrt(0.49 * 20_000)


def test_drawn_coefficients_decide_who_is_a_donor() -> None:
    """One predictor: matching both sides with the same coefficients would give the five nearest x in every copy."""
    random = np.random.default_rng(13)
    x = np.append(np.linspace(-1, 1, 200), 0.0)
    age = np.append(x[:-1] + random.normal(size=200), np.nan)
    data = prepare(pd.DataFrame({"x": x, "age": age}), np.append(np.ones(200), 1000), {"x": "linear", "age": "linear"})
    donors = []
    for copy in impute(data, 20, 1, seed=1):
        copied = copy.values.assign(people=copy.counts)
        donors.append(frozenset(copied.loc[(copied["x"] == 0) & (copied["people"] > 1), "age"]))
    assert {len(used) for used in donors} == {5}
    assert len(set(donors)) > 10


def test_cells_of_many_variables_are_pooled_exactly() -> None:
    """Fourteen variables with up to 120 levels have more combinations than a whole number of the machine can count."""
    random = np.random.default_rng(14)
    codes = random.integers(-1, 120, (300, 14))[random.integers(0, 300, 1000)]
    codes[:, 7] = random.integers(-1, 2, 1000)
    counts = random.integers(1, 9, 1000)
    pooled, people = pool(codes, counts)
    columns = list(range(14))
    wanted = pd.DataFrame(codes).assign(people=counts).groupby(columns)["people"].sum()
    assert len(wanted) < 1000
    assert [tuple(line) for line in pooled.tolist()] == wanted.index.tolist()
    assert people.tolist() == wanted.tolist()


def test_chains_that_drift_are_told_from_chains_that_wander() -> None:
    random = np.random.default_rng(8)
    noise = 0.05 * random.normal(size=(20, 10))
    still = Chain("age", 0.3, 50.0, 1.0, 50 + noise)
    moving = Chain("bmi", 0.3, 25.0, 1.0, 25 + noise + 0.04 * np.arange(10))
    findings = list(check_drift([still, moving]))
    assert [finding.code for finding in findings] == ["impute-not-settled"]
    assert "“bmi”" in findings[0].message
    settled = Chain("bmi", 0.3, 25.0, 1.0, 25 + noise - 5.0 * 0.05 ** np.arange(10))
    assert list(check_drift([settled])) == []
    false = [list(check_drift([Chain("age", 0.3, 0.0, 1.0, random.normal(size=(10, 10)))])) for _ in range(1000)]
    assert sum(map(len, false)) <= 5  # one in a thousand


def test_chains_summarise_what_was_imputed() -> None:
    cells, counts = small()
    data = prepare(cells, counts, ENTRIES)
    copies = list(impute(data, 4, 3, seed=1))
    found = {chain.variable: chain for chain in chains(data, [copy.trace for copy in copies])}
    assert {name: chain.means.shape for name, chain in found.items()} == dict.fromkeys(ENTRIES.keys() - {"ill"}, (4, 3))
    known = cells["age"].notna().to_numpy()
    observed = float(np.average(cells["age"][known], weights=counts[known]))
    assert found["age"].observed == pytest.approx(observed, rel=1e-12)
    total = float(np.average(copies[2].values["age"], weights=copies[2].counts))
    lost = found["age"].missing
    assert (1 - lost) * observed + lost * found["age"].means[2, -1] == pytest.approx(total, rel=1e-12)
