"""The plan's ``[analysis]``: the measure, the model, the ways to adjust, the variance, and what is missing."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, StringConstraints

from adjustplan.plan.table import Name, Table
from adjustplan.study import Measure, OutcomeType

_NUMBER = r"-?\d+(\.\d+)?"
FORMS = "“category”, “linear”, “spline(4)”, “cut(30, 45, 60)” or, for a Cox model, “stratum”"
Form = Annotated[
    str,
    StringConstraints(pattern=rf"^(category|linear|stratum|spline\([2-9]\)|cut\({_NUMBER}(, ?{_NUMBER})*\))$"),
]
Model = Literal[
    "linear",
    "logistic",
    "penalised logistic",
    "log-binomial",
    "poisson",
    "negative binomial",
    "cox",
    "conditional logistic",
]
Way = Literal["regression", "standardisation", "weighting", "doubly robust", "stratification"]
Missing = Literal["complete cases", "inverse probability", "imputation"]
Seed = Annotated[int, Field(ge=0, lt=2**32)]


class Weighting(Table):
    """Inverse-probability weights."""

    stabilised: bool = Field(True, description="Multiply by the share of the exposure level, so that weights mean 1.")
    truncate: Annotated[float, Field(gt=0, lt=0.5)] | None = Field(
        None, description="Weights beyond this quantile at either end are set to it; 0.01 means the 1st and the 99th."
    )
    known: bool = Field(
        False, description="Treat the weights as known; the interval is then too wide rather than too narrow."
    )


class Bootstrap(Table):
    """Intervals from resampled people in place of formulas."""

    replicates: int = Field(1000, ge=100, le=100_000, description="How many resamples.")
    seed: Seed = Field(description="Where the random numbers start; the same seed gives the same interval.")


class Imputation(Table):
    """Multiple imputation by chained equations."""

    imputations: int = Field(20, ge=2, le=1000, description="How many completed copies of the data.")
    iterations: int = Field(10, ge=1, le=1000, description="Rounds through the incomplete variables for each copy.")
    seed: Seed = Field(description="Where the random numbers start.")
    normal: list[Name] = Field(
        [],
        description="Numbers drawn from a normal distribution around what is predicted, in place of the value of"
        " somebody alike; better where nobody alike is known.",
    )


class Analysis(Table):
    """The model to be fitted and the data it is fitted to."""

    measure: Measure = Field(description="The measure of effect that is estimated.")
    outcome_type: OutcomeType | None = Field(None, description="What kind of outcome it is.")
    data: Name | None = Field(
        None,
        description="A file or folder, relative to the plan; a postgresql:// URL without a password; or spark: and a"
        " Parquet folder or table.",
    )
    columns: dict[str, Name] = Field({}, description="variable = column, where the two differ.")
    forms: dict[str, Form] = Field(
        {},
        description='variable = "category" | "linear" | "spline(4)" | "cut(30, 45, 60)" | "stratum"'
        " (a Cox model with a baseline of its own in each level).",
    )
    model: Model | None = Field(None, description="The outcome regression; by default the usual one for the measure.")
    way: Way = Field("regression", description="How the planned estimate is adjusted.")
    other_ways: list[Way] = Field([], description="Ways to adjust that are reported beside it, for the planned set.")
    modifier: Name | None = Field(
        None, description="A member of the set; the effect is also reported in each of its levels."
    )
    person_time: Name | None = Field(None, description="Rates: the column with each row's time at risk.")
    time: Name | None = Field(None, description="Hazard ratio: the column with the time at which follow-up ended.")
    entry: Name | None = Field(None, description="Hazard ratio: the column with the time at which it began, if not 0.")
    ties: Literal["efron", "breslow"] = Field("efron", description="Hazard ratio: how equal event times are handled.")
    matched_set: Name | None = Field(None, description="Conditional logistic: the column that names the matched set.")
    weights: Name | None = Field(None, description="The column with sampling weights.")
    cluster: Name | None = Field(
        None, description="The column that names the cluster; rows in one are not independent."
    )
    variance: Literal["model", "robust"] | None = Field(
        None,
        description="Which standard error; by default of the model where its form says how the outcome varies, robust"
        " elsewhere and wherever there are weights or clusters.",
    )
    weighting: Weighting | None = Field(None, description="How weights are made, for weighting and doubly robust.")
    bootstrap: Bootstrap | None = Field(None, description="Percentile intervals from resampled people.")
    missing: Missing = Field("complete cases", description="What is done about rows that lack a value.")
    imputation: Imputation | None = Field(None, description="How missing values are imputed.")
