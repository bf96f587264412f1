"""What changed between two sets of statements, in the words of the plan.

Statements are sorted lines, so what differs between two of them is a matter of sets. But nobody should have to read
“analysis.measure = "odds ratio"” beside “analysis.measure = "risk ratio"” to see that the measure changed: statements
about the same thing are paired, and each difference becomes one sentence. A statement of a kind that has no sentence of
its own here is repeated as it stands, so no difference goes unsaid.
"""

from __future__ import annotations

import re
import tomllib
from collections import Counter
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any

from adjustplan.plan.schema import Question
from adjustplan.plan.statements import PROSE, Statements, name_text
from adjustplan.plan.toml_text import collapsed, value_text

_NAME = r'(?:[A-Za-z_][\w.]*|"(?:[^"\\]|\\.)*")'
_IN_GRAPH = re.compile(rf"(variable {_NAME}|arrow {_NAME} -> {_NAME})(?:: (\w+)(?: = (.+))?)?")
_PART = r'(?:[\w-]+|"(?:[^"\\]|\\.)*")'
_IN_PLAN = re.compile(rf"({_PART}(?:\.{_PART})*) (=|has|is empty)(?: (.+))?")

_LISTS = {
    "adjustment.set": "the set",
    "question.other_exposures": "the further exposures",
    "study.matched": "the variables matched for",
}
_KEYS = {
    "question.contrast.exposed": "the exposed level of the contrast",
    "question.contrast.reference": "the reference level of the contrast",
    "adjustment.rationale": "the rationale of the set",
    "analysis.data": "the data file",
    "analysis.variance": "the kind of standard error",
    "study.size": "the planned size",
    "study.exposure_begins": "the start of exposure",
    "study.exposure_known": "the time at which exposure is settled",
    "study.follow_up_begins": "the start of follow-up",
    "study.sampled": "the variable for being sampled",
    "study.lost": "the variable for still being followed",
}
_MAPS = {"analysis.columns": "the column of", "analysis.forms": "the form of"}
_DETAILS = {"proxy_of": "the variable measured by"}
_LONG = frozenset({"rationale", "reason"})
"""Keys whose texts are too long to be said twice in a sentence; the files under version control hold them."""
_FREE = PROSE | {"exposed", "reference", "data", "columns"}
"""Keys whose texts go in quotation marks, because they may hold any words."""
_DEFAULTS = {"question.effect": Question.model_fields["effect"].default}


@dataclass(frozen=True, slots=True)
class _Fact:
    """A statement taken apart: what it is about, how it says it (``=``, ``has``, or neither), and the value."""

    about: str
    verb: str
    value: Any


def differences(before: Statements, after: Statements) -> list[str]:
    """What was added, removed or changed from ``before`` to ``after``, a sentence without its full stop for each.

    The list is empty exactly when the two say the same.
    """
    found = list(_of_graph(before.graph, after.graph)) + list(_of_plan(before.plan, after.plan))
    return list(dict.fromkeys(found))


def _of_graph(before: Iterable[str], after: Iterable[str]) -> Iterator[str]:
    gone, new = _only_in(before, after)
    old, now = _by_subject(map(_graph_fact, gone)), _by_subject(map(_graph_fact, new))
    for about in sorted({*old, *now}):
        owner, _, detail = _split(about)
        if not detail:
            added = "to the graph" if about.startswith("variable ") else ""
            yield f"{about} {'added' if about in now else 'removed'} {added if about in now else ''}".strip()
        elif owner in old or (owner in now and detail == "reason"):
            continue  # it came or went with its variable or arrow
        elif old.get(about) is True or now.get(about) is True:
            yield f"{owner} is {'now' if about in now else 'no longer'} {detail}"
        else:
            words = _DETAILS.get(detail, f"the {detail.replace('_', ' ')} of")
            what = f"{words} {owner.removeprefix('variable ')}"
            yield _changed(what, detail, old.get(about), now.get(about))
    yield from _as_they_stand(gone, new, _graph_fact)


def _of_plan(before: Iterable[str], after: Iterable[str]) -> Iterator[str]:
    gone, new = _only_in(before, after)
    facts = [(fact, True) for fact in map(_plan_fact, new) if fact]
    facts += [(fact, False) for fact in map(_plan_fact, gone) if fact]
    for about in sorted({fact.about for fact, _ in facts}):
        came = [fact for fact, is_new in facts if is_new and fact.about == about]
        went = [fact for fact, is_new in facts if not is_new and fact.about == about]
        if any(fact.verb == "has" for fact in came + went):
            yield from _members(about, [f for f in went if f.verb == "has"], [f for f in came if f.verb == "has"])
        elif any(fact.verb == "is empty" for fact in came + went):
            yield f"{_LISTS.get(about, about)} is {'now stated, and empty' if came else 'no longer stated'}"
        else:
            default = _DEFAULTS.get(about)
            old, now = (facts[0].value if facts else default for facts in (went, came))
            yield _changed(*_phrase(about), old, now)
    yield from _as_they_stand(gone, new, _plan_fact)


