"""Text to tree, for the typed notation (``Nu = 0.023 * Re**0.8``) and the written one (``0.023·Re^0.8``).

One small parser of our own serves both. It knows nothing but arithmetic, comparison, ``and/or/not``, the
conditional and the named functions, so there is no attribute, subscript or string that could slip through,
and it evaluates nothing: ``9**9**9**9`` is four numbers in a tree. The precedence is that of Python.
"""

from __future__ import annotations

import difflib
import functools
import keyword
import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass

from calcbook.formulas.functions import INTERNAL, TAKES_COLUMN, TYPED
from calcbook.formulas.names import typed_name
from calcbook.formulas.nodes import (
    COMPARISONS,
    CONSTANTS,
    Binary,
    Call,
    Column,
    Compare,
    Conditional,
    Logic,
    Negate,
    Node,
    Not,
    Number,
    Relation,
    RelationFault,
    Span,
    Symbol,
    depth,
    is_truth,
    span_of,
)

LONGEST_TEXT = 2_000
DEEPEST_NESTING = 50
# A long sum nests to the left in the tree without a bracket; this bound keeps every walk of a tree shallow.
DEEPEST_TREE = 100
# A line with values holds up to 17 digits for each operand of a relation.
LONGEST_WRITTEN_TEXT = 40_000

THIN_SPACE = "\u2009"
MINUS = "\u2212"

_STRENGTH = {"+": 0, "-": 0, "*": 1, "/": 1}
_WORDS = ("and", "or", "not", "if", "else")
_NAME = r"[A-Za-z_][A-Za-z0-9_]*"
_TYPED_TOKEN = re.compile(
    rf"(?P<space> +)|(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)|(?P<name>{_NAME}(?:\.{_NAME})*)"
    r"|(?P<op>\*\*|//|<=|>=|==|!=|[-+*/(),<>=])"
)
_WRITTEN_TOKEN = re.compile(
    rf"(?P<space> +)|(?P<number>\d{{1,3}}(?:{THIN_SPACE}\d{{3}})+(?:\.\d+)?"
    rf"|(?:\d+\.?\d*|\.\d+)(?:[eE][{MINUS}+]?\d+)?)|(?P<name>[^\W\d]\w*(?:\.[^\W\d]\w*)*)"
    rf"|(?P<op>[{MINUS}+·/^(),<>≤≥=≠])"
)
_WRITTEN_OPS = {MINUS: "-", "·": "*", "^": "**", "≤": "<=", "≥": ">=", "=": "==", "≠": "!="}
_TYPED_INSTEAD = {
    **{
        "^": "**",
        "·": "*",
        "×": "*",
        "÷": "/",
        "−": "-",
        "–": "-",
        "—": "-",
        "≤": "<=",
        "≥": ">=",
        "≠": "!=",
    },
    **{"[": "(", "]": ")", "{": "(", "}": ")", "√": "sqrt(…)", "&": "and", "|": "or", "!": "!= or not"},
    **{
        "π": "pi",
        "ρ": "rho",
        "μ": "mu",
        "µ": "mu",
        "ν": "nu",
        "λ": "lam",
        "σ": "sigma",
        "η": "eta",
        "Δ": "d",
    },
}


@dataclass(frozen=True, slots=True)
class _Token:
    kind: str
    text: str
    span: Span


def parse_relation(text: str) -> Relation:
    """``x = expression`` to a ``Relation``. Raises ``RelationFault``."""
    tokens = _typed_tokens(text)
    if len(tokens) < 3 or tokens[0].kind != "name" or tokens[1].text != "=":
        raise RelationFault(
            "relation-syntax",
            "the relation does not name what it gives",
            tokens[0].span,
            "symbol = expression",
        )
    target = tokens[0]
    if "." in target.text or target.text in TYPED or target.text in CONSTANTS:
        raise RelationFault(
            "relation-syntax",
            f"{target.text} cannot be given by a relation",
            target.span,
            "a symbol of its own",
        )
    _refuse_reserved(target)
    tree = _Parser(tokens[2:], TYPED, comma_before_else=False).whole()
    return Relation(text, target.text, tree, tree.symbols)


