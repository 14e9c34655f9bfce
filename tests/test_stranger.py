"""A stranger's check: someone who has only the page recomputes it.

Nothing of the program is imported here. Each record under ``output/`` is read as Markdown; every row of
every chain table is evaluated again from its own cell of values, and U in service is rebuilt twice: from the
printed resistances, and from the printed films, deposits and walls.
"""

from __future__ import annotations

import ast
import bisect
import itertools
import math
import operator
import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from decimal import Decimal
from pathlib import Path

import pytest
from markdown_it import MarkdownIt
from scipy import special

OUTPUT = Path(__file__).resolve().parent.parent / "output"
RECORDS = sorted(OUTPUT.glob("*/record.md"))

THIN, MINUS = "\u2009", "\u2212"
NUMBER = rf"{MINUS}?\d[\d{THIN}]*(?:\.\d+)?(?:e{MINUS}?\d+)?"
CHAIN_COLUMNS = ["Quantity", "Relation", "Values put in", "Clean", "Service", "Unit", "Basis"]
UNUSED = "not used"
# Rows that name a state of a fluid in words; the page cannot evaluate a fluid.
WORDS = ("property", "phase of the fluid")


# --- the page as tables -----------------------------------------------------------------------------


@dataclass
class Part:
    """One piece of the page under its headings."""

    section: str
    term: str
    before: str
    columns: list[str]
    rows: list[list[str]]


@dataclass
class PageRead:
    """The page: its tables, its sentences under their headings, its bullets under heading and sentence."""

    tables: list[Part] = field(default_factory=list)
    sentences: list[tuple[str, str, str]] = field(default_factory=list)
    bullets: list[tuple[str, str, str]] = field(default_factory=list)

    def tables_with(self, *columns: str) -> list[Part]:
        return [part for part in self.tables if list(columns) == part.columns[: len(columns)]]


def read_page(text: str) -> PageRead:
    """The tables and sentences of a record."""
    tokens = MarkdownIt("commonmark").enable("table").parse(text)
    page = PageRead()
    section = term = before = ""
    level, current, in_list = "", None, False
    for token, following in zip(tokens, [*tokens[1:], None], strict=True):
        if token.type == "heading_open":
            level = token.tag
        elif token.type == "table_open":
            current = Part(section, term, before, [], [])
            page.tables.append(current)
        elif token.type == "table_close":
            current = None
        elif token.type in ("bullet_list_open", "bullet_list_close"):
            in_list = token.type == "bullet_list_open"
        elif token.type == "tr_open" and current is not None:
            current.rows.append([])
        elif token.type == "inline":
            content = "".join(child.content for child in token.children or [])
            if level:
                section, term = (content, "") if level in ("h1", "h2") else (section, content)
                level = ""
            elif current is not None:
                current.rows[-1].append(content)
            elif in_list:
                page.bullets.append((term, before, content))
            else:
                before = content
                page.sentences.append((section, term, content))
        assert following is None or token.type != "html_block", "a record holds no HTML"
    for part in page.tables:
        part.columns = part.rows.pop(0)
    return page


# --- numbers and a small evaluator ------------------------------------------------------------------


def number(text: str) -> float:
    """A printed number."""
    plain = text.strip().replace(THIN, "").replace(MINUS, "-")
    assert re.fullmatch(r"-?\d+(\.\d+)?(e-?\d+)?", plain), f"{text!r} is no number"
    return float(plain)


def half_unit(text: str) -> float:
    """Half of what the last printed digit counts; zeros that end a whole number may only hold the place."""
    plain = Decimal(text.strip().replace(THIN, "").replace(MINUS, "-"))
    exponent = plain.as_tuple().exponent
    assert isinstance(exponent, int)
    digits = str(abs(plain))
    held = len(digits) - len(digits.rstrip("0")) if exponent == 0 and plain != 0 and "e" not in text else 0
    return 0.5 * 10.0 ** (exponent + held)


