"""Blocks to Markdown. The only place that makes Markdown: every text is escaped here and nowhere else.

The output is CommonMark with tables, without HTML. Read again by a CommonMark reader, every text is the one
that was handed in, apart from what ``visible`` changes.
"""

from __future__ import annotations

import functools
import re
import unicodedata
from collections.abc import Iterable

from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Quote, Table

_LINE_ENDS = re.compile(r"\r\n|[\n\r\t\v\f\x1c\x1d\x1e\x85\u2028\u2029]")
_HIDDEN = frozenset(("Cc", "Cf", "Cs"))
_MARKS = re.compile(r"[\\`*\[~|#<&_]")
_LEADING = frozenset("#>+-=")
_LEADING_NUMBER = re.compile(r"(\d{1,9})([.)])(?=\s|$)")


def markdown(blocks: Iterable[Block]) -> str:
    """The Markdown text of blocks: LF, one empty line between blocks, one newline at the end."""
    parts = [part for block in blocks for part in _parts(block)]
    return "\n\n".join(parts) + "\n"


def _parts(block: Block) -> list[str]:
    """A block as pieces that stand apart by an empty line."""
    match block:
        case Heading(level=level, text=text):
            return [f"{'#' * level} {escaped(text)}".rstrip()]
        case Paragraph(text=text):
            line = escaped_line(text)
            return [line] if line else []
        case Table():
            return _table(block)
        case Bullets(items=items):
            return ["\n".join(f"- {escaped_line(item)}".rstrip() for item in items)] if items else []
        case Quote(lines=lines):
            return ["\n>\n".join(f"> {escaped_line(line)}".rstrip() for line in lines)] if lines else []
        case Code(text=text):
            return [_fenced(text)]
    raise TypeError(f"{type(block).__name__} is no block")


def _table(table: Table) -> list[str]:
    lines = [_row(table.columns), "|" + "---|" * len(table.columns)]
    lines += [_row(row) for row in table.rows]
    notes = ["\n".join(f"- {escaped_line(note)}" for note in table.notes)] if table.notes else []
    return ["\n".join(lines), *notes]


def _row(cells: Iterable[str]) -> str:
    return "|" + "".join(f" {text} |" if (text := escaped(cell)) else " |" for cell in cells)


def _fenced(text: str) -> str:
    """A fenced block whose fence is longer than any run of backticks inside."""
    lines = [_characters(line) for line in text.replace("\r\n", "\n").split("\n")]
    longest = max((len(run) for line in lines for run in re.findall("`+", line)), default=0)
    fence = "`" * max(3, longest + 1)
    return "\n".join([fence, *lines, fence])


def visible(text: str) -> str:
    """A text as one line: line ends and tabs are blanks, control and direction characters their number."""
    return _characters(_LINE_ENDS.sub(" ", text)).strip()


def _characters(text: str) -> str:
    if text.isprintable():
        return text
    return "".join(
        f"U+{ord(character):04X}" if unicodedata.category(character) in _HIDDEN else character
        for character in text
    )


@functools.lru_cache(maxsize=8192)
def escaped(text: str) -> str:
    """A text for a cell or a heading: a Markdown reader reads back that text and nothing else."""
    line = visible(text)
    return _MARKS.sub(lambda mark: _escaped_mark(line, mark.start()), line)


def escaped_line(text: str) -> str:
    """A text that begins a line, where a few signs would open a list, a quote, a heading or a rule."""
    line = escaped(text)
    number = _LEADING_NUMBER.match(line)
    if number:
        return f"{number[1]}\\{line[number.end(1) :]}"
    return f"\\{line}" if line[:1] in _LEADING else line


def _escaped_mark(line: str, place: int) -> str:
    """A sign that may mean something in Markdown, with a backslash where it does."""
    mark = line[place]
    following = line[place + 1 : place + 2]
    harmless = (
        (mark == "#" and place < len(line) - 1)
        or (mark == "<" and _opens_nothing(following))
        or (mark == "&" and not (following == "#" or following.isalnum()))
        or (mark == "_" and _inside_word(line, place))
    )
    return mark if harmless else "\\" + mark


def _opens_nothing(following: str) -> bool:
    """Whether a `<` before this character can open neither a tag nor a link."""
    return following in ("", " ", "=") or following.isdigit()


def _inside_word(line: str, place: int) -> bool:
    """Whether a run of underscores stands between letters or digits, where it marks no emphasis."""
    before, after = place, place
    while before > 0 and line[before - 1] == "_":
        before -= 1
    while after < len(line) - 1 and line[after + 1] == "_":
        after += 1
    return (
        before > 0 and after < len(line) - 1 and _is_letter(line[before - 1]) and _is_letter(line[after + 1])
    )


def _is_letter(character: str) -> bool:
    return unicodedata.category(character)[0] in "LN"
