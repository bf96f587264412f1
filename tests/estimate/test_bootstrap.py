"""The bootstrap draws as the multinomial law says, and solves each draw as statsmodels solves its rows."""

from __future__ import annotations

import itertools
import math
import subprocess
import sys
import warnings
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from scipy.stats import chisquare
from statsmodels.genmod.generalized_linear_model import DomainWarning
from statsmodels.stats.contingency_tables import StratifiedTable

from adjustplan.data import Patterns, Wanted, open_data, reduce_to_patterns
from adjustplan.estimate import workers
from adjustplan.estimate.bootstrap import Job, RowJob, _Work, percentile_interval, resample
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.modelling import pose
from adjustplan.estimate.not_estimable import NotEstimableError
from adjustplan.estimate.problem import Projection, Setting

CODING = ExposureCoding("category", 1.0, 0.0, ("yes", "no"))


@dataclass(frozen=True)
class Study:
    """Rows on disk and their atoms."""

    rows: pd.DataFrame
    atoms: Patterns

    def job(self, measure: str, model: str, way: str = "regression", members: Sequence[str] = ()) -> Job:
        """The model of outcome ``y`` on exposure ``x`` and the members, numbers as lines and the rest as categories."""
        forms = {name: "linear" if name == "age" else "category" for name in members}
        setting = Setting("x", measure, model, way, "robust", CODING, forms)
        problem, _ = pose(self.atoms.complete(["x", *members]), setting, members)
        return Job(problem, self.atoms.place(["x", *members]))

    def drawn(self, counts: np.ndarray, members: Sequence[str] = ()) -> pd.DataFrame:
        """The rows of a draw, complete for the members, with ``y``, ``t`` and ``w`` beside them."""
        moments = self.atoms.moments
        weight = moments.weight / np.maximum(moments.people, 1)
        rows = self.atoms.values.assign(y=moments.mean, t=moments.time, w=weight)
        return rows.loc[np.repeat(np.arange(len(rows)), counts)].dropna(subset=["x", "y", *members])


class Spy:
    """A job that keeps the counts it is given."""

    def __init__(self) -> None:
        self.seen: list[np.ndarray] = []

    def __call__(self, counts: np.ndarray) -> float:
        self.seen.append(counts)
        return 0.0


@pytest.fixture
def study(tmp_path):
    def build(rows: pd.DataFrame, keys: dict[str, str] | None = None, **roles: str) -> Study:
        rows.to_parquet(tmp_path / "rows.parquet", index=False)
        variables = {name: name for name in rows.columns if name in ("x", "site", "age", "group")}
        with open_data(tmp_path / "rows.parquet") as source:
            return Study(rows, reduce_to_patterns(source, Wanted("y", variables, keys or {}, atoms=True, **roles)))

    return build


def people(count: int = 600, seed: int = 3) -> pd.DataFrame:
    random = np.random.default_rng(seed)
    site, age = random.choice(["east", "north", "west"], count), random.integers(30, 60, count).astype(float)
    x = (random.random(count) < np.where(site == "west", 0.6, 0.3)).astype(float)
    risk = 1 / (1 + np.exp(1.5 - 0.6 * x - 0.5 * (site == "east") - 0.02 * (age - 45)))
    rows = pd.DataFrame({"x": x, "site": site, "age": age, "y": (random.random(count) < risk).astype(float)})
    rows.loc[random.random(count) < 0.05, "site"] = None
    rows.loc[random.random(count) < 0.05, "y"] = np.nan
    rows["t"], rows["w"] = random.choice([0.5, 1.0, 2.5], count), random.choice([1.0, 2.0, 3.5], count)
    return rows


def design(rows: pd.DataFrame, *, x: float | None = None, sites: Sequence[str] = ("east", "west")) -> np.ndarray:
    exposure = rows["x"] if x is None else np.full(len(rows), x)
    return np.column_stack([np.ones(len(rows)), exposure, rows["age"], *(rows["site"] == site for site in sites)])