FUNCTIONS: dict[str, Callable[..., float]] = {
    "sqrt": math.sqrt, "exp": math.exp, "expm1": math.expm1, "ln": math.log, "log10": math.log10,
    "log1p": math.log1p, "abs": abs, "min": min, "max": max, "sin": math.sin, "cos": math.cos,
    "tan": math.tan, "asin": math.asin, "acos": math.acos, "atan": math.atan, "sinh": math.sinh,
    "cosh": math.cosh, "tanh": math.tanh, "i0e": special.i0e, "i1e": special.i1e, "k0e": special.k0e,
    "k1e": special.k1e,
}  # fmt: skip
ARITHMETIC = {
    ast.Add: operator.add,
    ast.Sub: operator.sub,
    ast.Mult: operator.mul,
    ast.Div: operator.truediv,
    ast.Pow: operator.pow,
}
COMPARISONS = {
    ast.Lt: operator.lt,
    ast.LtE: operator.le,
    ast.Gt: operator.gt,
    ast.GtE: operator.ge,
    ast.Eq: operator.eq,
    ast.NotEq: operator.ne,
}
# Standard gravity, the Stefan-Boltzmann constant (CODATA 2018), and the one of a single tube or metre.
EXACT = (9.80665, 5.670374419e-8, 1.0)
NAMES = {"pi": math.pi, "yes": True, "no": False}
Materials = dict[str, list[tuple[float, float]]]


def evaluate(text: str, material: list[tuple[float, float]] | None = None) -> float | bool:
    """A line of printed arithmetic; ``material`` are the rows that `mean(table.k, …)` stands for."""
    plain = re.sub(rf"(?<=\d){THIN}(?=\d)", "", text)
    for sign, typed in (
        (MINUS, "-"),
        ("·", "*"),
        ("^", "**"),
        ("π", "pi"),
        ("≤", "<="),
        ("≥", ">="),
        ("≠", "!="),
    ):
        plain = plain.replace(sign, typed)
    return _value(ast.parse(plain.strip(), mode="eval").body, material)


def _value(node: ast.expr, material: list[tuple[float, float]] | None) -> float | bool:
    match node:
        case ast.Constant(value=bool() | int() | float() as value):
            return value
        case ast.Name(id=name) if name in NAMES:
            return NAMES[name]
        case ast.UnaryOp(op=ast.USub(), operand=operand):
            return -_value(operand, material)
        case ast.UnaryOp(op=ast.Not(), operand=operand):
            return not _value(operand, material)
        case ast.BinOp(left=left, op=op, right=right):
            return ARITHMETIC[type(op)](float(_value(left, material)), float(_value(right, material)))
        case ast.Compare(left=left, ops=operators, comparators=others):
            values = [_value(part, material) for part in (left, *others)]
            return all(
                COMPARISONS[type(op)](values[place], values[place + 1]) for place, op in enumerate(operators)
            )
        case ast.BoolOp(op=op, values=parts):
            return (all if isinstance(op, ast.And) else any)(bool(_value(part, material)) for part in parts)
        case ast.Call(func=ast.Name(id="mean"), args=[ast.Attribute(), first, second]):
            assert material, "the page shows no table for mean"
            return mean(material, float(_value(first, material)), float(_value(second, material)))
        case ast.Call(func=ast.Name(id=name), args=parts):
            return FUNCTIONS[name](*(float(_value(part, material)) for part in parts))
    raise AssertionError(f"{ast.dump(node)} has no place in a row of values")


def at(rows: list[tuple[float, float]], place: float) -> float:
    """A figure between rows on a straight line, beyond them that of the nearest row."""
    if place <= rows[0][0]:
        return rows[0][1]
    for (low, below), (high, above) in itertools.pairwise(rows):
        if place <= high:
            return below + (above - below) * (place - low) / (high - low)
    return rows[-1][1]


def mean(rows: list[tuple[float, float]], first: float, second: float) -> float:
    """The integral between two places divided by their distance."""
    if first == second:
        return at(rows, first)
    low, high = sorted((first, second))
    places = [low, *(place for place, _ in rows if low < place < high), high]
    area = sum(0.5 * (at(rows, one) + at(rows, two)) * (two - one) for one, two in itertools.pairwise(places))
    return area / (high - low)


def test_the_small_evaluator_follows_the_printed_signs() -> None:
    assert evaluate("18.2/(975.570·62·π/4·0.01575^2)") == pytest.approx(
        18.2 / (975.57 * 62 * math.pi / 4 * 0.01575**2)
    )
    assert evaluate(f"(1.82·log10(62{THIN}043) {MINUS} 1.64)^{MINUS}2") == pytest.approx(
        (1.82 * math.log10(62043) - 1.64) ** -2
    )
    assert evaluate("341.52 > 347.15") is False
    assert mean([(0.0, 1.0), (1.0, 2.0), (2.0, 2.0)], 0.0, 2.0) == pytest.approx(1.75)
    assert half_unit(f"62{THIN}000") == 500.0 and half_unit("0.0199") == pytest.approx(5e-5)


