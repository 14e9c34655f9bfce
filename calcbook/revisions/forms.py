"""The forms that a checker fills in: questions, assumptions of the runner, way of checking, hand values."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

from calcbook.calcfile.empty import is_empty
from calcbook.chain.outcome import Result, Solved
from calcbook.chain.types import Group, RunnerAssumption
from calcbook.documents import Description, Fields, Key, Node, read_file, read_mapping
from calcbook.documents import Sequence as SequenceNode
from calcbook.faults import Collector, Fault, Faults, Place, shown
from calcbook.formulas.names import written_name
from calcbook.quantities import QuantityFault, read_quantity
from calcbook.record.digest import digest_of
from calcbook.record.numbers import in_report_unit, percent
from calcbook.record.sections.review import questions_for_a_person
from calcbook.revisions.signoffs import (
    ACKNOWLEDGED,
    Acknowledged,
    Answer,
    HandValue,
    HandValues,
    quoted,
    yaml_lines,
)

REVIEW = "review of every line"
WAYS = (REVIEW, "alternate calculation", "comparison with a like calculation")
FEWEST_WORDS = 3  # beside ticks and figures: fewer make no sentence that another engineer could follow
FEWEST_FIGURES = 3  # of digits in a figure that stands without its unit; a bare 2 is printed in every record
TICKS = frozenset(
    (
        "ok",
        "okay",
        "k",
        "yes",
        "y",
        "ja",
        "no",
        "n",
        "x",
        "v",
        "done",
        "fine",
        "good",
        "correct",
        "right",
        "checked",
        "check",
        "agreed",
        "agree",
        "true",
        "tick",
        "ticked",
        "na",
        "none",
        "all",
        "seen",
        "same",
        "passed",
        "pass",
        "accepted",
        "acceptable",
        "approved",
        "reviewed",
        "verified",
        "confirmed",
        "sure",
        "yep",
        "tbd",
        "todo",
        "ditto",
        "idem",
    )
)
# Symbols that are words of a sentence as well: they count as cited only when marked by a grave accent or `=`.
WORD_SYMBOLS = frozenset(("A", "a", "I"))

IDENTITY = Description(
    "the head of the form",
    "what the form is for",
    (
        Key("number", "number of the calculation", "name", required=True),
        Key("revision", "revision that is checked", "name", required=True),
        Key("role", "role that signs", "name", required=True),
        Key("person", "id of the person", "name", required=True),
        Key("digest", "digest of the content that is checked", "name", required=True),
    ),
)
QUESTION = Description(
    "a question",
    "a question for a person",
    (
        Key("number", "number in the review of the record", "name", required=True),
        Key("question", "the question", required=True),
        Key("answer", "sentences that cite a step, a given or a figure of the record"),
    ),
)
ASSUMPTION = Description(
    "an assumption of the runner",
    "something that the runner decided",
    (
        Key("id", "id in the record", "name", required=True),
        Key("text", "what the runner took", required=True),
        Key("decided by", "what decided it"),
        Key("acknowledged", "the word acknowledged, or a sentence"),
    ),
)
FORM = Description(
    "the form",
    "a checker's form",
    (
        Key("form", "what the form is for", "mapping", of=IDENTITY, required=True),
        Key("way of checking", " | ".join(WAYS)),
        Key("checked with", "the calculation or document that it was checked with"),
        Key("questions", "questions for a person", "list", of=QUESTION),
        Key("assumptions", "assumptions of the runner", "list", of=ASSUMPTION),
    ),
)
HAND_VALUE = Description(
    "a hand value",
    "a value found by hand",
    (
        Key("result", "name of the result", "name", required=True),
        Key("by hand", "number with unit"),
    ),
)
BLIND_FORM = Description(
    "the form",
    "a form for hand values",
    (
        Key("form", "what the form is for", "mapping", of=IDENTITY, required=True),
        Key("values", "values found by hand", "list", of=HAND_VALUE, required=True),
    ),
)


@dataclass(frozen=True, slots=True)
class FilledForm:
    """A checker's form as it was filled in, with nothing wrong in it."""

    way: str
    checked_with: str
    answers: tuple[Answer, ...]
    acknowledged: tuple[Acknowledged, ...]


