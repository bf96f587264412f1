"""Whether the choices in ``[analysis]`` go together: measure, model, way to adjust, and the columns they need.

Everything here is known from the plan alone, so it can be said before there are data.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from types import MappingProxyType

from adjustplan.plan.analysis_schema import Analysis, Model, Way
from adjustplan.plan.misfit import Misfit
from adjustplan.plan.places import Key
from adjustplan.plan.schema import PlanFile
from adjustplan.study import Measure

MODELS: Mapping[Measure, tuple[Model, ...]] = MappingProxyType(
    {
        "mean difference": ("linear",),
        "mean ratio": ("poisson", "negative binomial"),
        "risk difference": ("linear",),
        "risk ratio": ("poisson", "log-binomial"),
        "odds ratio": ("logistic", "penalised logistic", "conditional logistic"),
        "prevalence difference": ("linear",),
        "prevalence ratio": ("poisson", "log-binomial"),
        "rate difference": ("linear",),
        "rate ratio": ("poisson", "negative binomial"),
        "hazard ratio": ("cox",),
    }
)
"""The regressions whose coefficients are each measure, the usual one first."""

PREDICTING: Mapping[Measure, tuple[Model, ...]] = MappingProxyType(
    {
        "mean difference": ("linear", "poisson"),
        "mean ratio": ("linear", "poisson"),
        "risk difference": ("logistic", "linear", "poisson", "log-binomial"),
        "risk ratio": ("logistic", "linear", "poisson", "log-binomial"),
        "odds ratio": ("logistic", "linear", "poisson", "log-binomial"),
        "prevalence difference": ("logistic", "linear", "poisson", "log-binomial"),
        "prevalence ratio": ("logistic", "linear", "poisson", "log-binomial"),
        "rate difference": ("poisson", "linear"),
        "rate ratio": ("poisson", "linear"),
        "hazard ratio": (),
    }
)
"""The regressions that can predict outcomes, to be averaged, for each measure; the usual one first."""

_NO_WAY: Mapping[Way, tuple[Measure, ...]] = MappingProxyType(
    {
        "regression": (),
        "standardisation": ("hazard ratio",),
        "weighting": ("hazard ratio",),
        "doubly robust": ("rate difference", "rate ratio", "hazard ratio"),
        "stratification": ("mean difference", "mean ratio", "hazard ratio"),
    }
)
"""The measures that a way to adjust is not built for."""


ROW_MODELS: tuple[Model, ...] = ("cox", "conditional logistic", "negative binomial")
"""Models that need rows, because no sums over a pattern carry what they use."""

WITHOUT_OUTCOME_MODEL: tuple[Way, ...] = ("weighting", "stratification")
"""The ways to adjust that use no regression of the outcome."""


def model_for(analysis: Analysis, way: Way) -> Model:
    """The outcome regression of a way to adjust: the planned one, or the usual one."""
    choices = MODELS[analysis.measure] if way == "regression" else PREDICTING[analysis.measure]
    if analysis.model in choices:
        return analysis.model
    if way == "regression" and analysis.measure == "odds ratio" and analysis.matched_set:
        return "conditional logistic"
    return choices[0] if choices else MODELS[analysis.measure][0]


def analysis_faults(file: PlanFile) -> Iterator[Misfit]:
    """Everything in ``[analysis]`` that does not go together."""
    analysis = file.analysis
    if analysis is not None:
        yield from _of_model(analysis)
        yield from _of_columns(analysis)
        yield from _of_variance(analysis)
        yield from _of_modifier(analysis, file)
        yield from _unused(analysis)


def _of_model(analysis: Analysis) -> Iterator[Misfit]:
    measure, model = analysis.measure, analysis.model
    ways = list(dict.fromkeys([analysis.way, *analysis.other_ways]))
    for way in ways:
        if measure in _NO_WAY[way]:
            message = f"The {measure} cannot be adjusted by {way} here."
            others = [other for other, lacking in _NO_WAY.items() if measure not in lacking]
            key: Key = ("analysis", "way" if way == analysis.way else "other_ways")
            yield Misfit("model-choice", message, f"It can by {', '.join(others)}.", key)
    if model is None:
        return
    fitting = {choice for way in ways for choice in (MODELS if way == "regression" else PREDICTING)[measure]}
    if model not in fitting:
        message = f"A {model} model does not give the {measure} by {' or '.join(ways)}."
        usual = MODELS[measure] if "regression" in ways else PREDICTING[measure]
        remedy = f"Models for it: {', '.join(usual)}." if usual else "Adjust by regression."
        yield Misfit("model-choice", message, remedy, ("analysis", "model"))


def _of_columns(analysis: Analysis) -> Iterator[Misfit]:
    if analysis.data is None:
        return
    measure = analysis.measure
    needed: list[tuple[str, bool, str]] = [
        ("person_time", measure.startswith("rate"), f"The {measure} needs each row's time at risk."),
        ("time", measure == "hazard ratio", "A hazard ratio needs the time at which follow-up ended."),
        ("matched_set", analysis.model == "conditional logistic", "A conditional model needs the matched sets."),
        ("imputation", analysis.missing == "imputation", "Imputing needs a seed."),
    ]
    for name, wanted, message in needed:
        if wanted and getattr(analysis, name) is None:
            example = "[analysis.imputation] with seed = 1" if name == "imputation" else f'{name} = "…" to [analysis]'
            yield Misfit("model-needs", message, f"Add {example}.", ("analysis", "measure"))


def _of_variance(analysis: Analysis) -> Iterator[Misfit]:
    key: Key = ("analysis", "variance")
    weighted = analysis.weights or analysis.missing == "inverse probability"
    if analysis.variance == "model" and (weighted or analysis.cluster):
        given = "weights" if weighted else "clusters"
        message = f"The variance of the model does not hold with {given}."
        yield Misfit("model-choice", message, 'Take variance out, or write variance = "robust".', key)
    elif analysis.variance == "model" and analysis.measure == "rate difference":
        message = "A linear model of rates does not say how they vary, so it has no variance of its own."
        yield Misfit("model-choice", message, 'Take variance out, or write variance = "robust".', key)
    elif analysis.variance == "model" and analysis.way != "regression":
        message = f"Adjusting by {analysis.way} has no variance of a model."
        yield Misfit("model-choice", message, "Take variance out.", key)
    unweighted = (*ROW_MODELS, "penalised logistic")
    if weighted and model_for(analysis, analysis.way) in unweighted and analysis.way == "regression":
        message = f"A {model_for(analysis, analysis.way)} model is not built for weights here."
        key = ("analysis", "weights" if analysis.weights else "missing")
        yield Misfit("model-choice", message, "Take the weights out, or choose another model.", key)
    if analysis.bootstrap and analysis.missing != "complete cases":
        message = f"Resampling is not built together with {analysis.missing}, which has intervals of its own."
        yield Misfit("model-choice", message, "Take [analysis.bootstrap] out.", ("analysis", "bootstrap"))
    if analysis.cluster and analysis.model == "penalised logistic":
        message = "A penalised logistic model has no interval for clusters."
        yield Misfit("model-choice", message, "Take cluster out, or plan another model.", ("analysis", "cluster"))


def _of_modifier(analysis: Analysis, file: PlanFile) -> Iterator[Misfit]:
    members = file.adjustment.members if file.adjustment else []
    if analysis.modifier is not None and analysis.modifier not in members:
        message = f"The modifier “{analysis.modifier}” enters the model, so it is adjusted for, but is not in the set."
        remedy = "Add it to the set of [adjustment], which is judged with it then."
        yield Misfit("model-choice", message, remedy, ("analysis", "modifier"))


def _unused(analysis: Analysis) -> Iterator[Misfit]:
    measure, ways = analysis.measure, {analysis.way, *analysis.other_ways}
    model = model_for(analysis, "regression") if "regression" in ways else None
    used = {
        "person_time": measure.startswith("rate") or (model == "negative binomial"),
        "time": measure == "hazard ratio",
        "entry": measure == "hazard ratio",
        "matched_set": model == "conditional logistic",
        "weighting": bool(ways & {"weighting", "doubly robust"}),
        "imputation": analysis.missing == "imputation",
    }
    for name, wanted in used.items():
        if getattr(analysis, name) is not None and not wanted:
            message = f"“{name}” is stated, but this analysis does not use it."
            yield Misfit(
                "model-unused", message, "Take it out, or choose the analysis it belongs to.", ("analysis", name)
            )
    for name, form in analysis.forms.items():
        if form == "stratum" and model != "cox":
            message = f"“{name}” has the form “stratum”, which only a Cox model knows."
            yield Misfit("model-choice", message, "Write “category”.", ("analysis", "forms", name))