# --- rows -------------------------------------------------------------------------------------------


def chain_tables(page: PageRead) -> list[Part]:
    return [part for part in page.tables if part.columns == CHAIN_COLUMNS]


def materials(page: PageRead) -> Materials:
    """Conductivity tables by the term that they belong to."""
    found = {}
    for part in page.tables:
        if part.columns[0] == "T, K" and part.columns[-1] == "k, W/(m·K)":
            words = re.match(r"table\.k of (.+) is the conductivity of ", part.before)
            assert words, part.before
            found[words[1]] = [(number(row[0]), number(row[-1])) for row in part.rows]
    return found


def term_of(part: Part) -> str:
    return part.term.split(": ")[0]


def evaluated_rows(page: PageRead) -> Iterator[tuple[str, str, str]]:
    """Every row of every chain table: its kind, its quantity, and what is wrong with it (empty: nothing)."""
    held = materials(page)
    for part in chain_tables(page):
        for quantity, relation, values, _, service, unit, _ in part.rows:
            where = f"{part.term}, {quantity}"
            if values == UNUSED:
                yield "unused", where, "" if service == UNUSED else "a value without the values put in"
            elif relation.startswith(WORDS):
                shown = property_agrees(page, service)
                yield "words", where, "" if shown else f"{service} {unit} stands in no properties table"
            elif relation.startswith("sum of "):
                yield "sum", where, sum_fault(relation, values, service)
            elif relation.startswith("table "):
                yield "table", where, table_row_fault(page, relation, values, service)
            elif relation.startswith("root "):
                yield "root", where, root_fault(values, service)
            else:
                yield "relation", where, relation_fault(values, service, held.get(term_of(part)))


CLEAN_LEAD = "Clean, where it differs, with the clean values put in:"


def clean_rows(page: PageRead) -> Iterator[tuple[str, str]]:
    """Every clean value that stands beneath a chain table: where it is, and what is wrong with it."""
    held = materials(page)
    for term, lead, bullet in page.bullets:
        if lead != CLEAN_LEAD or bullet.count(" = ") != 2:
            continue
        quantity, values, result = bullet.split(" = ")
        shown = re.match(NUMBER, result)
        if shown and not re.search(r"\d K \(", values):
            yield (
                f"{term}, {quantity}, clean",
                relation_fault(values, shown[0], held.get(term.split(": ")[0])),
            )


def unseen_figures(page: PageRead) -> Iterator[tuple[str, str]]:
    """Figures put into a row that stand nowhere else on the page, neither as a value nor in the relation."""
    shown = sorted(figures_shown(page))
    for part in chain_tables(page):
        for quantity, relation, values, *_ in part.rows:
            if values == UNUSED or relation.startswith(WORDS):
                continue
            own = {number(text) for text in re.findall(NUMBER, relation)}
            for text in re.findall(NUMBER, values):
                figure = number(text)
                if abs(figure) not in own and not is_shown(abs(figure), text, shown):
                    yield f"{part.term}, {quantity}", text


def figures_shown(page: PageRead) -> set[float]:
    """Every number of the page outside the cells of values."""
    found = set(EXACT)
    for part in page.tables:
        skipped = part.columns.index("Values put in") if part.columns == CHAIN_COLUMNS else -1
        for row in part.rows:
            for place, cell in enumerate(row):
                if place != skipped:
                    found |= {abs(number(text)) for text in re.findall(NUMBER, cell)}
    bullets = (bullet for bullet in page.bullets if bullet[1] != CLEAN_LEAD)
    for _, _, sentence in (*page.sentences, *bullets):
        found |= {abs(number(text)) for text in re.findall(NUMBER, sentence)}
    return found


def is_shown(figure: float, text: str, shown: list[float]) -> bool:
    """Whether a figure stands among those shown; both are rounded, by 5e-5 of themselves at most."""
    place = bisect.bisect_left(shown, figure * (1.0 - 5e-5) - 1e-300)
    return place < len(shown) and shown[place] <= figure * (1.0 + 5e-5) + half_unit(text)