def form_path(calc_path: Path, role: str, blind: bool = False) -> Path:
    """Where the form of a role stands beside the calculation file."""
    return calc_path.with_name(f"{calc_path.stem}.{role}{'.blind' if blind else ''}.form.yaml")


def human_questions(solved: Solved) -> tuple[tuple[str, str], ...]:
    """Number and words of the questions that only a person can answer."""
    return tuple((str(place), words) for place, words in questions_for_a_person(solved).items())


def runner_assumptions(solved: Solved) -> tuple[RunnerAssumption, ...]:
    """What the runner decided, each sentence once: a case in which it decided otherwise has its own under the same id."""
    found: dict[tuple[str, str], RunnerAssumption] = {}
    for case in solved.cases:
        for item in case.assumptions:
            found.setdefault((item.id, item.text), item)
    return tuple(found.values())


# --- writing ----------------------------------------------------------------------------------------


def form_text(solved: Solved, role: str, person: str) -> str:
    """The empty form of a role."""
    calculation = solved.chain.calculation
    lines = [
        f"# Form for the role {role} of {calculation.number}, revision {calculation.revision}.",
        "# Fill it in and give the command again: it takes the form into the sign-offs and removes it.",
        "# Each answer is a sentence in your own words, in quotes, that cites something of the record: the",
        "# id of a step, the symbol of a given, or a figure as printed. Ticks and empty answers are refused.",
        *_identity(solved, role, person),
        "",
        f"# {' | '.join(WAYS)}",
        'way of checking: ""',
        "# The calculation or document that it was checked with; not needed for a review of every line.",
        'checked with: ""',
        "",
        "questions:",
    ]
    for number, question in human_questions(solved):
        lines += [f"  - number: {quoted(number)}", f"    question: {quoted(question)}", '    answer: ""']
    assumptions = runner_assumptions(solved)
    if assumptions:
        lines += [
            "",
            "# What the runner decided by itself, in any case. Write `acknowledged`, or a sentence of your own,",
            "# which the record shows.",
            "assumptions:",
        ]
    for item in assumptions:
        lines += [
            f"  - id: {quoted(item.id)}",
            f"    text: {quoted(item.text)}",
            f"    decided by: {quoted(item.decided_by)}",
            '    acknowledged: ""',
        ]
    return "\n".join(lines) + "\n"


def blind_form_text(solved: Solved, role: str, person: str) -> str:
    """The empty form for hand values: names of results, and none of their figures."""
    calculation = solved.chain.calculation
    lines = [
        f"# Hand values of the role {role} for {calculation.number}, revision {calculation.revision}.",
        "# Find them before you read the record. Fill in at least one h and one U, each with its unit, and",
        "# give the command again. They are stored as they are, and shown beside the record's when you sign.",
        *_identity(solved, role, person),
        "",
        *yaml_lines({"values": [{"result": name, "by hand": ""} for name in blind_results(solved)]}),
    ]
    return "\n".join(lines) + "\n"


def _identity(solved: Solved, role: str, person: str) -> Iterable[str]:
    calculation = solved.chain.calculation
    return yaml_lines(
        {
            "form": {
                "number": calculation.number,
                "revision": calculation.revision,
                "role": role,
                "person": person,
                "digest": digest_of(solved).whole,
            }
        }
    )


def blind_results(solved: Solved) -> tuple[str, ...]:
    """The results that may be found by hand: h of each film that a method gives, and U."""
    films = [
        element.name
        for element in solved.chain.elements
        if isinstance(element, Group) and any(branch.situation is not None for branch in element.branches)
    ]
    names = [f"h {film} {condition}" for film in films for condition in ("service", "clean")]
    return tuple(name for name in (*names, "U_service", "U_clean") if name in solved.base.results)