def of_rows(rows: pd.DataFrame, measure: str, model: str, way: str) -> float:
    """The same estimate by statsmodels, row by row."""
    y, X, covariates = rows["y"].to_numpy(), design(rows), np.delete(design(rows), 1, axis=1)
    x = rows["x"].to_numpy() == 1
    family = {
        "linear": sm.families.Gaussian(),
        "logistic": sm.families.Binomial(),
        "poisson": sm.families.Poisson(),
        "log-binomial": sm.families.Binomial(sm.families.links.Log()),
    }[model]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DomainWarning)  # of a risk with a logarithmic link
        fitted = sm.GLM(y, X, family).fit(tol=1e-14, maxiter=200)
    if way == "regression":
        return float(fitted.params[1])
    ones, zeros = fitted.predict(design(rows, x=1.0)), fitted.predict(design(rows, x=0.0))
    if way == "standardisation":
        means = ones.mean(), zeros.mean()
    else:
        score = sm.GLM(x.astype(float), covariates, sm.families.Binomial()).fit(tol=1e-14).predict()
        if way == "weighting":
            means = np.average(y[x], weights=1 / score[x]), np.average(y[~x], weights=1 / (1 - score[~x]))
        else:
            means = np.mean(ones + x * (y - ones) / score), np.mean(zeros + ~x * (y - zeros) / (1 - score))
    return float(means[0] - means[1] if measure.endswith("difference") else math.log(means[0] / means[1]))


@pytest.mark.parametrize(
    ("measure", "model", "way"),
    [
        ("mean difference", "linear", "regression"),
        ("odds ratio", "logistic", "regression"),
        ("risk ratio", "poisson", "regression"),
        ("risk ratio", "log-binomial", "regression"),
        ("risk difference", "logistic", "standardisation"),
        ("risk ratio", "logistic", "standardisation"),
        ("risk difference", "logistic", "weighting"),
        ("risk difference", "logistic", "doubly robust"),
    ],
)
def test_a_replicate_is_the_estimate_from_the_rows_that_were_drawn(study, measure, model, way):
    known, spy = study(people()), Spy()
    found = resample(known.atoms, [known.job(measure, model, way, ["site", "age"]), RowJob(spy)], 6, 11, processes=1)
    for value, counts in zip(found.values[:, 0], spy.seen, strict=True):
        rows = known.drawn(counts, ["site", "age"])
        assert value == pytest.approx(of_rows(rows, measure, model, way), abs=1e-7)


def test_a_stratified_replicate_is_the_mantel_haenszel_estimate_of_its_rows(study):
    known, spy = study(people()), Spy()
    job = known.job("odds ratio", "logistic", "stratification", ["site"])
    found = resample(known.atoms, [job, RowJob(spy)], 6, 2, processes=1)
    for value, counts in zip(found.values[:, 0], spy.seen, strict=True):
        rows = known.drawn(counts, ["site"])
        tables = [pd.crosstab(part["x"], part["y"]).to_numpy() for _, part in rows.groupby("site")]
        assert value == pytest.approx(StratifiedTable(tables).logodds_pooled, rel=1e-10)


def test_weights_and_times_at_risk_go_with_the_people_drawn(study):
    known, spy = study(people(), person_time="t", weight="w"), Spy()
    found = resample(known.atoms, [known.job("rate ratio", "poisson"), RowJob(spy)], 6, 2, processes=1)
    for value, counts in zip(found.values[:, 0], spy.seen, strict=True):
        rates = known.drawn(counts).groupby("x").apply(lambda part: (part.w * part.y).sum() / (part.w * part.t).sum())
        assert value == pytest.approx(math.log(rates[1.0] / rates[0.0]), rel=1e-10)


def test_as_many_are_drawn_as_have_an_outcome_and_incomplete_ones_are_among_them(study):
    known, spy = study(people()), Spy()
    resample(known.atoms, [RowJob(spy)], 200, 5, processes=1)
    counts = np.array(spy.seen)
    assert (counts.sum(axis=1) == known.rows["y"].notna().sum()).all()
    lacking = known.atoms.values["site"].isna().to_numpy()
    expected = known.rows.loc[known.rows["y"].notna(), "site"].isna().sum()
    # a count of about 28 of 570 has a standard deviation of 5.2; the mean of 200 of them one of 0.37
    assert counts[:, lacking].sum(axis=1).mean() == pytest.approx(expected, abs=4.5 * 0.37)
    assert not counts[:, known.atoms.moments.people == 0].any()