def relation_fault(values: str, service: str, material: list[tuple[float, float]] | None) -> str:
    found = evaluate(values, material)
    if service in ("yes", "no"):
        return "" if bool(found) == (service == "yes") else f"{values} is not {service}"
    # A half unit of the last printed digit; the rest is the rounding of doubles.
    off = abs(float(found) - number(service))
    return "" if off <= half_unit(service) * (1.0 + 1e-9) else f"{values} = {found}, printed {service}"


def sum_fault(relation: str, values: str, service: str) -> str:
    """A sum over whole numbers, term by term."""
    words = re.fullmatch(r"sum of (.+) for (\w+) = 0 to (\d+)", relation)
    assert words, relation
    known = dict(item.split(" = ") for item in values.split(" with ")[1].split(", "))
    total = 0.0
    for index in range(int(words[3]) + 1):
        put_in = {**known, words[2]: str(index)}
        line = re.sub(r"[^\W\d]\w*", lambda name: put_in.get(name[0], name[0]), words[1])  # noqa: B023
        total += float(evaluate(line))
    # Figures put in carry seven digits, which moves a fifth digit only at its very edge.
    return "" if abs(total - number(service)) <= 1.01 * half_unit(service) else f"{relation}: {total}"


def root_fault(values: str, service: str) -> str:
    left, right = (float(evaluate(side)) for side in values.split(" = "))
    # Each side was held to half a unit of its fifth digit, so together they differ by 1e-4 at most.
    if abs(left - right) > 1e-4 * abs(right):
        return f"{values}: {left} against {right}"
    inside = [number(text) for text in re.findall(NUMBER, values)]
    close = any(abs(item - number(service)) <= 1e-3 * abs(item) for item in inside)
    return "" if close else f"the root {service} does not stand in {values}"


def table_row_fault(page: PageRead, relation: str, values: str, service: str) -> str:
    """The figure in the row of a card's table that the values choose, by bounds or by equal figures."""
    name, column = re.fullmatch(r"table (\S+), column (\S+)", relation).groups()  # type: ignore[union-attr]
    wanted = dict(item.split(" = ") for item in values.split("row for ")[1].split(", "))
    tables = [part for part in page.tables if part.before.startswith(f"Table {name} of ")]
    for part in tables:
        for row in part.rows:
            cells = dict(zip(part.columns, row, strict=True))
            if (
                column in cells
                and _row_holds(cells, wanted)
                and float(cells[column]) == pytest.approx(number(service))
            ):
                return ""
    return f"no row of table {name} gives {service}"


def _row_holds(cells: dict[str, str], wanted: dict[str, str]) -> bool:
    for symbol, text in wanted.items():
        if symbol in cells:
            is_word = text.replace("_", "").isalpha()
            if cells[symbol] != text and (is_word or float(cells[symbol]) != number(text)):
                return False
        elif not float(cells["from"]) <= number(text) <= float(cells["to"]):
            return False
    return True


def property_agrees(page: PageRead, service: str) -> bool:
    """A property of the chain must be one that the properties table shows."""
    if service in ("yes", "no"):
        return True
    shown = [
        cell
        for part in page.tables
        if part.columns[:2] == ["Stream", "Place"]
        for row in part.rows
        for cell in row
    ]
    figures = [number(cell) for cell in shown if re.fullmatch(NUMBER, cell)]
    return any(abs(figure - number(service)) <= 1e-4 * abs(figure) for figure in figures)


# --- U again ----------------------------------------------------------------------------------------


def printed_overall(page: PageRead) -> tuple[float, float]:
    """U in service of the brief in W/(m²·K), and half a unit of its last digit."""
    brief = next(part for part in page.tables if part.columns[:2] == ["Result", "Value"])
    text = next(row[1] for row in brief.rows if row[0] == "U in service")
    found = re.search(rf"({NUMBER}) W/\(m²·K\)", text)
    assert found, text
    return number(found[1]), half_unit(found[1])


def service_circuit(page: PageRead) -> Part:
    return next(part for part in page.tables if part.columns[0] == "Term" and part.term == "Circuit, service")


def overall_from_resistances(page: PageRead) -> float:
    """One over the sum of the resistances on the basis area."""
    rows = [row for row in service_circuit(page).rows if not row[0].startswith("R_tot")]
    assert len(rows) >= 2, "fewer than two resistances"
    return 1.0 / sum(number(row[4]) for row in rows)