# --- reading ----------------------------------------------------------------------------------------


def read_form(path: Path, solved: Solved, role: str, person: str, record: str) -> FilledForm:
    """A filled form, held against the content it was written for and the record that its answers cite.

    Raises ``Faults``: form-stale, form-of-another, way-unknown, question-missing, answer-empty, answer-bare,
    answer-cites-nothing, assumption-not-acknowledged, and those of the YAML reader.
    """
    collector = Collector()
    fields = _form_fields(path, FORM, collector)
    _check_identity(fields, solved, role, person, collector)
    collector.stop_if_any()
    way, checked_with = _way(fields, collector)
    answers = _answers(fields, human_questions(solved), citable(solved, record), collector)
    acknowledged = _acknowledged(fields, runner_assumptions(solved), collector)
    collector.stop_if_any()
    return FilledForm(way, checked_with, answers, acknowledged)


def _form_fields(path: Path, description: Description, collector: Collector) -> Fields:
    document = read_file(path, collector=collector)
    return read_mapping(document.root, description, collector, document.root.place)


def _check_identity(fields: Fields, solved: Solved, role: str, person: str, collector: Collector) -> None:
    node = fields.node("form")
    if node is None:
        return
    head = read_mapping(node, IDENTITY, collector, node.place)
    calculation = solved.chain.calculation
    wanted = {"number": calculation.number, "revision": calculation.revision, "role": role, "person": person}
    for name, text in wanted.items():
        if name in head and head.text(name) != text:
            collector.add(
                "form-of-another",
                head.place_of(name),
                f"the form is for another {name}",
                found=shown(head.text(name)),
                expected=text,
            )
            return
    if "digest" in head and head.text("digest") != digest_of(solved).whole:
        collector.add(
            "form-stale",
            head.place_of("digest"),
            "the calculation has changed since the form was written",
            expected="a new form: move this one away, sign again, and copy what still holds",
        )


def _way(fields: Fields, collector: Collector) -> tuple[str, str]:
    way, other = fields.text("way of checking"), fields.text("checked with")
    if way not in WAYS:
        collector.add(
            "way-unknown",
            fields.place_of("way of checking"),
            "this is no way of checking",
            found=shown(way),
            expected=" | ".join(WAYS),
        )
    elif way != REVIEW and (is_empty(other) or not words_of(other)):
        collector.add(
            "answer-empty",
            fields.place_of("checked with"),
            f"`{way}` names what it was checked with",
            expected="number and revision of a calculation, or a document",
        )
    return way, other


def _items(fields: Fields, key: str, description: Description, collector: Collector) -> list[Fields]:
    node = fields.node(key)
    items: Sequence[Node] = node.items if isinstance(node, SequenceNode) else ()
    return [read_mapping(item, description, collector, item.place) for item in items]


def _answers(
    fields: Fields, questions: Iterable[tuple[str, str]], known: Citable, collector: Collector
) -> tuple[Answer, ...]:
    found = {item.text("number"): item for item in _items(fields, "questions", QUESTION, collector)}
    answers = []
    for number, question in questions:
        item = found.get(number)
        if item is None:
            collector.add(
                "question-missing",
                fields.place_of("questions"),
                f"question {number} is missing",
                expected=question,
            )
            continue
        answer = item.text("answer")
        fault = answer_fault(answer, known)
        if fault:
            code, message, expected = fault
            collector.add(
                code,
                item.place_of("answer"),
                f"the answer to question {number} {message}",
                found=shown(answer),
                expected=expected,
            )
        answers.append(Answer(number, question, answer))
    return tuple(answers)


