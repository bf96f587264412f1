"""What the codes of the estimates mean: one paragraph each, on what is the case, why it matters and what mends it."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

ESTIMATE_CODES: Mapping[str, str] = MappingProxyType(
    {
        # the planned regression
        "analysis-measure-design": "The stated design cannot estimate the planned measure: its number would not be"
        " what its name says. Choose a measure that the design can estimate.",
        "estimate-default-form": "A number enters the regression as a straight line, because the plan states no form"
        " for it. If its effect is curved, confounding is left: state a form.",
        "estimate-exposure-form": "How the exposure enters was taken from its values. State its form to settle it.",
        "estimate-constant-covariate": "A covariate has one value in all rows that were used, so it was left out; it"
        " could not have changed anything.",
        "estimate-collinear": "Some variables determine each other in the data. Among covariates that does no harm;"
        " where it includes the exposure, the data cannot tell the effects apart.",
        "estimate-few-rows": "The regression has as many parameters as there are rows, or more. Adjust for less, or"
        " state simpler forms.",
        "estimate-one-outcome": "Among the rows that are complete for this set the outcome never varies.",
        "estimate-empty-level": "Among the rows that are complete for this set, one of the levels compared is missing.",
        "estimate-separation": "Some variables predict the outcome without exception in part of the data, so the"
        " best estimate is infinite. Merge rare levels, state a simpler form, or adjust for less.",
        "estimate-no-convergence": "The regression found no best estimate, usually because of rare levels or extreme"
        " values.",
        "estimate-overflow": "The estimate or its interval is too large to be computed, usually because the exposure"
        " is in a tiny unit or a level is rare.",
        "estimate-exact": "The regression reproduces the outcome without error, so there is nothing to judge"
        " precision by. The outcome was probably computed from the other columns.",
        "estimate-spline-values": "A variable has too few different values for the curve that the plan states. State"
        " fewer parameters, or another form.",
        "estimate-spline-knots": "So many rows share one value that the bends of the curve were placed by the"
        " different values and not by the rows.",
        "estimate-too-many-levels": "A category has so many levels that the regression would not fit into memory."
        " Group its levels, or leave it out.",
        "estimate-limit": "The graph has more minimal sufficient sets than were fitted. Raise the limit to see more.",
        "estimate-sets-without-data": "Minimal sufficient sets were left out, for the data have no column for a"
        " member.",
        "estimate-no-levels": "Weighting, the doubly robust combination and stratification compare groups, but the"
        " exposure (for strata: a covariate) enters as a number. State cuts or categories for it.",
        "estimate-way-measure": "A way to adjust is not built for this measure. Adjust another way.",
        "estimate-way-weights": "The variance of a stratified estimate is for people who count once and are"
        " independent. Adjust another way where there are sampling weights or clusters.",
        "estimate-impossible-risk": "An estimated risk lies outside 0 to 1. That happens when some people are much"
        " more likely to be exposed than others, or when a straight line is fitted to risks.",
        "estimate-no-ratio": "One of the two means, risks or rates is 0 or below, so their ratio says nothing.",
        "estimate-positivity": "Some kinds of people never have one of the exposure levels compared, so nothing in"
        " the data says what would have become of them. The model fills that in. Merge levels, restrict the"
        " population, or truncate weights.",
        "estimate-log-binomial": "The log-binomial model has no maximum inside the range of risks, so the modified"
        " Poisson model took its place (Zou 2004, Am J Epidemiol 159:702). Say so in the methods.",
        "estimate-no-count": "A negative binomial model is for counts, and the outcome is none.",
        "estimate-sets-left-out": "Matched sets without a case or without a control say nothing about an odds ratio,"
        " and were passed over.",
        "estimate-sets-disagree": "Sufficient sets give estimates that differ by more than chance. If the graph were"
        " right they would estimate the same effect, so an arrow is missing or wrong, something unmeasured"
        " confounds, a variable is measured badly, or the form of a model is wrong.",
        "estimate-modification": "The effect by level of the modifier could not be estimated, usually because levels"
        " have few rows.",
        # strata, interaction and diagnostics
        "estimate-no-informative-stratum": "No stratum holds both groups (for a ratio: with somebody who has the"
        " outcome), so nothing can be compared. Merge strata, adjust for less, or use a regression.",
        "estimate-stratum-zeros": "Cells in which nobody is make the estimate over the strata 0 or infinite, or"
        " leave it without a variance. Merge strata, or adjust for less.",
        "estimate-strata-left-out": "Some strata say nothing about the effect; the message gives how many, and the"
        " share of people in them. If that is much, merge strata or adjust for less.",
        "estimate-homogeneity-untested": "The strata are too sparse for a test whether the effect is the same in all"
        " of them. Compare coarser strata.",
        "estimate-heterogeneity": "The effect differs between strata by more than chance, so one number for all"
        " hides something. Report it by stratum, or name a modifier in the plan.",
        "estimate-synergy": "The synergy index has no meaning, because an excess is not above 0. Take the level with"
        " the rarest outcome as the reference, or report the relative excess risk alone.",
        "estimate-interaction": "A measure of interaction, or its interval, is too large for the arithmetic or has"
        " no variance. Look for rare levels.",
        "estimate-joint-test": "The covariance of several numbers that are tested together cannot be used, so the"
        " test has no result. Look for rare levels, or for terms that determine each other.",
        "estimate-imbalance": "After weighting (or before, where nothing is weighted) the groups compared still"
        " differ in a covariate by more than a tenth of a standard deviation. What is left confounds, or rests on"
        " the model.",
        "estimate-extreme-weights": "Few people carry much of the weight, so they decide the estimate. Truncate the"
        " weights, restrict the population, or use a regression.",
        "estimate-influential": "Leaving out one person would move the estimate by more than half a standard error."
        " Check extreme values for errors of entry.",
        "estimate-nonlinear": "A curve fits a covariate better than the straight line that was planned, so part of"
        " its confounding may be left. State “spline(4)”.",
        "estimate-inflated": "The covariates foretell the exposure well, so there is little left to compare and the"
        " interval is wide. Leave out what the graph does not need, causes of the exposure alone first.",
        "estimate-few-outcomes": "There are few outcomes for each parameter, so coefficients and intervals can be"
        " biased (a rule of thumb, and contested). Adjust for less, state simpler forms, or plan a penalised model.",
        "estimate-entry-after-end": "A row enters follow-up at or after its end, so it is never at risk. Correct the"
        " dates, or leave it out.",
        "estimate-beyond-follow-up": "Survival is asked for at a time to which nobody in some stratum was followed,"
        " so it would be made up.",
        "estimate-few-event-times": "There are too few moments with events to see whether hazards are proportional."
        " Judge by the survival curves.",
        "estimate-log-time": "The test of proportional hazards uses the logarithm of time, but a time is zero or"
        " below.",
        "estimate-no-informative-sets": "No matched set has both a case and a control, so nothing can be compared."
        " Check the column that names the sets.",
        "estimate-large-set": "A matched set is so large that its likelihood is beyond the arithmetic. Adjust for"
        " what defines the sets in a logistic regression; with sets so large nothing is lost.",
        "estimate-no-overdispersion": "The counts vary no more than Poisson counts, so the Poisson model was fitted"
        " in place of the negative binomial one.",
        "impute-all-missing": "A variable is missing in everybody, so there is nothing to learn its values from."
        " Leave it out, or check its column.",
        "impute-not-imputable": "A variable that only helps to predict, such as the time at risk, has gaps. Complete"
        " it, or leave these people out.",
        "impute-text-linear": "A variable that holds words is stated as linear. State “category”.",
        "impute-few-rows": "A variable is known of fewer people than its imputation model has parameters. Group"
        " levels, or leave variables out.",
        "impute-too-many-levels": "The imputation model of a category with many levels would be too large. Group its"
        " levels.",
        "impute-no-convergence": "An imputation model has no best estimate, usually because of rare levels. Merge"
        " them.",
        "impute-model-failed": "The planned model could not be estimated in some of the completed copies, and"
        " pooling the others would be a selection. Merge rare levels, or state simpler forms.",
        "impute-nothing-missing": "Nothing is missing, so there was nothing to impute.",
        "impute-one-level": "A variable has one value wherever it is known, so everybody was given that value. Ask"
        " why it does not vary.",
        "impute-no-donors": "Nobody at some level of another variable has the one that is imputed, so it was learnt"
        " from people at other levels. Say why they should be alike.",
        "impute-perfect-prediction": "Other variables predict an imputed one without exception in part of the data."
        " A few people who contradict that were added to keep the draws honest. Group rare levels.",
        "impute-far-donors": "Some of the people whose number was imputed are unlike everybody whose number is"
        " known, so their values lie too near the middle. Compare with inverse probability, or name the variable"
        " under normal in [analysis.imputation].",
        "impute-not-settled": "The imputed values were still moving in one direction when the iterations ended. Plan"
        " more iterations.",
        "impute-too-few": "With so much information missing, another seed would give a visibly different result."
        " Make as many imputations as the message says.",
        "complete-nobody": "Nobody has a value for everything that the model needs. Choose a set that the data can"
        " serve.",
        "complete-separation": "Among people with some values nobody is complete, so nobody can stand for them."
        " Group levels, or impute.",
        "complete-no-convergence": "The model of being complete has no best estimate. Group rare levels.",
        "complete-constant": "No variable is known of everybody, so every complete row has the same weight, as with"
        " complete cases. Impute.",
        "complete-everybody": "Nobody lacks anything, so all weights are 1.",
        "complete-rare": "Some people had a small chance of being complete, so a few rows stand for many. Group"
        " levels, or compare with imputation.",
        "complete-clusters": "Where there are clusters, what estimating the weights takes off the variance is not"
        " taken off; the interval is rather too wide.",
        "stress-yardstick": "A yardstick is a covariate of the planned set; another one cannot be left out of it."
        " Name members of the set.",
        "stress-confounder": "A confounder that is assumed to be unmeasured is the exposure, the outcome, in the"
        " set, or measured. Take it out, adjust for it, or mark it unmeasured.",
        "stress-name-twice": "Two entries of a list share a name, so their results could not be told apart. Rename"
        " one.",
        "stress-target": "The value to which the estimate is to be moved is none that the measure can have.",
        "stress-no-estimate": "The planned set has no estimate, so there is nothing to put under stress. Mend what"
        " the other findings say.",
        "stress-no-conversion": "The estimate cannot be put as a risk ratio, because what that needs is unknown or"
        " the values are too large, so it has no E-value.",
        "stress-crude-risk": "The adjusted risk of the reference group is not known, so the crude one was taken and"
        " the E-value is approximate. Adjust by standardisation to have it.",
        "stress-outcome-frequency": "Nothing says how common the outcome is, so it was taken as common, which gives"
        " the smaller E-value. State assumed_risk in [study].",
        "stress-many-paths": "There are too many open paths to look at all, so unmeasured variables may be unnamed."
        " Choose a set that blocks more.",
        "stress-no-yardstick": "There is no estimate without this covariate, so it cannot serve as a yardstick.",
        "stress-yardstick-too-strong": "A covariate explains most of the exposure, and nothing else could be as"
        " strong again.",
        "stress-unfit": "A bias that is stated does not fit the measure, or needs a table of people that there is"
        " none of, so it was left out.",
        "stress-cut-off": "A normal distribution reaches values that cannot be, and was cut off there, which changes"
        " its mean and spread. A beta or triangular distribution may say better what is meant.",
        "stress-sampled-by-outcome": "The outcome is taken to be recorded wrongly in a study that samples by it,"
        " which changes sensitivity and specificity among the people sampled. Give those of the people sampled.",
        "stress-impossible-draws": "Some draws of the assumed values contradict the data, such as fewer people than"
        " none; they were left out and counted. If they are many, reconsider the assumptions.",
        "stress-no-possible-draw": "Every draw of the assumed values contradicts the data, so there is no result."
        " Reconsider sensitivity and specificity.",
        "estimate-bootstrap-failed": "In some resamples of the people there was no estimate, usually because a rare"
        " level was missing among them. Where that is more than a few, the others are a selection and there is no"
        " interval. Merge rare levels.",
        "estimate-diagnostic": "A diagnostic could not be computed; the estimate itself is not touched by that.",
        "estimate-hazards": "A hazard ratio changes over the time of follow-up, so the one number that is reported"
        " is an average which depends on how long people were followed. Report risks at stated times, or let a"
        " covariate have a baseline of its own.",
        "estimate-complete-rows": "Where rows are weighted or imputed, the further analyses are still those of the"
        " rows that are complete.",
    }
)