@pytest.mark.parametrize("copies", [1, 100])
def test_the_counts_have_the_moments_of_a_multinomial_law(study, copies):
    """With 1 copy people are drawn, with 100 copies counts; both must have this law."""
    cells = pd.DataFrame({"x": [0.0, 0.0, 1.0, 1.0], "y": [0.0, 1.0, 0.0, 1.0]})
    shares = np.array([4, 3, 2, 1])
    known, spy, replicates = study(cells.loc[np.repeat(np.arange(4), shares * copies)]), Spy(), 3000
    resample(known.atoms, [RowJob(spy)], replicates, 17, processes=1)
    counts, total, p = np.array(spy.seen), 10 * copies, shares / 10
    law = total * (np.diag(p) - np.outer(p, p))
    spread = np.sqrt(np.diag(law))
    assert (np.abs(counts.mean(axis=0) - total * p) < 4.5 * spread / math.sqrt(replicates)).all()
    # an estimated covariance of nearly normal counts has a variance of (v_ii v_jj + v_ij²) / R
    error = np.sqrt((np.outer(spread, spread) ** 2 + law**2) / replicates)
    assert (np.abs(np.cov(counts.T) - law) < 4.5 * error).all()


def test_five_rows_give_the_exact_bootstrap_distribution(study):
    rows = pd.DataFrame({"x": [0.0, 0.0, 1.0, 1.0, 1.0], "y": [1.0, 3.0, 2.0, 2.0, 7.0]})
    exact: Counter[float | None] = Counter()
    for chosen in itertools.product(range(5), repeat=5):
        drawn = rows.loc[list(chosen)]
        x = drawn["x"].to_numpy() == 1
        y = drawn["y"].to_numpy()
        exact[None if x.all() or not x.any() else round(y[x].mean() - y[~x].mean(), 9)] += 1
    known, replicates = study(rows), 4000
    found = resample(known.atoms, [known.job("mean difference", "linear")], replicates, 8, processes=1)
    seen = Counter(None if math.isnan(value) else round(value, 9) for value in found.values[:, 0])
    assert set(seen) <= set(exact)
    assert found.failed[0] == seen[None]
    expected = {value: ways * replicates / 5**5 for value, ways in exact.items()}
    assert len(expected) > 20
    assert min(expected.values()) > 5  # so that chi-square is near enough
    assert chisquare([seen[value] for value in expected], list(expected.values())).pvalue > 0.001


def test_standard_errors_are_the_known_ones_of_two_by_two_tables(study):
    """Woolf's (1955) of the log odds ratio, and the binomial ones of risk difference and log risk ratio."""
    a, b, c, d = 1200, 2800, 1500, 4500
    cells = pd.DataFrame({"x": [1.0, 1.0, 0.0, 0.0], "y": [1.0, 0.0, 1.0, 0.0]})
    known, replicates = study(cells.loc[np.repeat(np.arange(4), [a, b, c, d])]), 2000
    measures = [("risk difference", "linear"), ("risk ratio", "poisson"), ("odds ratio", "logistic")]
    found = resample(known.atoms, [known.job(*measure) for measure in measures], replicates, 4, processes=1)
    p1, p0 = a / (a + b), c / (c + d)
    exact = [
        math.sqrt(p1 * (1 - p1) / (a + b) + p0 * (1 - p0) / (c + d)),
        math.sqrt(1 / a - 1 / (a + b) + 1 / c - 1 / (c + d)),
        math.sqrt(1 / a + 1 / b + 1 / c + 1 / d),
    ]
    # a standard deviation of R replicates varies by 1 / √(2 R) = 1.6 %; what the formulas leave out is below 0.1 %
    bound = 4 / math.sqrt(2 * replicates) + 0.001
    errors = [percentile_interval(column).standard_error for column in found.values.T]
    assert errors == pytest.approx(exact, rel=bound)