@functools.lru_cache(maxsize=1024)
def parse_expression(text: str) -> Relation:
    """A bare right-hand side or condition to a ``Relation`` without target. Raises ``RelationFault``.

    One text gives one relation, with what its tree remembers.
    """
    tree = _Parser(_typed_tokens(text), TYPED, comma_before_else=False).whole()
    return Relation(text, None, tree, tree.symbols)


def parse_written(text: str, names: Mapping[str, str] | None = None) -> Node:
    """The inverse of ``write`` (with the same ``names``), also for lines with values.

    Raises ``RelationFault``.
    """
    if len(text) > LONGEST_WRITTEN_TEXT:
        raise _too_long(text, LONGEST_WRITTEN_TEXT)
    typed = {shown: name for name, shown in (names or {}).items()}
    tokens = [_typed_token(token, typed) for token in _split(text, _WRITTEN_TOKEN)]
    return _Parser(tokens, TYPED | INTERNAL, comma_before_else=True).whole()


def _typed_token(token: _Token, typed: Mapping[str, str]) -> _Token:
    """A token of the written notation in the typed one."""
    if token.kind == "number":
        return _Token("number", token.text.replace(THIN_SPACE, "").replace(MINUS, "-"), token.span)
    if token.kind == "name":
        return _Token("name", typed.get(token.text) or typed_name(token.text), token.span)
    return _Token(token.kind, _WRITTEN_OPS.get(token.text, token.text), token.span)


def _typed_tokens(text: str) -> list[_Token]:
    if len(text) > LONGEST_TEXT:
        raise _too_long(text, LONGEST_TEXT)
    return _split(text, _TYPED_TOKEN)


def _too_long(text: str, longest: int) -> RelationFault:
    return RelationFault(
        "relation-too-long",
        f"the relation has {len(text)} characters",
        (longest + 1, len(text) + 1),
        f"at most {longest} characters",
    )


def _split(text: str, pattern: re.Pattern[str]) -> list[_Token]:
    """Text to tokens, closed by an ``end`` token; a character outside the notation is refused by its name."""
    tokens: list[_Token] = []
    position = 0
    while position < len(text):
        found = pattern.match(text, position)
        if found is None:
            raise _strange_character(text, position)
        kind = found.lastgroup or ""
        span = (position + 1, found.end() + 1)
        if kind != "space":
            tokens.append(_Token(kind, found.group(), span))
        position = found.end()
        if kind == "number" and position < len(text) and (text[position].isalnum() or text[position] in "._"):
            raise RelationFault(
                "relation-number",
                f"{found.group()} runs into {text[position]}",
                span,
                "a decimal number such as 1e-4",
            )
    tokens.append(_Token("end", "", (len(text) + 1, len(text) + 2)))
    return tokens


def _strange_character(text: str, position: int) -> RelationFault:
    character = text[position]
    name = unicodedata.name(character, f"U+{ord(character):04X}").lower()
    shown = character if character.isprintable() else f"U+{ord(character):04X}"
    instead = _TYPED_INSTEAD.get(character)
    return RelationFault(
        "relation-character",
        f"{shown} ({name}) is no character of a relation",
        (position + 1, position + 2),
        "unaccented letters, digits, _ . ( ) , + - * / ** < <= > >= == != and blanks",
        (instead,) if instead else (),
    )


def _refuse_reserved(token: _Token) -> None:
    """Words that have another meaning where an engineer might read them as a symbol."""
    first = token.text.partition(".")[0]
    if token.text == "log":
        raise _ambiguous_log(token.span)
    if token.text == "g":
        raise RelationFault(
            "relation-name",
            "g is the written form of the constant g_n",
            token.span,
            "another symbol",
            ("g_n",),
        )
    if keyword.iskeyword(first) or first in _WORDS:
        raise RelationFault("relation-syntax", f"{first} is not a word of a relation", token.span, "a symbol")
    if first.startswith("_") or "._" in token.text:
        raise RelationFault("relation-syntax", f"{token.text} starts with _", token.span, "a letter first")