def _acknowledged(
    fields: Fields, assumptions: Iterable[RunnerAssumption], collector: Collector
) -> tuple[Acknowledged, ...]:
    items = _items(fields, "assumptions", ASSUMPTION, collector)
    found = {(item.text("id"), item.text("text")): item for item in items}
    result = []
    for assumption in assumptions:
        item = found.get((assumption.id, assumption.text))
        words = item.text("acknowledged") if item is not None else ""
        if words.casefold() != ACKNOWLEDGED and len(own_words(words)) < FEWEST_WORDS:
            place = item.place_of("acknowledged") if item is not None else fields.place_of("assumptions")
            collector.add(
                "assumption-not-acknowledged",
                place,
                f"the assumption {assumption.id} is not acknowledged",
                found=shown(words),
                expected=f"`{ACKNOWLEDGED}`, or a sentence, beside: {assumption.text}",
            )
        result.append(Acknowledged(assumption.id, assumption.text, words))
    return tuple(result)


# --- what an answer must be -------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Citable:
    """What a record has that an answer can cite: ids, symbols, and figures as they are printed."""

    ids: frozenset[str]
    symbols: frozenset[str]
    figures: frozenset[str]
    with_units: frozenset[str]


_THIN = re.compile(r"(?<=\d)[\u202f\u2009](?=\d{3}(?!\d))")
_GROUPED = re.compile(r"(?<=\d)[\u202f\u2009\u00a0 ](?=\d{3}(?!\d))")
_DATE = re.compile(r"\b\d{4}-\d{2}-\d{2}\b")
_DIGEST = re.compile(r"\b[0-9a-f]{12,64}\b")
_FIGURE = re.compile(r"(?<![\w.^-])-?\d+(?:\.\d+)?(?:e-?\d+)?(?![\w])(?!\.\d)")
_WITH_UNIT = re.compile(r"(?<![\w.^-])(-?\d+(?:\.\d+)?(?:e-?\d+)?) ?(%|°C|°F|[A-Za-zµμ][\w/·()^²³⁻¹]*)")


def citable(solved: Solved, record: str) -> Citable:
    """What can be cited of a record."""
    ids = {
        row.step.id
        for case in solved.cases
        for row in (*(row for term in case.chains for row in term.rows), *case.circuit)
    }
    ids |= {check.id for case in solved.cases for check in case.checks}
    ids |= {item.id for item in runner_assumptions(solved)}
    calculation = solved.chain.calculation
    symbols = {*calculation.givens, *calculation.derived, *(item.id for item in calculation.assumptions)}
    symbols |= {written_name(name) for name in symbols}
    text = _plain_figures(record.replace("\\", ""), _THIN)
    return Citable(
        frozenset(_loose(name) for name in ids),
        frozenset(symbols),
        frozenset(_FIGURE.findall(text)),
        frozenset(f"{number} {unit}" for number, unit in _WITH_UNIT.findall(text)),
    )


def _plain_figures(text: str, groups: re.Pattern[str]) -> str:
    plain = groups.sub("", text).replace("\u2212", "-").replace("\u00a0", " ").replace("\u202f", " ")
    return _DIGEST.sub(" ", _DATE.sub(" ", plain))


def _loose(name: str) -> str:
    return re.sub(r"\s*/\s*", "/", " ".join(name.split()))


def answer_fault(answer: str, known: Citable) -> tuple[str, str, str] | None:
    """Code, message and what is expected of an answer that cannot be taken; None for one that can."""
    text = unicodedata.normalize("NFC", answer)
    if not text.strip():
        return "answer-empty", "is empty", "a sentence that cites a step, a given or a figure of the record"
    if len(own_words(text)) < FEWEST_WORDS:
        return "answer-bare", "is a bare tick or a remark", "a sentence that another engineer can follow"
    if not cites(text, known):
        return (
            "answer-cites-nothing",
            "cites nothing that the record has",
            "the id of a step, the symbol of a given, or a figure as it is printed",
        )
    return None


def words_of(text: str) -> list[str]:
    """The words of a text: runs of letters."""
    return re.findall(r"[^\W\d_]+", text)