def test_resampling_atoms_has_mean_and_variance_of_resampling_rows(study):
    rows = people(80).dropna()[["x", "y"]].assign(y=lambda drawn: drawn["y"] + np.arange(len(drawn)) % 7)
    known, replicates = study(rows), 4000
    ours = resample(known.atoms, [known.job("mean difference", "linear")], replicates, 6, processes=1).values[:, 0]
    random, x, y = np.random.default_rng(99), rows["x"].to_numpy() == 1, rows["y"].to_numpy()
    plain = np.empty(replicates)
    for place in range(replicates):
        chosen = random.integers(0, len(y), len(y))
        plain[place] = y[chosen][x[chosen]].mean() - y[chosen][~x[chosen]].mean()
    assert abs(ours.mean() - plain.mean()) < 4.5 * plain.std() * math.sqrt(2 / replicates)
    assert ours.std() / plain.std() == pytest.approx(1, abs=4.5 / math.sqrt(replicates))


def clustered(clusters: int = 200, size: int = 10) -> pd.DataFrame:
    """Half of the variance lies between clusters, and a cluster is exposed as a whole."""
    random = np.random.default_rng(12)
    cluster = np.repeat(np.arange(clusters), size)
    y = random.normal(size=clusters)[cluster] + random.normal(size=clusters * size)
    return pd.DataFrame({"x": (cluster % 2).astype(float), "y": y, "cluster": cluster})


def test_whole_clusters_are_drawn_so_the_interval_is_as_wide_as_they_make_it(study):
    rows, replicates = clustered(), 2000
    whole, apart = study(rows, {"cluster": "cluster"}), study(rows)
    errors = []
    for known in (whole, apart):
        # the model is that of the exposure alone, whatever stays apart
        values = resample(known.atoms, [known.job("mean difference", "linear")], replicates, 1, processes=1).values
        errors.append(percentile_interval(values[:, 0]).standard_error)
    fitted = sm.OLS(rows["y"], sm.add_constant(rows["x"])).fit(
        cov_type="cluster", cov_kwds={"groups": rows["cluster"], "use_correction": False}
    )
    # 1.6 % of Monte-Carlo error, and 1 / 100 because the number of exposed clusters varies from draw to draw
    assert errors[0] == pytest.approx(fitted.bse["x"], rel=4 / math.sqrt(2 * replicates) + 0.01)
    # the planted design effect is 1 + 9 / 2; the variance between 200 clusters is known to 10 %
    assert (errors[0] / errors[1]) ** 2 == pytest.approx(5.5, rel=0.4)


@pytest.mark.parametrize("key", ["cluster", "matched_set"])
def test_a_cluster_comes_with_all_its_people_and_unknown_clusters_stay_out(study, key):
    rows = clustered(20, 5).rename(columns={"cluster": key})
    rows.loc[:2, key] = np.nan
    rows.loc[50:54, "y"] = np.nan
    known, spy = study(rows, {key: key}), Spy()
    resample(known.atoms, [RowJob(spy)], 50, 1, processes=1)
    cluster = known.atoms.keys[key]
    observed = known.atoms.moments.people > 0
    for counts in spy.seen:
        assert not counts[cluster.isna() | ~observed].any()
        each = pd.Series(counts[observed]).groupby(cluster[observed].to_numpy())
        assert (each.min() == each.max()).all()
        assert each.max().sum() == 19


def test_the_numbers_depend_on_the_seed_and_not_on_the_number_of_processes(study, monkeypatch):
    known = study(people())
    jobs = [known.job("odds ratio", "logistic", members=["site", "age"]), known.job("mean difference", "linear")]
    told: list[int] = []
    one = resample(known.atoms, jobs, 60, 7, processes=1)
    other = resample(known.atoms, jobs, 20, 8, processes=1).values
    first = resample(known.atoms, jobs, 20, 7, processes=1).values
    monkeypatch.setattr(_Work, "begin", None)  # so that nothing is computed here
    two = resample(known.atoms, jobs, 60, 7, told.append, processes=2)
    assert np.array_equal(one.values, two.values)
    assert told == sorted(told)
    assert told[-1] == 60
    assert np.array_equal(first, one.values[:20])
    assert not np.isin(other[:, 0], one.values[:, 0]).any()


