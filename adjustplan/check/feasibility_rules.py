"""Rules about whether the study is large enough, from the numbers that the plan states; silent where it states none."""

from __future__ import annotations

from collections.abc import Iterator

from adjustplan.check.registry import rule
from adjustplan.check.subject import Subject
from adjustplan.errors import Finding
from adjustplan.study import OUTCOME_TYPES
from adjustplan.study.feasibility import Feasibility, count_parameters, feasibility

FEW_OUTCOMES = 10
LIKELY_NONE = 0.05
PER_PARAMETER = 10


def feasibility_of(subject: Subject) -> Feasibility | None:
    """What the plan's numbers imply; None where it states too few, or its outcome is nothing that one has or not."""
    study, analysis = subject.plan.study, subject.plan.file.analysis
    if study is None:
        return None
    if analysis and not {"binary", "time to event"} & set(OUTCOME_TYPES[analysis.measure]):
        return None
    parameters, known = count_parameters(subject.members, analysis.forms if analysis else {})
    return feasibility(study, parameters, parameters_known=known)


@rule(
    "study-few-outcomes",
    "warning",
    finds="A study that can expect fewer than ten outcomes, or may well see none (a chance over 5 %).",
    matters="So few outcomes decide nothing, whatever the number of people; and a study that sees none gives no ratio.",
    mend="Follow more people, or for longer, or choose a design that starts from people with the outcome.",
    source="Common practice; the chance of seeing none is binomial.",
)
def few_outcomes(subject: Subject) -> Iterator[Finding]:
    feasible = feasibility_of(subject)
    if feasible and (feasible.expected < FEW_OUTCOMES or feasible.chance_of_none > LIKELY_NONE):
        remedy = "Plan for more outcomes, or for another design."
        yield subject.finding(feasible.expectation(), remedy, "study", "size")


@rule(
    "model-few-outcomes",
    "warning",
    finds="A regression with fewer than ten expected outcomes for each of its parameters.",
    matters="With few outcomes for each parameter estimates are biased and intervals too narrow or absurdly wide. Ten"
    " is a rule of thumb and no law: how many are needed depends on the data too (van Smeden et al. 2016, BMC Med Res"
    " Methodol 16:163).",
    mend="Adjust for fewer variables (a smaller sufficient set), give them simpler forms, or plan for more outcomes.",
    source="Peduzzi et al. 1996, J Clin Epidemiol 49:1373.",
)
def few_per_parameter(subject: Subject) -> Iterator[Finding]:
    feasible = feasibility_of(subject)
    if feasible and subject.members and feasible.per_parameter < PER_PARAMETER:
        message = f"{feasible.expectation()} {feasible.burden()} Fewer than ten is few, by a rule of thumb."
        yield subject.finding(message, "Adjust for fewer variables, or plan for more outcomes.", "adjustment", "set")


@rule(
    "study-detectable",
    "note",
    finds="The weakest effect that a study of this size would notice: 80 % power, two-sided 5 %, before adjustment.",
    matters="An effect weaker than that will probably be missed, and a result that shows nothing then shows little.",
    mend="Hold it against the effect that would matter; plan for more people where it is larger.",
    source="Fleiss, Levin and Paik 2003, Statistical Methods for Rates and Proportions, 3rd ed., chapter 4;"
    " Schlesselman 1982, Case-Control Studies, chapter 6.",
)
def detectable(subject: Subject) -> Iterator[Finding]:
    feasible = feasibility_of(subject)
    if feasible and feasible.ratio:
        remedy = "Hold it against the weakest effect that would matter."
        yield subject.finding(feasible.detection(), remedy, "study", "size")


@rule(
    "study-efficiency",
    "note",
    finds="A rare outcome (risk below 1 %) in a cohort or cross-sectional study, or a rare exposure (below 5 % of"
    " controls) in a case-control study.",
    matters="Most of the people observed then tell nothing; another design asks the same with far fewer.",
    mend="Weigh the other design, a case-control study nested in the cohort among them, or say why this one is chosen.",
    source="Common practice; the precision that controls keep is from Ury 1975, Biometrics 31:643.",
)
def efficiency(subject: Subject) -> Iterator[Finding]:
    feasible = feasibility_of(subject)
    if feasible and feasible.alternative:
        yield subject.finding(feasible.alternative, "Weigh the other design.", "study", "design")
