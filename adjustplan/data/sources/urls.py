"""Connection URLs, and how to tell and show one without giving a secret away.

A plan is a file that people share, so no password may stand in it. What may be one is recognised generously: a password
is often pasted without the escapes that a URL wants, and must not slip through for that.
"""

from __future__ import annotations

import re
from urllib.parse import unquote

_SECRET_KEYS = re.compile(
    r"pass(word|wd|phrase)?$|pwd|secret|token|scram_(client|server)_key|credential", re.IGNORECASE
)


def is_url(place: str) -> bool:
    """Whether ``place`` is a URL and no path; ``postgresql:/x`` is one too, mangled by a path's normalising."""
    return re.match(r"[A-Za-z][A-Za-z0-9+.-]+:/", place) is not None and not re.match(r"[A-Za-z]:", place)


def holds_secret(url: str) -> bool:
    """Whether a password, or what may be one, stands in a URL."""
    rest = re.sub(r"^[^/]*:/*", "", url, count=1)
    head, _, query = rest.partition("?")
    if "@" in head and ":" in head.rpartition("@")[0]:
        return True
    if any(_SECRET_KEYS.search(unquote(pair.partition("=")[0]).strip()) for pair in re.split("[&?]", query)):
        return True
    authority = re.split(r"[/#]", head.rpartition("@")[2])[0]
    without_ipv6 = re.sub(r"\[[^]]*\]", "", authority)
    # A port that is no number is the start of a password with a “?” in it, unescaped.
    return any(not port.isdigit() for host in without_ipv6.split(",") for port in host.split(":")[1:] if port)


def scrubbed(url: str) -> str:
    """The URL as messages may show it: without its options, and cut down to its kind where it may hold a secret."""
    if holds_secret(url):
        return f"{url.partition(':')[0]}://…"
    return url.partition("?")[0]
