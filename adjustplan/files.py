"""Files on disk: text is read as UTF-8, and written whole or not at all."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path

from adjustplan.errors import AdjustplanError, Finding, OutputError, did_you_mean


def read_text(path: str | Path, raises: type[AdjustplanError], subject: str) -> str:
    """The text of a UTF-8 file, a byte order mark left out.

    Parameters
    ----------
    path : str or Path
    raises : type of AdjustplanError
        What to raise where the file cannot be read or is not UTF-8.
    subject : str
        What the file is, as the first word of the finding's code: ``graph``, ``plan``.
    """
    place = Path(path)
    try:
        data = place.read_bytes()
    except (OSError, ValueError) as error:  # a ValueError where the name holds what no file's name can
        names = [str(place.with_name(name)) for name in _names_beside(place)]
        remedy = did_you_mean(str(place), names, f"Name an existing {subject} file.")
        finding = Finding(
            f"{subject}-unreadable", f"{getattr(error, 'strerror', None) or error}.", remedy, file=str(path)
        )
        raise raises(finding) from None
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        message = f"Byte {error.start + 1} of the file (0x{data[error.start]:02x}) is not UTF-8."
        raise raises(
            Finding(f"{subject}-not-utf8", message, "Save the file as UTF-8.", file=str(path), line=line)
        ) from None


def write_whole(path: str | Path, content: str | bytes, *, force: bool = False) -> None:
    """Write a file whole or not at all; an existing one is replaced only with ``force``.

    Raises
    ------
    OutputError
        If the file exists and ``force`` is not set, or the folder cannot be written to.
    """
    place = Path(path)
    refuse_existing(place, force=force)
    data = content.encode("utf-8") if isinstance(content, str) else content
    try:
        place.parent.mkdir(parents=True, exist_ok=True)
        handle, temporary = tempfile.mkstemp(dir=place.parent, prefix=f".{place.name}.")
        try:
            with os.fdopen(handle, "wb") as stream:
                stream.write(data)
            mask = os.umask(0)
            os.umask(mask)
            Path(temporary).chmod(0o666 & ~mask)
            Path(temporary).replace(place)
        except BaseException:
            Path(temporary).unlink(missing_ok=True)
            raise
    except OSError as error:
        remedy = "Name a folder that can be written to."
        raise OutputError(Finding("output-unwritable", f"{error.strerror}.", remedy, file=str(path))) from None


def refuse_existing(path: Path, *, force: bool) -> None:
    """OutputError where ``path`` exists and may not be replaced."""
    if path.is_dir():
        finding = Finding("output-is-folder", "This is a folder, not a file.", "Name a file.", file=str(path))
        raise OutputError(finding)
    if path.exists() and not force:
        remedy = "Name another file, or add --force to replace it."
        raise OutputError(Finding("output-exists", "The file exists already.", remedy, file=str(path)))


def _names_beside(path: Path) -> list[str]:
    try:
        return sorted(entry.name for entry in path.parent.iterdir())
    except (OSError, ValueError):
        return []
