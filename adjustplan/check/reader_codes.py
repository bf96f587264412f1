"""What the codes mean that no rule has: those of reading a graph, a plan or data, of sealing, of fitting.

A rule explains itself where it is written. A reader raises its findings in the middle of its work, so their
explanations stand here: one paragraph for each code, on what is the case, why it matters and what mends it.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from adjustplan.check.estimate_codes import ESTIMATE_CODES
from adjustplan.check.source_codes import SOURCE_CODES

READER_CODES: Mapping[str, str] = MappingProxyType(
    {
        **SOURCE_CODES,
        **ESTIMATE_CODES,
        # the files a graph is read from
        "graph-unreadable": "The graph file is not there or may not be read. Its path is relative to the plan that"
        " names it. Mend the path, or make the file readable.",
        "graph-not-utf8": "A byte of the graph file is not UTF-8, so letters in it cannot be told for certain. Save"
        " the file as UTF-8.",
        "graph-unwritable": "A name, label or reason holds signs that the format to be written cannot carry: line"
        " breaks, control signs, or in CSV spaces around a name. Another program would read something else, or"
        " nothing. Write an edge list, which carries everything, or take the signs out.",
        "graph-unknown-format": "The file's ending says in which format a graph is, and this ending names none. An"
        " edge list ends in .edges; DOT, GraphML and two-column CSV are read too.",
        "graph-syntax": "A line or mark is not of the format. In an edge list a line is either arrows (cause ->"
        " effect, commas for several, a reason behind a colon) or names, a colon and what is said of them.",
        "graph-reserved": "The arrow “->?”, for one that the team is not sure of, is reserved and does nothing yet."
        " Draw the arrow or leave it out, and say in a comment that it is in doubt.",
        "graph-header": "The first line of a two-column CSV file looked like names of columns but not like a known"
        " header, so it was read as an arrow. Write cause,effect as its first line if it is a header.",
        "graph-undirected": "The file holds lines without direction. A causal graph needs to know which end is the"
        " cause; write the graph as a directed one.",
        "graph-unknown-item": "Of a variable can be said: unmeasured, restricted, proxy of a variable, wave=, cost=,"
        " and a label in quotes. This is none of them, and is often a slip of the pen.",
        "graph-item-twice": "The same thing is said twice of one variable, perhaps differently. Keep one.",
        "graph-bad-attribute": "What a DOT or GraphML file says of a variable cannot be understood, such as a wave"
        " that is no whole number. Mend the attribute, or take it out.",
        "graph-bad-wave": "A wave says when a variable is measured, and is a whole number such as 0 for the start.",
        "graph-bad-cost": "A cost says what measuring a variable takes, in any unit, and is a finite number, 0 or"
        " more.",
        "graph-bad-proxy": "A proxy stands in for a variable that is in the graph and is not itself. Draw the"
        " variable that it measures, or mend the name.",
        "graph-near-miss": "A variable that is described, but is on no arrow, is called almost like one that is:"
        " probably the same with a slip of the pen, so that what was said of it is lost.",
        # what makes arrows a causal graph
        "graph-empty": "The file has no arrow and no variable, so there is nothing to judge.",
        "graph-empty-name": "A variable needs a name of at least one visible letter.",
        "graph-cycle": "The arrows lead round in a circle, so something would cause itself. Usually two moments of"
        " one variable share a name: give the earlier and the later value each their own.",
        "graph-self-arrow": "A variable has an arrow to itself. Its earlier value may cause its later one: draw two"
        " variables.",
        "graph-arrow-twice": "The same arrow is drawn twice, and its two reasons may disagree. Keep one.",
        "graph-back-in-time": "An arrow leads from a later wave to an earlier one, but a cause comes before its"
        " effect. Turn the arrow round, or mend the waves.",
        "graph-variable-twice": "A variable is described twice. Keep one description.",
        "graph-unmeasured-restricted": "A variable is called both unmeasured and restricted. People were selected by"
        " a restricted variable, so it is known; keep the word that is true.",
        "graph-unknown-variable": "A variable is named that the graph does not have, often by a slip of the pen.",
        # the plan file
        "plan-unreadable": "The plan file is not there or may not be read. Mend the path, or make the file readable.",
        "plan-not-utf8": "A byte of the plan file is not UTF-8, which TOML prescribes. Save the file as UTF-8.",
        "plan-not-toml": "The plan is not valid TOML at the place shown. A text stands in quotes, a list in square"
        " brackets, a table's name in square brackets on a line of its own.",
        "plan-unknown-key": "The plan has a key that means nothing. It is refused, for a slip such as “rational”"
        " would otherwise leave something out in silence.",
        "plan-missing-key": "A plan needs a title, a graph and a question; a table needs the keys without which it"
        " says nothing. Add the key.",
        "plan-bad-value": "A key has a value of the wrong kind, or one that is none of its known words.",
        "plan-unknown-variable": "The plan names a variable that its graph does not have. Add it to the graph, or"
        " mend the name.",
        "plan-missing-table": "What was asked for needs a table that the plan does not have yet.",
        "plan-no-data": "The planned regression was asked for, but the plan names no data. Add data to [analysis].",
        "plan-unwaivable": "A waiver names a rule that guards the record itself, such as one on an edited seal file."
        " It cannot be waived, or a plan could talk itself out of it; record the change with “adjustplan amend”.",
        "plan-unknown-rule": "A waiver names a rule that does not exist, so it waives nothing.",
        # starting a study, and the seal file beside a plan
        "start-missing": "A new study needs a title, an exposure, an outcome and a design. Give them as options"
        " where there is no terminal to ask on.",
        "start-empty": "A title or a name for a new study is empty.",
        "start-same-name": "Two variables of a new study share a name. Exposure, outcome and covariates are"
        " different variables.",
        "start-design": "The design named for a new study is none that is known.",
        "start-measure": "The measure named for a new study is none that its design can estimate.",
        "start-exists": "A study stands in the folder already, and nothing there is replaced.",
        "start-no-folder": "A new study is written into a folder, but a file of that name is there.",
        "text-not-utf8": "What was typed holds letters that cannot be told for certain. Set the terminal to UTF-8.",
        "seal-missing": "The plan has not been sealed yet, so there is nothing to compare it with or to amend.",
        "seal-exists": "The plan is sealed already. A later change is recorded as an amendment, with its reason.",
        "seal-no-reason": "An amendment needs a reason: without it, nobody can tell a good change from a convenient"
        " one.",
        "seal-nothing-changed": "The plan and its graph say what was last agreed, so there is no amendment to record.",
        "seal-data-unsaid": "Whether the data had been seen decides what a seal or amendment is worth, so it must be"
        " said either way.",
        "seal-unseen": "An amendment says that the data have not been seen, but an earlier entry says that they"
        " were. What was seen stays seen.",
        "seal-bad-date": "A seal or amendment is dated in the future, or before the entry that it follows.",
        "seal-unreadable": "The seal file is there but may not be read. Make it readable.",
        "seal-not-utf8": "A byte of the seal file is not UTF-8. Get the file back from version control.",
        "seal-not-toml": "The seal file is not valid TOML, so it was edited or damaged. Get it back from version"
        " control.",
        "seal-unknown-key": "The seal file has a key that is never written there. Get it back from version control.",
        "seal-missing-key": "The seal file lacks a key that is always written. Get it back from version control.",
        "seal-bad-value": "The seal file has a value that is never written there. Get it back from version control.",
        "seal-entry-edited": "An entry of the seal file has been edited since it was written, for its fingerprint no"
        " longer fits. Get the file back from version control.",
        "seal-chain-broken": "An entry of the seal file does not follow on the one before it: one was taken out or"
        " changed. Get the file back from version control.",
        "seal-order": "The entries of the seal file are in an order in which they cannot have been written.",
        "seal-statements-edited": "What the seal file says was agreed does not fit the fingerprint of its last"
        " entry. Get the file back from version control.",
        # the question put to the graph
        "question-missing": "A graph alone does not say what is asked. Name exposure and outcome, or a plan.",
        "question-effect": "The effect asked for is either total (through all paths) or direct (not through any"
        " mediator).",
        "question-same": "Exposure and outcome are one variable. Name two.",
        "question-restricted": "Exposure or outcome is held fixed by how people came into the data. It does not vary"
        " there, so no effect of it, or on it, can be seen.",
        "question-which": "Sufficient sets are listed as all minimal ones, or as one: any, the smallest, the"
        " cheapest or the most precise.",
        "adjustment-member-is-end": "The exposure or the outcome is in the set to adjust for. Adjusting for either"
        " leaves no effect to estimate. Take it out.",
        "adjustment-exposure-outcome": "The exposure or the outcome is in a set of the plan. Adjusting for either"
        " leaves no effect to estimate. Take it out.",
        # the data file
        "data-no-file": "The data file that the plan names is not there. Its path is relative to the plan.",
        "data-unknown-format": "Data are read from CSV, TSV, Parquet, Arrow, Stata, SAS, SPSS, Excel and DuckDB"
        " files, from PostgreSQL and through Spark, which the name of the place says.",
        "data-empty": "The data file has nothing in it. Export the data again.",
        "data-no-rows": "The data file has a header and no rows. Export the data again.",
        "data-unreadable": "The data file is not what its ending says, or breaks off, or a line has too many cells."
        " Export it again.",
        "data-not-utf8": "The data file is not UTF-8, so letters in it cannot be told for certain. Save it as UTF-8.",
        "data-missing-column": "A variable of the plan has no column in the data. Name its column in"
        " [analysis.columns].",
        "data-column-twice": "Two columns share a name (capitals do not tell them apart), so which is meant is"
        " unknown. Rename one.",
        "data-unsupported-type": "A column holds dates, lists or the like, which no regression can use as they are."
        " Derive a number from it first.",
        # who is eligible, and what is derived
        "data-expression-syntax": "An expression of [data] cannot be read at the character that is marked, so nobody"
        " can say who is meant. Its words are and, or, not, in, is missing and date(…); equality is =.",
        "data-expression-type": "An expression of [data] compares unlike things, or a condition is none. Engines"
        " would guess, each differently. Compare like with like.",
        "data-expression-size": "An expression of [data] is too long, too deep, or built on too many columns. Derive"
        " columns in between, name steps, or prepare it in the data.",
        "data-derive-form": "A derived column is not stated by exactly one of cut, recode, days, years and equals,"
        " or that does not fit its column.",
        "data-derive-name": "A derived column is called like another, capitals aside, and would replace it in"
        " silence. Rename it.",
        "data-derive-cycle": "Derived columns use each other in a circle, so none can come first. Derive one of them"
        " from the data.",
        "data-missing-code": "A code for “missing” is one that its column cannot hold, or belongs to a derived"
        " column, so it would do nothing. Write it as the data have it.",
        "data-missing-code-unused": "A code for “missing” never occurs in its column. Perhaps it is a slip of the"
        " pen, and the true code is still among the values; see the code book.",
        "data-recode-unlisted": "Some old values have no new one and became missing, so their rows leave the"
        " analysis. List them, or state “otherwise”.",
        "data-dates-order": "The last day lies before the first in some rows. A time cannot be negative, so it"
        " became missing there. Correct the dates, or swap from and to.",
        "data-not-zero-one": "A number that stands as a condition is neither 0 nor 1 in some rows, so what it means"
        " there is unknown. Compare it with something, or list its codes for “missing”.",
        "data-none-eligible": "The conditions of [data] leave nobody. Usually a value is coded differently from what"
        " is written; look at the step that is named.",
        "data-eligibility-unknown": "Rows were left out because a value is missing that would tell whether they are"
        " eligible. They may differ from the others: report how many, or allow “is missing” in the condition.",
        # the values in the data
        "data-out-of-range": "A weight or a time is 0 or below, follow-up ends before it begins, or a count or mean"
        " that a ratio compares is below 0. Correct the values, or leave the cells empty.",
        "data-all-missing": "A column that is needed has no value in any row. Check the column and the export.",
        "data-one-level": "Exposure or outcome has one value in every row, so there is nothing to compare.",
        "data-infinite": "A column has infinite values, usually from a division by zero. Correct them, or leave the"
        " cells empty.",
        "data-text-numbers": "A column that should hold numbers holds words, often a word for “missing”. Leave cells"
        " without a value empty, or state the form “category”.",
        "data-missing-word": "A word such as “NA” counts as a level of a category. If it means missing, leave the"
        " cell empty, or missing people become a group of their own.",
        "data-outcome-text": "The outcome holds words where 0 and 1, or numbers, are needed. Recode it: 1 where the"
        " outcome occurred, 0 where not.",
        "data-outcome-codes": "The outcome has other values than 0 and 1. Which of two codes means “occurred” is not"
        " guessed, for the wrong guess turns the effect round.",
        "data-contrast": "The levels compared cannot be found in the exposure's column, or it has several and the"
        " plan does not say which to compare. State the contrast in [question].",
        "data-rows-dropped": "Rows that lack a value the planned regression needs were left out. If they differ from"
        " the others, the estimate is not for the whole population: say why they may be left out.",
        "data-no-complete-rows": "No row has a value for everything that a set needs, so it cannot be fitted.",
        # writing, and the check itself
        "output-exists": "The file exists, and no file is replaced unless --force says so.",
        "output-is-folder": "A file is to be written where a folder is. Name a file.",
        "output-unwritable": "The file cannot be written: the folder is protected, or the disk is full.",
        "output-unknown-format": "The ending of a picture's name says its format, and this one names none that is"
        " written: .svg, .png or .dot.",
        "output-no-layout": "The program that lays pictures out is missing or failed. Install graphviz-pure, or"
        " write DOT, which needs no layout.",
        "check-unknown-rule": "A code was asked for that no finding has. “adjustplan explain” lists them all.",
        "check-no-plans": "A folder or pattern given to “adjustplan check” holds no plan: no .toml file with a graph"
        " and a [question]. A check of nothing must not count as passed.",
    }
)
