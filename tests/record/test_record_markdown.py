"""Blocks to Markdown: what a reader of Markdown reads back is the text that was handed in."""

from __future__ import annotations

import unicodedata

import pytest
from hypothesis import given
from hypothesis import strategies as st
from markdown_it import MarkdownIt
from markdown_it.token import Token

from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Quote, Table
from calcbook.record.markdown import markdown, visible

READER = MarkdownIt("commonmark").enable(["table", "strikethrough"])
# What breaks tables, opens HTML, links, emphasis, lists, headings, rules and fences; and what hides text.
SIGNS = "|\\`*_~[](){}<>&!#+-=.:;\"'0129a d\u2009\u00a0\u2212·λ°²\n\r\t\x00\x1b\u202e\u200b\u2028\ufeff"
nasty = st.text(alphabet=st.one_of(st.sampled_from(SIGNS), st.characters()), max_size=30)
PHRASES = (
    "<script>alert(1)</script>",
    "a | b || c\\| d\\\\| e \\",
    "- item",
    "12. item",
    "3) item",
    "# heading #",
    "> quote",
    "===",
    "---",
    "***",
    "~~~",
    "```python",
    "[link](http://example.org) and ![picture](x)",
    "[reference]: http://example.org",
    "&lt; &#35; &amp",
    "__init__ and d_i and _x_ and a_ b_",
    "**bold** ~~gone~~ *i*",
    "line one\nline two\r\nline three",
    "<https://example.org> <a@b.c>",
    "\u202eesrever",
    "|---|",
)


def text_of(token: Token) -> str:
    """The plain text of an inline token; fails on anything but text."""
    children = token.children or []
    kinds = {child.type for child in children}
    assert kinds <= {"text", "text_special"}, kinds
    return "".join(child.content for child in children)


def inlines(text: str) -> list[str]:
    tokens = READER.parse(text)
    assert not any(token.type in ("html_block", "fence", "code_block", "hr") for token in tokens)
    return [text_of(token) for token in tokens if token.type == "inline"]


@given(st.lists(st.lists(nasty, min_size=3, max_size=3), min_size=1, max_size=4))
def test_table_cells_read_back(rows: list[list[str]]) -> None:
    columns = ("A", "B", "C")
    table = Table(columns, tuple(tuple(row) for row in rows))
    assert inlines(markdown([table])) == [*columns, *(visible(cell) for row in rows for cell in row)]


@given(nasty)
def test_column_names_read_back(name: str) -> None:
    assert inlines(markdown([Table((name, "x"), (("1", "2"),))]))[0] == visible(name)


@given(nasty, st.integers(1, 6))
def test_headings_read_back(text: str, level: int) -> None:
    tokens = READER.parse(markdown([Heading(level, text)]))
    assert [token.tag for token in tokens if token.type == "heading_open"] == [f"h{level}"]
    assert [text_of(token) for token in tokens if token.type == "inline"] == [visible(text)]


@given(st.lists(nasty, min_size=1, max_size=4))
def test_paragraphs_bullets_and_quotes_read_back(texts: list[str]) -> None:
    wanted = [visible(text) for text in texts if visible(text)]
    assert inlines(markdown([Paragraph(text) for text in texts])) == wanted
    assert inlines(markdown([Bullets(tuple(texts))])) == wanted
    assert inlines(markdown([Quote(tuple(texts))])) == wanted


@pytest.mark.parametrize("phrase", PHRASES)
def test_phrases_that_mean_something_in_markdown(phrase: str) -> None:
    blocks: list[Block] = [
        Paragraph(phrase),
        Table((phrase, "b"), ((phrase, phrase),), (phrase,)),
        Bullets((phrase,)),
    ]
    assert inlines(markdown(blocks)) == [
        visible(text) for text in (phrase, phrase, "b", phrase, phrase, phrase, phrase)
    ]


@given(nasty)
def test_code_is_shown_as_it_stands(text: str) -> None:
    tokens = READER.parse(markdown([Code(text)]))
    assert [token.type for token in tokens] == ["fence"]
    assert not any(unicodedata.category(character) in ("Cf", "Cs") for character in tokens[0].content)
    if text.isprintable() and text.strip() == text:
        assert tokens[0].content == text + "\n"


@given(nasty)
def test_nothing_hidden_is_left(text: str) -> None:
    for character in visible(text):
        assert unicodedata.category(character) not in ("Cc", "Cf", "Cs")


def test_hidden_characters_are_named() -> None:
    assert visible("a\u202eb\x07") == "aU+202EbU+0007"


def test_plain_engineering_text_is_left_alone() -> None:
    line = "Re = 62 043 < 1e7, h_o of d_i: 1.5·λ/d_i (table 2), 5 % & more"
    assert markdown([Paragraph(line)]) == line + "\n"


def test_layout_is_plain() -> None:
    text = markdown([Heading(2, "Title"), Table(("a", "b"), (("1", ""), ("long cell", "2")), ("note",))])
    assert text == "## Title\n\n| a | b |\n|---|---|\n| 1 | |\n| long cell | 2 |\n\n- note\n"


def test_a_row_of_the_wrong_length_is_refused() -> None:
    with pytest.raises(ValueError, match="a row of 1 cells under 2 columns"):
        Table(("a", "b"), (("1",),))


def test_what_is_no_block_is_refused() -> None:
    with pytest.raises(TypeError, match="str is no block"):
        markdown(["text"])  # type: ignore[list-item]
