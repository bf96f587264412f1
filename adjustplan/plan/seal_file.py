"""The seal file: where it is, reading it, writing it.

It is TOML, so that people can read it and any program can; it is written whole or not at all. Reading looks only at
its form (the right keys with values of the right kind); whether the history in it holds is for ``history.faults``.
"""

from __future__ import annotations

import tomllib
from collections.abc import Iterator
from functools import lru_cache
from pathlib import Path

from pydantic import ValidationError

from adjustplan.errors import Finding, SealError, did_you_mean
from adjustplan.files import read_text, write_whole
from adjustplan.plan.history import Agreed, Entry, History, SealFile
from adjustplan.plan.places import Key, line_numbers, line_of
from adjustplan.plan.statements import Statements
from adjustplan.plan.toml_text import in_single_quotes, value_text

_HEAD = """\
# The seal of {plan}: what was agreed, when, and every amendment since.
# “adjustplan seal” and “adjustplan amend” write this file; “adjustplan check” notices when it was edited, and when the
# plan or its graph says something else than was agreed. Keep it under version control, beside the plan.

format = 1
"""


def seal_path(plan: str | Path) -> Path:
    """Where the seal of a plan file is: beside it, ``.seal`` in place of ``.toml``."""
    path = Path(plan)
    return path.with_name((path.stem if path.suffix.lower() == ".toml" else path.name) + ".seal")


def is_sealed(plan: str | Path) -> bool:
    """Whether there is a seal file for a plan file, whatever is in it."""
    path = seal_path(plan)
    return path.exists() or path.is_symlink()


def read_history(plan: str | Path) -> History | None:
    """The history in the seal file of a plan file; None where there is no such file.

    Raises
    ------
    SealError
        If the file is not UTF-8 or not TOML, has unknown or missing keys, or values of the wrong kind.
    """
    if not is_sealed(plan):
        return None
    path = seal_path(plan)
    file = _parsed(read_text(path, SealError, "seal"), path)
    return History(path, tuple(file.entry), Statements(tuple(file.agreed.graph), tuple(file.agreed.plan)))


def write_history(history: History, plan: str, *, force: bool = False) -> None:
    """Write a history to its file, whole or not at all; ``plan`` is the name of the plan file, for its readers."""
    parts = [_HEAD.format(plan=" ".join(plan.split()))]
    parts += [_entry_text(entry) for entry in history.entries]
    agreed = Agreed(graph=list(history.agreed.graph), plan=list(history.agreed.plan))
    parts.append("[agreed]\n" + _list_text("graph", agreed.graph) + _list_text("plan", agreed.plan))
    write_whole(history.path, "\n".join(parts), force=force)


def _entry_text(entry: Entry) -> str:
    lines = ["[[entry]]\n"]
    for key in Entry.model_fields:
        value = getattr(entry, key)
        lines.append(_list_text(key, value) if isinstance(value, list) else f"{key} = {value_text(value)}\n")
    return "".join(lines)


def _list_text(key: str, sentences: list[str]) -> str:
    told = "".join(f"  {in_single_quotes(sentence)},\n" for sentence in sentences)
    return f"{key} = [\n{told}]\n" if told else f"{key} = []\n"


@lru_cache(maxsize=4)
def _parsed(text: str, path: Path) -> SealFile:
    """The seal file of a text: the same text gives the same file, so several rules read a long one only once."""
    remedy = f"Get {path.name} back from version control."
    try:
        return SealFile.model_validate(tomllib.loads(text))
    except ValidationError as error:
        raise SealError(_findings(error, path, line_numbers(text), remedy)) from None
    except (ValueError, RecursionError) as error:
        message = f"This is not TOML, as a seal file is: {error or 'nested too deeply'}."
        raise SealError(Finding("seal-not-toml", message, remedy, file=str(path))) from None


def _findings(error: ValidationError, path: Path, lines: dict[Key, int], remedy: str) -> Iterator[Finding]:
    said = set()
    for details in error.errors(include_url=False):
        key: Key = details["loc"][:3]
        if key in said:
            continue  # one key can fail in two ways
        said.add(key)
        shown = ".".join(str(part + 1) if isinstance(part, int) else part for part in key)
        line = line_of(key, lines)
        if details["type"] == "extra_forbidden":
            known = [name for table in (SealFile, Entry, Agreed) for name in table.model_fields]
            hint = did_you_mean(str(key[-1]), known, remedy)
            yield Finding("seal-unknown-key", f"Unknown key “{shown}”.", hint, file=str(path), line=line)
        elif details["type"] == "missing":
            yield Finding("seal-missing-key", f"The key “{shown}” is missing.", remedy, file=str(path), line=line)
        else:
            message = f"“{shown}” is not what a seal file holds there: {details['msg']}."
            yield Finding("seal-bad-value", message, remedy, file=str(path), line=line)