def test_lost_helpers_change_nothing(study, monkeypatch):
    known = study(people())
    jobs = [known.job("mean difference", "linear")]
    expected = resample(known.atoms, jobs, 40, 7, processes=1).values
    monkeypatch.setattr(workers, "_BEGIN", "raise SystemExit(1)")
    assert np.array_equal(resample(known.atoms, jobs, 40, 7, processes=2).values, expected)

    def refused() -> subprocess.Popen[bytes]:
        raise OSError("no more processes")

    monkeypatch.setattr(workers, "_start", refused)
    assert np.array_equal(resample(known.atoms, jobs, 40, 7, processes=2).values, expected)


def test_an_interruption_ends_the_helpers(study, monkeypatch):
    known, helpers, start = study(people()), [], workers._start
    monkeypatch.setattr(workers, "_start", lambda: helpers.append(start()) or helpers[-1])

    def interrupted(done: int) -> None:  # noqa: ARG001 — the signature of progress
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        resample(known.atoms, [known.job("mean difference", "linear")], 400, 7, interrupted, processes=2)
    assert len(helpers) == 2
    assert all(helper.returncode is not None for helper in helpers)


def test_a_script_without_a_main_guard_may_use_several_processes(tmp_path):
    people().to_parquet(tmp_path / "rows.parquet", index=False)
    script = tmp_path / "analysis.py"
    script.write_text(
        """from pathlib import Path
from numpy import max as largest
from adjustplan.data import Wanted, open_data, reduce_to_patterns
from adjustplan.estimate.bootstrap import RowJob, _Work, resample
_Work.begin = None  # so that nothing is computed here
with open_data(Path("rows.parquet")) as source:
    atoms = reduce_to_patterns(source, Wanted("y", {"x": "x"}, atoms=True))
print(resample(atoms, [RowJob(largest)], 20, 1, processes=2).failed)
""",
        encoding="utf-8",
    )
    done = subprocess.run([sys.executable, script], capture_output=True, text=True, check=False, cwd=tmp_path)
    assert (done.returncode, done.stdout, done.stderr) == (0, "[0]\n", "")


def test_a_replicate_that_separates_counts_as_failed_and_gives_no_number(study):
    cells = pd.DataFrame({"x": [1.0, 1.0, 0.0, 0.0], "y": [1.0, 0.0, 1.0, 0.0]})
    known, spy = study(cells.loc[np.repeat(np.arange(4), [2, 60, 20, 90])]), Spy()
    jobs = [known.job("odds ratio", "logistic"), known.job("risk difference", "logistic", "standardisation")]
    found = resample(known.atoms, [*jobs, RowJob(spy)], 300, 3, processes=1)
    separated = (np.array(spy.seen) == 0).any(axis=1)
    assert 20 < separated.sum() < 65  # e^-2 of 300 is 41, with a standard deviation of 6
    assert np.array_equal(np.isnan(found.values[:, 0]), separated)
    assert np.array_equal(np.isnan(found.values[:, 1]), separated)
    assert list(found.failed) == [separated.sum(), separated.sum(), 0]
    assert np.abs(found.values[~separated, 0]).max() < 5
    with pytest.raises(NotEstimableError) as caught:
        percentile_interval(found.values[:, 0])
    assert caught.value.finding.code == "estimate-bootstrap-failed"
    assert f"{separated.sum()} of 300" in caught.value.finding.message


def test_a_level_that_was_not_drawn_is_left_out_of_that_replicate(study):
    rows = people().dropna()
    rows.loc[rows.index[:2], "site"] = "a small one"
    known, spy = study(rows), Spy()
    job = known.job("mean difference", "linear", members=["site", "age"])
    found = resample(known.atoms, [job, RowJob(spy)], 60, 3, processes=1)
    without = 0
    for value, counts in zip(found.values[:, 0], spy.seen, strict=True):
        drawn = known.drawn(counts)
        sites = sorted(set(drawn["site"]) - {"north"})
        without += "a small one" not in sites
        assert value == pytest.approx(sm.OLS(drawn["y"], design(drawn, sites=sites)).fit().params["x1"], abs=1e-9)
    assert without > 3  # e^-2 of 60 is 8