def areas(page: PageRead) -> dict[str, float]:
    """Areas of surfaces by name, as far as the page has more than one."""
    found = {}
    for part in chain_tables(page):
        for row in part.rows:
            words = re.fullmatch(r"area, (.+) A_\S+", row[0])
            if words:
                found[words[1]] = number(row[4])
    return found


def overall_from_terms(page: PageRead) -> float:
    """U from films, deposits and walls, each on its own area, referred here to the basis area."""
    circuit = service_circuit(page)
    basis = re.fullmatch(r"R on (.+), m²·K/W", circuit.columns[4])
    assert basis
    known = areas(page)
    total = 0.0
    for label, kind, surface, *_ in (row for row in circuit.rows if not row[0].startswith("R_tot")):
        name = label.split(" ", 1)[1]
        own = own_resistance(page, name, kind)
        total += own * (known[basis[1]] / known[surface] if known else 1.0)
    return 1.0 / total


def own_resistance(page: PageRead, name: str, kind: str) -> float:
    """The resistance of a term on its own area, from the figures of the term itself."""
    rows = [row for part in chain_tables(page) if term_of(part) == name for row in part.rows]
    if kind == "parallel":
        circuit = [row for part in chain_tables(page) if part.term.startswith("Circuit") for row in part.rows]
        return 1.0 / next(number(row[4]) for row in circuit if row[0] == f"{name}, side by side h")
    stated = re.compile(rf"Stated: (\S+) = ({NUMBER}) (W/\(m²·K\)|m²·K/W)")
    for _, term, sentence in page.sentences:
        found = stated.match(sentence)
        if found and term.split(": ")[0] == name:
            return number(found[2]) if found[3] == "m²·K/W" else 1.0 / number(found[2])
    last = (
        rows[-1]
        if rows[-1][5] in ("W/(m²·K)", "m²·K/W")
        else next(row for row in reversed(rows) if row[5] in ("W/(m²·K)", "m²·K/W"))
    )
    figure = float(evaluate(last[2], materials(page).get(name)))
    return figure if last[5] == "m²·K/W" else 1.0 / figure


# --- the check --------------------------------------------------------------------------------------


def check_record(text: str) -> dict[str, int]:
    """Recompute everything that a record shows; the count of rows by kind. Raises ``AssertionError``."""
    page = read_page(text)
    counts: dict[str, int] = {}
    faults = []
    for kind, where, fault in evaluated_rows(page):
        counts[kind] = counts.get(kind, 0) + 1
        if fault:
            faults.append(f"{where}: {fault}")
    for where, fault in clean_rows(page):
        counts["clean"] = counts.get("clean", 0) + 1
        if fault:
            faults.append(f"{where}: {fault}")
    faults += [f"{where}: {text} stands nowhere else on the page" for where, text in unseen_figures(page)]
    assert not faults, "\n".join(faults)
    assert counts.get("relation", 0) >= 5, f"hardly a row to evaluate: {counts}"
    printed, half = printed_overall(page)
    assert abs(overall_from_resistances(page) - printed) <= half * (1.0 + 1e-3)
    assert abs(overall_from_terms(page) - printed) <= half * (1.0 + 1e-3)
    return counts


def test_the_book_has_records() -> None:
    assert RECORDS, "no record stands under output/"


@pytest.mark.parametrize("path", RECORDS, ids=lambda path: path.parent.name)
def test_a_stranger_recomputes_the_record(path: Path) -> None:
    counts = check_record(path.read_text(encoding="utf-8"))
    assert sum(counts.values()) >= 5


def test_a_stranger_sees_a_changed_digit() -> None:
    """The check must be able to fail: a digit changed in a printed value is found."""
    text = RECORDS[0].read_text(encoding="utf-8")
    row = re.search(rf"^\| [^|]+ \| 1/R_tot \| [^|]+ \| [^|]+ \| ({NUMBER}) \|", text, re.MULTILINE)
    assert row
    digit = row[1][0]
    changed = text[: row.start(1)] + ("2" if digit == "1" else "1") + text[row.start(1) + 1 :]
    with pytest.raises(AssertionError):
        check_record(changed)


def test_nothing_of_the_program_is_imported_here() -> None:
    tree = ast.parse(Path(__file__).read_text(encoding="utf-8"))
    names = {alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names}
    names |= {node.module or "" for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)}
    assert not any(name.split(".")[0] == "calcbook" for name in names)
