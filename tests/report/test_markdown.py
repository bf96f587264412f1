"""Markdown: whatever text holds, it is shown as that text. Reference: the CommonMark parser markdown-it-py."""

from __future__ import annotations

from html import unescape

from hypothesis import given
from hypothesis import strategies as st
from markdown_it import MarkdownIt

from adjustplan.report.markdown import code, prose, table, text
from adjustplan.report.numbers import figure, interval

words = st.text(st.characters(exclude_categories=("C", "Z")), min_size=1, max_size=30)


def rendered(markdown: str) -> str:
    return MarkdownIt("commonmark").enable("table").render(markdown)


@given(words)
def test_plain_text_comes_out_as_it_is(raw: str) -> None:
    assert unescape(rendered(text(raw))) == f"<p>{raw}</p>\n"


def test_a_number_at_the_start_does_not_begin_a_list() -> None:
    assert rendered(text("1. First of all")) == "<p>1. First of all</p>\n"


@given(words)
def test_code_comes_out_as_it_is(raw: str) -> None:
    html = rendered(table(("a",), [(code(raw),)]))
    assert f"<td><code>{raw}</code></td>" in unescape(html)


@given(words, words)
def test_a_table_keeps_its_cells_apart(first: str, second: str) -> None:
    html = unescape(rendered(table(("a", "b"), [(text(first), text(second))])))
    assert f"<td>{first}</td>\n<td>{second}</td>" in html


def test_paragraphs_stay_apart() -> None:
    assert prose("One\nline.\n\n\nTwo.\n") == "One line.\n\nTwo."


def test_numbers_have_three_digits() -> None:
    assert [figure(value) for value in (1.4772, 0.0321, 12.345, -123.4, 1234.5, 2.0, 0.0)] == [
        "1.48", "0.0321", "12.3", "-123", "1234", "2.00", "0.00",
    ]  # fmt: skip


def test_what_was_not_estimated_has_no_number() -> None:
    assert interval(None) == "not estimated"