def _ambiguous_log(span: Span) -> RelationFault:
    return RelationFault(
        "relation-log-ambiguous", "log may mean two logarithms", span, "ln or log10", ("ln", "log10")
    )


class _Parser:
    """Recursive descent over the tokens of one expression."""

    def __init__(
        self, tokens: list[_Token], functions: Mapping[str, tuple[int, int]], *, comma_before_else: bool
    ):
        self.tokens = tokens
        self.functions = functions
        self.comma_before_else = comma_before_else
        self.index = 0
        self.nesting = 0

    # -- moving over the tokens

    @property
    def token(self) -> _Token:
        return self.tokens[self.index]

    def at(self, *texts: str) -> bool:
        return self.token.kind in ("op", "name") and self.token.text in texts

    def advance(self) -> _Token:
        token = self.token
        self.index += 1
        return token

    def take(self, text: str, expected: str) -> None:
        if not self.at(text):
            raise self.unexpected(expected)
        self.advance()

    def unexpected(self, expected: str) -> RelationFault:
        found = self.token.text or "the end"
        return RelationFault("relation-syntax", f"{found} cannot stand here", self.token.span, expected)

    def reach(self, start: Span) -> Span:
        """From the start to the end of the last token taken."""
        return (start[0], self.tokens[self.index - 1].span[1])

    def deeper(self) -> None:
        self.nesting += 1
        if self.nesting > DEEPEST_NESTING:
            raise self.too_deep(f"at most {DEEPEST_NESTING} levels")

    def too_deep(self, expected: str) -> RelationFault:
        return RelationFault(
            "relation-too-deep", "the relation is nested too deeply", self.token.span, expected
        )

    # -- the grammar, weakest binding first

    def whole(self) -> Node:
        try:
            tree = self.conditional()
        except RecursionError:  # called from deep inside another program, before our own bound is reached
            raise self.too_deep(f"at most {DEEPEST_NESTING} levels") from None
        if self.token.kind != "end":
            raise self.unexpected("an operator or the end of the relation")
        if depth(tree) > DEEPEST_TREE:
            raise self.too_deep(f"at most {DEEPEST_TREE} operations inside one another")
        return tree

    def conditional(self) -> Node:
        start = self.token.span
        yes = self.logic("or")
        if not self.at("if"):
            return yes
        self.advance()
        condition = _truth(self.logic("or"))
        if self.comma_before_else:
            self.take(",", "a comma and else")
        self.take("else", "else and the other value")
        self.deeper()
        no = self.conditional()
        self.nesting -= 1
        if is_truth(yes) or is_truth(no):
            yes, no = _truth(yes), _truth(no)
        return Conditional(condition, yes, no, self.reach(start))

    def logic(self, op: str) -> Node:
        start = self.token.span
        parts = [self.logic("and") if op == "or" else self.negation()]
        while self.at(op):
            self.advance()
            parts.append(self.logic("and") if op == "or" else self.negation())
        return Logic(op, tuple(map(_truth, parts)), self.reach(start)) if len(parts) > 1 else parts[0]

    def negation(self) -> Node:
        if not self.at("not"):
            return self.comparison()
        start = self.advance().span
        self.deeper()
        inner = _truth(self.negation())
        self.nesting -= 1
        return Not(inner, self.reach(start))

    def comparison(self) -> Node:
        start = self.token.span
        first = self.arithmetic(0)
        rest: list[tuple[str, Node]] = []
        while self.at(*COMPARISONS):
            op = self.advance().text
            rest.append((op, _number(self.arithmetic(0))))
        return Compare(_number(first), tuple(rest), self.reach(start)) if rest else first

    def arithmetic(self, lowest: int) -> Node:
        """Sums (strength 0) of products (strength 1) of signed powers, grouped from the left."""
        start = self.token.span
        part = self.signed()
        while self.token.kind == "op" and _STRENGTH.get(self.token.text, -1) >= lowest:
            op = self.advance().text
            right = self.arithmetic(_STRENGTH[op] + 1)
            part = Binary(op, _number(part), _number(right), self.reach(start))
        return part

    def signed(self) -> Node:
        if not self.at("-"):
            return self.power()
        start = self.advance().span
        self.deeper()
        inner = _number(self.signed())
        self.nesting -= 1
        return Negate(inner, self.reach(start))

    def power(self) -> Node:
        start = self.token.span
        base = self.atom()
        if not self.at("**"):
            return base
        self.advance()
        self.deeper()
        exponent = self.signed()
        self.nesting -= 1
        return Binary("**", _number(base), _number(exponent), self.reach(start))

    def atom(self) -> Node:
        token = self.token
        if token.kind == "number":
            return self.literal()
        if token.kind == "name" and token.text not in _WORDS:
            return self.named()
        if not self.at("("):
            raise self.unexpected("a number, a symbol, a function or a bracket")
        self.advance()
        self.deeper()
        inner = self.conditional()
        self.nesting -= 1
        self.take(")", "an operator or a closing bracket")
        return inner

    def literal(self) -> Node:
        token = self.advance()
        value = float(token.text)
        vanished = value == 0.0 and re.match(r"[0.]*[1-9]", token.text)
        if value == float("inf") or vanished:
            raise RelationFault(
                "relation-number",
                f"{token.text} is beyond the range of numbers",
                token.span,
                "1e-300 to 1e300",
            )
        return Number(value, token.text, token.span)

    def named(self) -> Node:
        token = self.advance()
        if self.at("("):
            return self.call(token)
        if token.text in self.functions:
            raise RelationFault(
                "relation-syntax",
                f"{token.text} is a function",
                token.span,
                f"{token.text}(…) or another symbol",
            )
        _refuse_reserved(token)
        table, *columns = token.text.split(".")
        if len(columns) > 1:
            raise RelationFault(
                "relation-syntax", f"{token.text} has more than one dot", token.span, "table.column"
            )
        return Column(table, columns[0], token.span) if columns else Symbol(table, token.span)

    def call(self, name: _Token) -> Node:
        if name.text == "log":
            raise _ambiguous_log(name.span)
        if name.text not in self.functions:
            near = tuple(difflib.get_close_matches(name.text, sorted(self.functions), n=3))
            raise RelationFault(
                "relation-function-unknown",
                f"{name.text} is no function of a relation",
                name.span,
                "one of " + " ".join(self.functions),
                near,
            )
        args = self.arguments()
        span = self.reach(name.span)
        fewest, most = self.functions[name.text]
        if not fewest <= len(args) <= most:
            wanted = str(fewest) if fewest == most else f"{fewest} or more"
            raise RelationFault(
                "relation-arguments", f"{name.text} has {len(args)} arguments", span, f"{wanted} arguments"
            )
        if name.text in TAKES_COLUMN and not isinstance(args[0], Column):
            raise RelationFault(
                "relation-arguments",
                f"{name.text} needs a table column first",
                span_of(args[0]),
                "table.column",
            )
        return Call(name.text, args, span)

    def arguments(self) -> tuple[Node, ...]:
        self.advance()
        self.deeper()
        args: list[Node] = []
        while not self.at(")"):
            if args:
                self.take(",", "a comma or a closing bracket")
            args.append(_number(self.conditional()))
        self.advance()
        self.nesting -= 1
        return tuple(args)


def _number(node: Node) -> Node:
    """Refuse a condition where a number is wanted."""
    if is_truth(node):
        raise RelationFault("relation-kind", "a condition stands for a number", span_of(node), "a number")
    return node


def _truth(node: Node) -> Node:
    """Refuse a number where a condition is wanted; a symbol or a column may be a flag."""
    if is_truth(node) or isinstance(node, Symbol | Column):
        return node
    if isinstance(node, Conditional):
        _truth(node.yes)
        _truth(node.no)
        return node
    raise RelationFault(
        "relation-kind", "a number stands for a condition", span_of(node), "a comparison or a flag"
    )
