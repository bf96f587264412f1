"""A SAS data file written byte by byte, since no package writes one: 32 bits, little-endian, UTF-8, not compressed.

The layout is that of M. S. Shotwell, "SAS7BDAT Database Binary Format" (2013): a header, a page of subheaders that say
what the columns are, and pages of rows. Dates are days since 1960.
"""

from __future__ import annotations

import datetime as dt
import struct
from collections.abc import Sequence
from pathlib import Path
from typing import Any

_MAGIC = bytes.fromhex("000000000000000000000000c2ea8160b31411cfbd92080009c7318c181f1011")
_HEADER, _PAGE = 1024, 8192
_DATA_PAGE = 0x100
_UTF8 = 20


def write_sas(path: Path, columns: dict[str, tuple[int | None, str]], rows: Sequence[Sequence[Any]]) -> None:
    """Write rows; each column has a width in bytes (None for numbers) and a format such as ``DATE``.

    A number may be None for missing, a date, or a letter, which is a missing value of its own.
    """
    widths = [width or 8 for width, _ in columns.values()]
    pages = [_page(0, _subheaders(columns, widths, len(rows)))]
    per_page = (_PAGE - 24) // sum(widths)
    for start in range(0, len(rows), per_page):
        part = rows[start : start + per_page]
        cells = [_cell(value, width) for row in part for value, (width, _) in zip(row, columns.values(), strict=True)]
        head = b"\0" * 16 + struct.pack("<HHHH", _DATA_PAGE, len(part), 0, 0)
        pages.append((head + b"".join(cells)).ljust(_PAGE, b"\0"))
    header = bytearray(_HEADER)
    header[:32] = _MAGIC
    header[32], header[35], header[37], header[39], header[70] = 0x22, 0x22, 1, ord("1"), _UTF8
    header[84:92], header[92:124], header[156:164] = b"SAS FILE", b"ROWS".ljust(32), b"DATA    "
    struct.pack_into("<III", header, 196, _HEADER, _PAGE, len(pages))
    header[216:224] = b"9.0401M6"
    path.write_bytes(bytes(header) + b"".join(pages))


def _cell(value: Any, width: int | None) -> bytes:
    if width is not None:
        return (value or "").encode().ljust(width)
    if value is None or isinstance(value, str):  # the letter stands, inverted, in a not-a-number
        return b"\0\0\0\0\0" + bytes([0xFF ^ ord(value or ".")]) + b"\xff\xff"
    return struct.pack("<d", (value - dt.date(1960, 1, 1)).days if isinstance(value, dt.date) else value)


def _subheaders(columns: dict[str, tuple[int | None, str]], widths: list[int], count: int) -> list[bytes]:
    blob, places = b"\0" * 24, []
    for text in [*columns, *(form for _, form in columns.values())]:
        places.append((4 + len(blob), len(text.encode())))
        blob += text.encode() + b"\0" * (-len(text.encode()) % 4)
    names, formats = places[: len(columns)], places[len(columns) :]
    size = bytearray(480)
    size[:4] = b"\xf7" * 4
    for place, number in ((20, sum(widths)), (24, count), (36, len(columns)), (52, _PAGE)):
        struct.pack_into("<I", size, place, number)
    attributes, offset = b"", 0
    for width, (text, _) in zip(widths, columns.values(), strict=True):
        attributes += struct.pack("<IIHBB", offset, width, 4, 1 if text is None else 2, 0)
        offset += width
    name_refs = b"".join(struct.pack("<HHHH", 0, place, length, 0) for place, length in names)
    described = [
        bytes(size),
        b"\xf6" * 4 + struct.pack("<II", len(columns), 0),
        _sized(b"\xfd\xff\xff\xff", blob[4:] + b"\0" * 12),
        _sized(b"\xff\xff\xff\xff", name_refs + b"\0" * 8),
        _sized(b"\xfc\xff\xff\xff", attributes + b"\0" * 8),
    ]
    for place, length in formats:
        form = b"\xfe\xfb\xff\xff".ljust(34, b"\0") + struct.pack("<HHH", 0, place, length)
        described.append(form.ljust(64, b"\0"))
    return described


def _sized(signature: bytes, content: bytes) -> bytes:
    return signature + struct.pack("<HHI", len(content), 0, 0) + content


def _page(kind: int, subheaders: list[bytes]) -> bytes:
    end, pointers, content = _PAGE, b"", b""
    for subheader in subheaders:
        end -= len(subheader)
        content = subheader + content
        pointers += struct.pack("<IIBBH", end, len(subheader), 0, 0, 0)
    pointers += struct.pack("<IIBBH", end, 0, 1, 0, 0)  # the one that says there are no more
    count = len(subheaders) + 1
    head = b"\0" * 16 + struct.pack("<HHHH", kind, count, count, 0) + pointers
    return head.ljust(end, b"\0") + content