def test_a_replicate_in_which_the_exposure_is_a_level_of_a_covariate_has_no_estimate(study):
    rows = people().dropna()
    rows["group"] = np.where(rows["x"] == 1, "a", "b")
    rows.loc[rows.index[:2], "group"] = np.where(rows["x"][:2] == 1, "b", "a")
    known, spy = study(rows), Spy()
    jobs = [known.job("mean difference", "linear", members=["group"])]
    jobs.append(known.job("risk difference", "logistic", "standardisation", ["group"]))
    found = resample(known.atoms, [*jobs, RowJob(spy)], 60, 3, processes=1)
    same = [len(known.drawn(counts).groupby(["x", "group"])) == 2 for counts in spy.seen]
    assert sum(same) > 3
    assert np.array_equal(np.isnan(found.values[:, 0]), same)
    assert np.isnan(found.values[same, 1]).all()


def test_a_log_binomial_replicate_that_does_not_converge_falls_back_to_poisson(study):
    """As the estimate itself does (Zou 2004): near risks of 1 the log-binomial likelihood may lack a maximum inside."""
    random = np.random.default_rng(5)
    age = random.integers(30, 60, 150).astype(float)
    x = (random.random(150) < 0.5).astype(float)
    y = (random.random(150) < np.minimum(0.99, np.exp(-1.6 + 0.055 * (age - 30) + 0.2 * x))).astype(float)
    known = study(pd.DataFrame({"x": x, "age": age, "y": y}))
    jobs = [known.job("risk ratio", model, members=["age"]) for model in ("log-binomial", "poisson")]
    found = resample(known.atoms, jobs, 60, 3, processes=1)
    assert not found.failed.any()
    same = np.isclose(found.values[:, 0], found.values[:, 1], rtol=0, atol=1e-12)
    assert same.any()
    assert not same.all()


def test_the_interval_ends_at_the_stated_places_of_the_ordered_replicates():
    values = np.random.default_rng(1).permutation(np.arange(1.0, 1000.0))
    interval = percentile_interval(values)
    assert (interval.lower, interval.upper, interval.findings) == (25.0, 975.0, ())
    # a discrete uniform variable on 1 to n has the variance (n² - 1) / 12; the sample's is n / (n - 1) times that
    assert interval.standard_error == pytest.approx(math.sqrt((999**2 - 1) / 12 * 999 / 998), rel=1e-12)


def test_a_few_failed_replicates_are_passed_over_with_a_warning():
    values = np.concatenate([np.arange(1.0, 1000.0), np.full(52, np.nan)])
    interval = percentile_interval(values)
    assert (interval.lower, interval.upper) == (25.0, 975.0)
    (finding,) = interval.findings
    assert (finding.code, finding.severity) == ("estimate-bootstrap-failed", "warning")
    assert "52 of 1051" in finding.message
    with pytest.raises(NotEstimableError, match="53 of 1052"):
        percentile_interval(np.append(values, np.nan))


def test_a_row_job_may_say_that_it_has_no_estimate(study):
    def estimate(counts: np.ndarray) -> float:
        if counts[0] % 3 == 0:
            raise NotEstimableError("estimate-overflow", "None.", "")
        return math.inf if counts[0] % 3 == 1 else float(counts[0])

    known, spy = study(people()), Spy()
    found = resample(known.atoms, [RowJob(estimate), RowJob(spy)], 60, 3, processes=1)
    first = np.array([counts[0] for counts in spy.seen])
    assert 0 < found.failed[0] < 60
    assert np.array_equal(np.isfinite(found.values[:, 0]), first % 3 == 2)


def test_what_cannot_be_resampled_is_refused(study):
    known = study(people())
    job = known.job("mean difference", "linear")
    with pytest.raises(ValueError, match="estimated again"):
        Job(replace(job.problem, projection=Projection(np.zeros((2, 1)), np.eye(1))), job.places)
    with pytest.raises(ValueError, match="nobody"):
        resample(replace(known.atoms, moments=replace(known.atoms.moments, people=0 * known.atoms.rows)), [job], 1, 1)
    with pytest.raises(ValueError, match="needs a job"):
        resample(known.atoms, [], 1, 1)