def own_words(text: str) -> list[str]:
    """The different words of a text of more than one letter that are no ticks."""
    words = dict.fromkeys(word.casefold() for word in words_of(text) if len(word) > 1)
    return [word for word in words if word not in TICKS]


def cites(answer: str, known: Citable) -> bool:
    """Whether an answer names an id or a symbol of the record, or a figure that is printed in it."""
    loose = _loose(answer)
    if any(_stands_in(name, loose) for name in known.ids):
        return True
    for symbol in known.symbols:
        pattern = rf"(?<!\w){re.escape(symbol)}(?!\w)"
        marked = rf"`{re.escape(symbol)}`|(?<!\w){re.escape(symbol)} ?="
        if re.search(marked if symbol in WORD_SYMBOLS else pattern, answer):
            return True
    text = _plain_figures(answer, _GROUPED)
    figures = {figure for figure in _FIGURE.findall(text) if sum(map(str.isdigit, figure)) >= FEWEST_FIGURES}
    with_units = {f"{number} {unit}" for number, unit in _WITH_UNIT.findall(text)}
    return bool(figures & known.figures or with_units & known.with_units)


def _stands_in(name: str, text: str) -> bool:
    place = text.find(name)
    while place >= 0:
        before, after = text[place - 1 : place], text[place + len(name) : place + len(name) + 1]
        if not before.isalnum() and not after.isalnum():
            return "/" in name
        place = text.find(name, place + 1)
    return False


# --- hand values ------------------------------------------------------------------------------------


def read_blind_form(path: Path, solved: Solved, role: str, person: str) -> tuple[HandValue, ...]:
    """The hand values of a filled form.

    Raises ``Faults``: hand-value-missing, result-unknown, those of quantities.
    """
    collector = Collector()
    fields = _form_fields(path, BLIND_FORM, collector)
    _check_identity(fields, solved, role, person, collector)
    collector.stop_if_any()
    values = []
    for item in _items(fields, "values", HAND_VALUE, collector):
        name, text = item.text("result"), item.text("by hand")
        result = solved.base.results.get(name)
        if name not in blind_results(solved) or result is None:
            collector.add(
                "result-unknown",
                item.place_of("result"),
                "this is none of the results to be found by hand",
                found=shown(name),
                expected=", ".join(blind_results(solved)),
            )
        elif text and _is_readable(text, result, item.place_of("by hand"), collector):
            values.append(HandValue(name, text))
    for letter in ("h", "U"):
        wanted = [name for name in blind_results(solved) if name.startswith(letter)]
        if wanted and not any(value.result in wanted for value in values):
            collector.add(
                "hand-value-missing",
                fields.place_of("values"),
                f"no {letter} is found by hand",
                expected=f"one of {', '.join(wanted)}",
            )
    collector.stop_if_any()
    return tuple(values)


def _is_readable(text: str, result: Result, place: Place, collector: Collector) -> bool:
    try:
        read_quantity(text, result.kind)
    except QuantityFault as error:
        collector.take([error.at(place)])
        return False
    return True


def revealed(values: HandValues, solved: Solved) -> tuple[HandValue, ...]:
    """Hand values beside the figures of the record, with (by hand − record)/record.

    Raises ``Faults``: result-unknown for a value whose result the calculation no longer has.
    """
    found = []
    for item in values.values:
        result = solved.base.results.get(item.result)
        if result is None:
            raise Faults(
                [
                    Fault(
                        "result-unknown",
                        Place(solved.chain.calculation.file),
                        "a result that was found by hand is no longer there",
                        item.result,
                        "hand values for the calculation as it is now",
                    )
                ]
            )
        by_hand = read_quantity(item.value, result.kind).value
        figure = in_report_unit(result.value, result.kind, solved.chain.calculation.report, 4)
        found.append(
            HandValue(item.result, item.value, figure, percent((by_hand - result.value) / result.value))
        )
    return tuple(found)