def _members(about: str, went: list[_Fact], came: list[_Fact]) -> Iterator[str]:
    """Sentences on the members of a list: variables, or tables that share what names them."""
    listed = _LISTS.get(about, about)
    tables: dict[str, list[list[dict[str, Any]]]] = {}
    for place, facts in enumerate((went, came)):
        for fact in facts:
            if isinstance(fact.value, dict):
                tables.setdefault(_title(about, fact.value), [[], []])[place].append(fact.value)
            else:
                name = name_text(fact.value) if isinstance(fact.value, str) else str(fact.value)
                yield f"{name} {'added to' if place else 'removed from'} {listed}"
    for title, (old, now) in sorted(tables.items()):
        if old and now:
            keys = sorted(
                {key for one in old for other in now for key in one | other if one.get(key) != other.get(key)}
            )
            yield f"the {' and '.join(keys) or 'number'} of {title} changed"
        else:
            yield f"{title} {'added' if now else 'removed'}"


def _title(about: str, told: dict[str, Any]) -> str:
    if about == "adjustment.alternative":
        members = told.get("set")
        names = [name_text(str(name)) for name in members] if isinstance(members, list) else []
        return f"the alternative {{{', '.join(names)}}}"
    if about == "waiver":
        return f"the waiver of {told.get('rule')}"
    return f"a member of {about}"


def _phrase(about: str) -> tuple[str, str]:
    """What a key is called in a sentence, and the key that decides how its values are shown."""
    for table, words in _MAPS.items():
        if about.startswith(f"{table}."):
            return f"{words} {about[len(table) + 1 :]}", table.rsplit(".", 1)[-1]
    key = about.rsplit(".", 1)[-1]
    return _KEYS.get(about, f"the {key.replace('_', ' ')}"), key


def _changed(what: str, key: str, old: Any, new: Any) -> str:
    if key in _LONG:
        return f"{what} {'changed' if None not in (old, new) else 'added' if old is None else 'removed'}"
    if old is None:
        return f"{what}, not stated before, is now {_shown(key, new)}"
    if new is None:
        return f"{what}, {_shown(key, old)} before, is no longer stated"
    return f"{what} changed from {_shown(key, old)} to {_shown(key, new)}"


def _shown(key: str, value: Any) -> str:
    if not isinstance(value, str):
        return value_text(value) if isinstance(value, (bool, int, float)) else str(value)
    return f"“{collapsed(value)}”" if key in _FREE else value


def _only_in(before: Iterable[str], after: Iterable[str]) -> tuple[list[str], list[str]]:
    old, new = Counter(before), Counter(after)
    return sorted((old - new).elements()), sorted((new - old).elements())


def _as_they_stand(gone: Iterable[str], new: Iterable[str], read: Any) -> Iterator[str]:
    yield from (f"no longer stated: {sentence}" for sentence in gone if read(sentence) is None)
    yield from (f"now stated: {sentence}" for sentence in new if read(sentence) is None)


def _by_subject(facts: Iterable[_Fact | None]) -> dict[str, Any]:
    return {fact.about: fact.value for fact in facts if fact}


def _split(about: str) -> tuple[str, str, str]:
    """The variable or arrow a fact of the graph is about, and its detail."""
    match = _IN_GRAPH.fullmatch(about)
    return (match[1], ": ", match[2] or "") if match else (about, "", "")


def _graph_fact(sentence: str) -> _Fact | None:
    match = _IN_GRAPH.fullmatch(sentence)
    value = _read(match[3]) if match and match[3] else True
    if match is None or value is None:
        return None
    return _Fact(f"{match[1]}: {match[2]}" if match[2] else match[1], "=", value)


def _plan_fact(sentence: str) -> _Fact | None:
    match = _IN_PLAN.fullmatch(sentence)
    if match is None or (match[2] == "is empty") != (match[3] is None):
        return None
    value = _read(match[3]) if match[3] else True
    return None if value is None else _Fact(match[1], match[2], value)


def _read(value: str) -> Any:
    """A value as TOML has it; None where it is none."""
    try:
        return tomllib.loads(f"value = {value}")["value"]
    except (ValueError, RecursionError):
        return None
