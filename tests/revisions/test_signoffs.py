"""Sign-off: who may sign, in which order, with which words, and how a sign-off is kept."""

from __future__ import annotations

import datetime
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from signed_book import (
    ANSWER,
    BOOK,
    CALCULATION,
    change,
    day,
    fill,
    make_book,
    sign_checked,
    sign_prepared,
    work_of,
)

from calcbook.documents import Mapping, Scalar, read_text
from calcbook.faults import Faults
from calcbook.record import record_text
from calcbook.revisions import forms, signing
from calcbook.revisions.lifecycle import lifecycle_of
from calcbook.revisions.signing import Work, declare_void, open_work, parsed_date, sign
from calcbook.revisions.signoffs import (
    Acknowledged,
    Answer,
    HandValue,
    HandValues,
    SignOff,
    SignOffFile,
    Voiding,
    are_unaltered,
    bound,
    content_of,
    is_same_person,
    is_unaltered,
    person_id,
    quoted,
    read_signoffs,
    signoffs_path,
    signoffs_text,
    spelled,
)


@pytest.fixture(scope="module")
def solved_work(tmp_path_factory: pytest.TempPathFactory) -> Work:
    return work_of(make_book(tmp_path_factory.mktemp("solved")))


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return make_book(tmp_path)


def codes(call: Callable[[], object]) -> list[str]:
    """The codes of the faults that a call raises."""
    with pytest.raises(Faults) as caught:
        call()
    return [fault.code for fault in caught.value.faults]


def validities(path: Path) -> dict[str, str]:
    work = work_of(path)
    return {item.role: item.validity for item in lifecycle_of(path, work.solved, work.output).signoffs}


# --- the way of a sign-off --------------------------------------------------------------------------


def test_a_checker_gets_a_form_and_his_filled_form_becomes_the_sign_off(path: Path) -> None:
    sign_prepared(path)
    form = path.with_name("wc-101.checked.form.yaml")
    step = sign(work_of(path), "checked", "mr", day("2026-09-03"))
    assert (step.done, step.path) == (signing.FORM_WRITTEN, form)
    assert validities(path) == {"prepared": "valid", "checked": "missing", "approved": "missing"}
    fill(form)
    step = sign(work_of(path), "checked", "mr", day("2026-09-03"))
    assert (step.done, step.path) == (signing.SIGNED, signoffs_path(path))
    assert not form.exists()
    assert validities(path) == {"prepared": "valid", "checked": "valid", "approved": "missing"}
    entry = read_signoffs(signoffs_path(path)).signoffs[1]
    assert (entry.role, entry.person, entry.name, entry.date) == ("checked", "mr", "M. R.", "2026-09-03")
    assert entry.way == "review of every line"
    assert [answer.answer for answer in entry.answers] == [ANSWER] * len(
        forms.human_questions(work_of(path).solved)
    )
    assert [(item.id, item.text) for item in entry.acknowledged] == [
        (item.id, item.text) for item in forms.runner_assumptions(work_of(path).solved)
    ]


def test_a_sign_off_that_replaces_another_says_so_and_is_not_older(path: Path) -> None:
    sign_prepared(path)
    again = sign(work_of(path), "prepared", "kl", day("2026-09-05"))
    assert again.done == "signed, in place of K. L. on 2026-09-02"
    assert codes(lambda: sign(work_of(path), "prepared", "kl", day("2026-09-04"))) == ["date-order"]
    assert [one.date for one in read_signoffs(signoffs_path(path)).signoffs] == ["2026-09-05"]


def test_signing_leaves_the_signed_file_as_it_was_and_writes_the_record(path: Path) -> None:
    before = path.read_bytes()
    sign_prepared(path)
    assert path.read_bytes() == before
    record = (path.parent.parent / "output" / "WC-101" / "record.md").read_text(encoding="utf-8")
    assert "| prepared | valid | K. L. (kl) | 2026-09-02 |" in record


def test_the_form_asks_every_question_for_a_person_and_every_assumption_of_the_runner(
    solved_work: Work,
) -> None:
    text = forms.form_text(solved_work.solved, "checked", "mr")
    root = read_text(text, "form").root
    assert isinstance(root, Mapping)
    for number, question in forms.human_questions(solved_work.solved):
        assert f"number: {quoted(number)}\n    question: {quoted(question)}" in text
    for item in forms.runner_assumptions(solved_work.solved):
        assert f"id: {quoted(item.id)}\n    text: {quoted(item.text)}" in text
    assert len(forms.human_questions(solved_work.solved)) >= 10


def test_what_the_runner_decided_otherwise_in_a_case_is_acknowledged_as_well(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert "m_hot" in text and "cases:" not in text
    # A twentieth of the flow: another method than in the base case, under the same id.
    slow = "cases:\n  winter:\n    m_hot: {value: 0.8 kg/s, source: heat balance sheet 14}\n"
    path.write_text(text + slow, encoding="utf-8")
    solved = work_of(path).solved
    methods = [
        item.text for item in forms.runner_assumptions(solved) if item.id == "tube-side film/method/service"
    ]
    assert len(methods) == 2 and len(set(methods)) == 2
    form = forms.form_text(solved, "checked", "mr")
    assert all(quoted(text) in form for text in methods)


def test_a_criterion_that_is_not_met_is_a_question_for_the_checker(path: Path) -> None:
    before = dict(forms.human_questions(work_of(path).solved))
    text = path.read_text(encoding="utf-8")
    assert text.count("U_service >= 1000 ") == 1
    path.write_text(text.replace("U_service >= 1000 ", "U_service >= 2000 "), encoding="utf-8")
    asked = dict(forms.human_questions(work_of(path).solved))
    (number,) = set(asked) - set(before)
    assert asked[number].startswith("Not met: criterion 1 in case base.")
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form)
    filled = form.read_text(encoding="utf-8")
    sentence = "I do not agree: the film may be far thicker than this."
    assert filled.count('acknowledged: "acknowledged"') > 1
    form.write_text(
        filled.replace('acknowledged: "acknowledged"', f"acknowledged: {quoted(sentence)}", 1),
        encoding="utf-8",
    )
    assert sign(work_of(path), "checked", "mr", day("2026-09-03")).done == signing.SIGNED
    record = (path.parent.parent / "output" / "WC-101" / "record.md").read_text(encoding="utf-8")
    row = next(line for line in record.split("\n") if line.startswith(f"| {number} | Are the acceptance"))
    assert "not met: criterion 1 in case base" in row and f"M. R.: {ANSWER}" in row
    assert record.count(f"M. R.: {sentence}") == 1


# --- people -----------------------------------------------------------------------------------------


@pytest.mark.parametrize("person", ["kl", "K. L.", "Karl L.", "karl l", "L., K."])
@pytest.mark.parametrize("role", ["checked", "approved"])
def test_the_preparer_can_sign_for_no_other_role_under_any_spelling(
    path: Path, role: str, person: str
) -> None:
    sign_prepared(path)
    assert codes(lambda: sign(work_of(path), role, person, day("2026-09-03"))) == ["preparer-signs"]
    assert not path.with_name(f"wc-101.{role}.form.yaml").exists()


@pytest.mark.parametrize("spelling", ["Karl L.", "kl", '"L., K."', "KARL  L"])
def test_a_file_that_spells_its_preparer_otherwise_is_prepared_by_the_same_person(
    tmp_path: Path, spelling: str
) -> None:
    path = make_book(tmp_path, CALCULATION.replace("prepared by: K. L.", f"prepared by: {spelling}"))
    sign_prepared(path)
    assert codes(lambda: sign(work_of(path), "checked", "kl", day("2026-09-03"))) == ["preparer-signs"]


def test_two_ids_that_share_a_spelling_are_one_person(tmp_path: Path) -> None:
    book = BOOK.replace("  mr: {name: M. R.}", "  mr: {name: M. R.}\n  karl: {name: karl l}")
    path = make_book(tmp_path, book=book)
    sign_prepared(path)
    assert codes(lambda: sign(work_of(path), "checked", "karl", day("2026-09-03"))) == ["preparer-signs"]


def test_a_sign_off_that_was_written_for_the_preparer_by_hand_is_void(path: Path) -> None:
    sign_prepared(path)
    sign_checked(path)
    kept = read_signoffs(signoffs_path(path))
    forged = bound(kept.signoffs[1]._replace(person="kl", name="K. L."))
    signoffs_path(path).write_text(
        signoffs_text(kept._replace(signoffs=(kept.signoffs[0], forged))), encoding="utf-8"
    )
    work = work_of(path)
    checked = lifecycle_of(path, work.solved, work.output).signoffs[1]
    assert (checked.validity, checked.why) == ("void", ("the preparer cannot sign for this role",))


def test_only_whom_the_file_names_signs_as_prepared(path: Path) -> None:
    assert codes(lambda: sign(work_of(path), "prepared", "mr", day("2026-09-02"))) == ["preparer-differs"]


def test_a_preparer_whom_the_book_does_not_list_is_a_fault_at_his_name(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("prepared by: K. L.", "prepared by: K. M."))
    with pytest.raises(Faults) as caught:
        sign(work_of(path), "checked", "mr", day("2026-09-03"))
    (fault,) = caught.value.faults
    assert (fault.code, fault.place.line, fault.place.column, fault.found) == (
        "preparer-unknown",
        7,
        16,
        "K. M.",
    )
    assert "K. L." in fault.nearest


def test_an_unknown_person_and_an_unknown_role_get_their_nearest(path: Path) -> None:
    with pytest.raises(Faults) as caught:
        sign(work_of(path), "prepared", "kll", day("2026-09-02"))
    assert (caught.value.faults[0].code, caught.value.faults[0].nearest) == ("person-unknown", ("kl",))
    with pytest.raises(Faults) as caught:
        sign(work_of(path), "check", "mr", day("2026-09-02"))
    assert (caught.value.faults[0].code, caught.value.faults[0].nearest) == ("role-unknown", ("checked",))


def test_without_a_book_nobody_can_sign(path: Path) -> None:
    (path.parent / "book.yaml").unlink()
    assert codes(lambda: sign(work_of(path), "prepared", "kl", day("2026-09-02"))) == ["person-unknown"]


@pytest.mark.parametrize(
    ("one", "other"), [("Smith, J.", "j smith"), ("J. Smith", "J  SMITH"), ("Ｊ Smith", "J Smith")]
)
def test_spellings_of_one_name(one: str, other: str) -> None:
    assert spelled(one) == spelled(other)


def test_initials_in_another_order_are_another_person(solved_work: Work) -> None:
    settings = replace(
        solved_work.solved.chain.calculation.settings, people={"mr": ("M. R.",), "rm": ("R. M.",)}
    )
    assert not is_same_person(settings, "mr", "rm")
    assert person_id(settings, "R M") == "rm"


# --- order and dates --------------------------------------------------------------------------------


def test_checked_comes_before_approved_and_prepared_before_checked(path: Path) -> None:
    assert codes(lambda: sign(work_of(path), "checked", "mr", day("2026-09-03"))) == ["sign-off-order"]
    sign_prepared(path)
    assert codes(lambda: sign(work_of(path), "approved", "ta", day("2026-09-03"))) == ["sign-off-order"]


@pytest.mark.parametrize(
    ("role", "person", "date"),
    [
        ("prepared", "kl", "2026-09-01"),  # before the date of the file
        ("checked", "mr", "2026-09-04"),  # before the sign-off prepared
    ],
)
def test_dates_out_of_order_are_refused(path: Path, role: str, person: str, date: str) -> None:
    if role == "checked":
        sign_prepared(path, "2026-09-05")
    assert codes(lambda: sign(work_of(path), role, person, day(date))) == ["date-order"]


def test_an_approval_that_was_dated_before_the_check_by_hand_is_void(path: Path) -> None:
    sign_prepared(path)
    sign_checked(path, "2026-09-05")
    sign(work_of(path), "approved", "ta", day("2026-09-05"))
    kept = read_signoffs(signoffs_path(path))
    early = bound(kept.signoffs[2]._replace(date="2026-09-04"))
    signoffs_path(path).write_text(
        signoffs_text(kept._replace(signoffs=(*kept.signoffs[:2], early))), encoding="utf-8"
    )
    work = work_of(path)
    approved = lifecycle_of(path, work.solved, work.output).signoffs[2]
    assert (approved.validity, approved.why) == (
        "void",
        ("its date lies before that of checked, 2026-09-05",),
    )


def test_a_date_in_the_future_is_refused(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(signing, "today", lambda: day("2026-09-02"))
    place = work_of(path).place
    assert codes(lambda: parsed_date("2026-09-03", place)) == ["date-in-future"]
    assert codes(lambda: sign(work_of(path), "prepared", "kl", day("2026-09-03"))) == ["date-in-future"]
    assert parsed_date("2026-09-02", place) == parsed_date(None, place) == datetime.date(2026, 9, 2)


@pytest.mark.parametrize("text", ["2026-02-30", "02.09.2026", "2026-9-2x", ""])
def test_a_date_that_is_none_is_refused(path: Path, text: str) -> None:
    assert codes(lambda: parsed_date(text, work_of(path).place)) == ["date-unreadable"]


# --- answers ----------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def known(solved_work: Work) -> forms.Citable:
    return forms.citable(solved_work.solved, record_text(solved_work.solved))


@pytest.mark.parametrize(
    ("answer", "code"),
    [
        ("", "answer-empty"),
        ("   ", "answer-empty"),
        ("ok", "answer-bare"),
        ("Yes.", "answer-bare"),
        ("x", "answer-bare"),
        ("checked", "answer-bare"),
        ("\u2713", "answer-bare"),
        ("R_fo ok", "answer-bare"),
        ("yes, checked, 15.75 mm", "answer-bare"),
        ("very very very very good", "answer-bare"),
        ("All figures were compared with their drawings.", "answer-cites-nothing"),
        ("There are 2 streams and 5 terms in this file.", "answer-cites-nothing"),
        ("The allowance of 0.00077 m² K/W stands in the standard.", "answer-cites-nothing"),
        ("It was compared on 2026-09-02 with the drawing.", "answer-cites-nothing"),
        ("A pump curve was looked at as well.", "answer-cites-nothing"),
        ("The chain shows film/nobody/Nu as wanted.", "answer-cites-nothing"),
    ],
)
def test_an_answer_that_is_refused(known: forms.Citable, answer: str, code: str) -> None:
    fault = forms.answer_fault(answer, known)
    assert fault is not None
    assert fault[0] == code


@pytest.mark.parametrize(
    "answer",
    [
        "R_fo agrees with table 2 of the plant standard.",
        "The bore of 15.75 mm stands on the drawing.",
        "The flow of 18.2 kg/s is the meter's reading.",
        "The bulk of 74 °C was read from the sheet.",
        "The Reynolds number in `tube-side film/Re` is what I find by hand.",
        "The check tube-side film / gnielinski-1976 / turbulent holds with a wide margin.",
        "N was counted on the drawing of the tube sheet.",
    ],
)
def test_an_answer_that_is_taken(known: forms.Citable, answer: str) -> None:
    assert forms.answer_fault(answer, known) is None


def test_a_figure_counts_as_it_is_printed_with_or_without_groups(known: forms.Citable) -> None:
    printed = next(figure for figure in known.figures if figure.isdigit() and len(figure) == 5)
    grouped = f"{printed[:2]} {printed[2:]}"
    assert forms.cites(f"I find {printed} by hand", known)
    assert forms.cites(f"I find {grouped} by hand", known)
    assert not forms.cites(f"I find 9{printed} by hand", known)


def test_every_fault_of_a_form_is_told_at_once_with_its_line(path: Path) -> None:
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    questions = len(forms.human_questions(work_of(path).solved))
    assumptions = len(forms.runner_assumptions(work_of(path).solved))
    with pytest.raises(Faults) as caught:
        sign(work_of(path), "checked", "mr", day("2026-09-03"))
    found = [fault.code for fault in caught.value.faults]
    assert found == [
        "way-unknown",
        *["answer-empty"] * questions,
        *["assumption-not-acknowledged"] * assumptions,
    ]
    lines = form.read_text(encoding="utf-8").split("\n")
    assert all(lines[fault.place.line - 1].rstrip().endswith('""') for fault in caught.value.faults)
    assert form.is_file()
    assert validities(path)["checked"] == "missing"


def test_one_bare_tick_among_good_answers_is_refused(path: Path) -> None:
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form)
    text = form.read_text(encoding="utf-8")
    form.write_text(text.replace(f'answer: "{ANSWER}"', "answer: ok", 1), encoding="utf-8")
    assert codes(lambda: sign(work_of(path), "checked", "mr", day("2026-09-03"))) == ["answer-bare"]


@pytest.mark.parametrize(
    ("old", "new", "code"),
    [
        ('person: "mr"', 'person: "ta"', "form-of-another"),
        ('revision: "A"', 'revision: "B"', "form-of-another"),
        ('number: "WC-101"', 'number: "WC-102"', "form-of-another"),
        ('way of checking: "review of every line"', 'way of checking: "a glance"', "way-unknown"),
        (
            'way of checking: "review of every line"',
            'way of checking: "alternate calculation"',
            "answer-empty",
        ),
        ('acknowledged: "acknowledged"', 'acknowledged: "ok"', "assumption-not-acknowledged"),
        ('  - number: "2"', '  - number: "99"', "question-missing"),
        ("questions:", "querstions:", "key-unknown"),
    ],
)
def test_a_form_that_is_not_what_was_asked_for(path: Path, old: str, new: str, code: str) -> None:
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form)
    text = form.read_text(encoding="utf-8")
    assert old in text
    form.write_text(text.replace(old, new, 1), encoding="utf-8")
    assert code in codes(lambda: sign(work_of(path), "checked", "mr", day("2026-09-03")))


def test_a_form_that_was_written_for_other_content_is_stale(path: Path) -> None:
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form)
    change(path, "0.00018 m^2 K/W", "0.00020 m^2 K/W")
    sign_prepared(path)
    assert codes(lambda: sign(work_of(path), "checked", "mr", day("2026-09-03"))) == ["form-stale"]


def test_an_alternate_calculation_names_what_it_was_checked_with(path: Path) -> None:
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form, way="alternate calculation")
    text = form.read_text(encoding="utf-8")
    form.write_text(
        text.replace('checked with: ""', 'checked with: "hand calculation HC-12 rev 1"'), encoding="utf-8"
    )
    sign(work_of(path), "checked", "mr", day("2026-09-03"))
    work = work_of(path)
    checked = lifecycle_of(path, work.solved, work.output).signoffs[1]
    assert checked.signoff is not None
    assert checked.signoff.way == "alternate calculation"
    assert checked.notes == ("checked with hand calculation HC-12 rev 1",)


# --- hand values ------------------------------------------------------------------------------------


def blind_form(path: Path) -> Path:
    return sign(work_of(path), "checked", "mr", day("2026-09-03"), blind=True).path


def put_hand_value(form: Path, result: str, value: str) -> None:
    change(form, f'result: "{result}"\n    by hand: ""', f'result: "{result}"\n    by hand: "{value}"')


def test_hand_values_are_stored_first_and_shown_with_their_deviation_when_signed(path: Path) -> None:
    sign_prepared(path)
    form = blind_form(path)
    figure = work_of(path).solved.base.results["U_service"].value
    put_hand_value(form, "U_service", f"{figure * 1.02:.6f} W/(m^2 K)")
    put_hand_value(form, "h tube-side film service", "9500 W/(m^2 K)")
    step = sign(work_of(path), "checked", "mr", day("2026-09-03"), blind=True)
    assert step.done == signing.VALUES_STORED
    assert not form.exists()
    (stored,) = read_signoffs(signoffs_path(path)).hand_values
    assert are_unaltered(stored)
    assert [value.shown for value in stored.values] == ["", ""]
    sign_checked(path, "2026-09-04")
    entry = read_signoffs(signoffs_path(path)).signoffs[1]
    assert entry.blind is not None
    assert are_unaltered(entry.blind)
    deviations = {value.result: value.deviation for value in entry.blind.values}
    assert deviations["U_service"] == "2.0 %"
    work = work_of(path)
    note = lifecycle_of(path, work.solved, work.output).signoffs[1].notes[0]
    assert note.startswith("hand values stored on 2026-09-03 before the form was filled in: ")
    assert "deviation 2.0 %" in note
    assert read_signoffs(signoffs_path(path)).hand_values == ()


def test_the_form_for_hand_values_shows_none_of_the_figures(path: Path) -> None:
    sign_prepared(path)
    text = blind_form(path).read_text(encoding="utf-8")
    results = work_of(path).solved.base.results
    for name in ("U_service", "U_clean", "h tube-side film service", "h tube-side film clean"):
        assert f'result: "{name}"\n    by hand: ""' in text
        assert f"{results[name].value:.4g}" not in text.replace('digest: "', "").split("values:")[1]
    assert "shell-side film" not in text  # its coefficient is stated in the file


def test_hand_values_that_were_changed_after_they_were_stored_show_it(path: Path) -> None:
    sign_prepared(path)
    form = blind_form(path)
    put_hand_value(form, "U_service", "1400 W/(m^2 K)")
    put_hand_value(form, "h tube-side film service", "9500 W/(m^2 K)")
    sign(work_of(path), "checked", "mr", day("2026-09-03"), blind=True)
    change(signoffs_path(path), "1400 W/(m^2 K)", "1390 W/(m^2 K)")
    sign_checked(path, "2026-09-04")
    work = work_of(path)
    (note,) = lifecycle_of(path, work.solved, work.output).signoffs[1].notes
    assert "(altered after they were stored)" in note


def test_hand_values_come_before_the_form_and_once(path: Path) -> None:
    sign_prepared(path)
    form = blind_form(path)
    put_hand_value(form, "U_service", "1400 W/(m^2 K)")
    assert codes(lambda: blind_form(path)) == ["hand-value-missing"]
    put_hand_value(form, "h tube-side film clean", "9500 W/(m^2 K)")
    blind_form(path)
    assert codes(lambda: blind_form(path)) == ["blind-too-late"]
    assert codes(lambda: sign(work_of(path), "prepared", "kl", day("2026-09-03"), blind=True)) == [
        "blind-too-late"
    ]


def test_hand_values_after_the_form_are_too_late(path: Path) -> None:
    sign_prepared(path)
    sign(work_of(path), "checked", "mr", day("2026-09-03"))
    assert codes(lambda: blind_form(path)) == ["blind-too-late"]


@pytest.mark.parametrize(
    ("value", "code"),
    [("1400", "unit-missing"), ("1400 W/m^2 K", "unit-ambiguous"), ("-3 W/(m^2 K)", "quantity-negative")],
)
def test_a_hand_value_is_a_quantity(path: Path, value: str, code: str) -> None:
    sign_prepared(path)
    put_hand_value(blind_form(path), "U_service", value)
    assert code in codes(lambda: blind_form(path))


# --- the file ---------------------------------------------------------------------------------------

# What a reader of YAML refuses, escaped or not, reaches no file of sign-offs.
REFUSED = re.compile(
    "[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u2028\u2029\u202a-\u202e\u2066-\u2069\ufeff\ufffe\uffff]"
)
TEXTS = st.text(st.characters(exclude_categories=("Cs",)), max_size=30).map(
    lambda text: REFUSED.sub("", text)
)


@given(TEXTS)
def test_any_text_is_read_back_from_its_quotes(text: str) -> None:
    root = read_text(f"key: {quoted(text)}\n", "text").root
    assert isinstance(root, Mapping)
    value = root.get("key")
    assert isinstance(value, Scalar)
    assert value.text == text


@settings(deadline=None)  # no test is timed
@given(TEXTS, TEXTS, TEXTS)
def test_a_file_of_sign_offs_is_read_back_as_it_was_written(
    tmp_path_factory: pytest.TempPathFactory, solved_work: Work, one: str, two: str, three: str
) -> None:
    content = content_of(solved_work.solved)
    values = HandValues("checked", one, "2026-09-03", "A", two, (HandValue("U_service", three),), "x")
    entry = bound(
        SignOff(
            "checked",
            one,
            two,
            "2026-09-03",
            "A",
            content,
            three,
            one,
            (Answer("2", one, two),),
            (Acknowledged(one, two, three),),
            values,
        )
    )
    whole = SignOffFile((entry,), (values,), Voiding(one, "2026-09-05", two))
    path = tmp_path_factory.getbasetemp() / "kept.signoffs.yaml"
    path.write_text(signoffs_text(whole), encoding="utf-8", newline="\n")
    again = read_signoffs(path)
    assert is_unaltered(again.signoffs[0])
    assert again.signoffs[0]._replace(content=content) == entry
    assert (again.hand_values, again.void) == (whole.hand_values, whole.void)
    assert signoffs_text(again) == signoffs_text(whole)


def test_a_sign_off_that_was_altered_by_one_character_is_void(path: Path) -> None:
    sign_prepared(path)
    sign_checked(path)
    change(signoffs_path(path), 'date: "2026-09-03"', 'date: "2026-09-04"')
    work = work_of(path)
    checked = lifecycle_of(path, work.solved, work.output).signoffs[1]
    assert (checked.validity, checked.why) == ("void", ("the sign-off was altered after it was made",))


@pytest.mark.parametrize(
    "text",
    [
        "- a list\n",
        "sign-offs: nothing\n",
        "sign-offs:\n  - {role: prepared}\n",
        "sign-offs:\n  - {role: [prepared]}\n",
    ],
)
def test_a_file_of_sign_offs_that_is_none_is_a_fault(path: Path, text: str) -> None:
    signoffs_path(path).write_text(text, encoding="utf-8")
    assert codes(lambda: read_signoffs(signoffs_path(path))) == ["sign-offs-unreadable"]


# --- void calculations ------------------------------------------------------------------------------


def test_a_void_calculation_says_so_and_can_neither_be_signed_nor_declared_void_again(path: Path) -> None:
    declare_void(work_of(path), "ta", day("2026-09-06"), "The cooler is replaced, see WC-201.")
    work = work_of(path)
    assert lifecycle_of(path, work.solved, work.output).state == "void"
    assert codes(lambda: sign(work_of(path), "prepared", "kl", day("2026-09-06"))) == ["calculation-void"]
    assert codes(lambda: declare_void(work_of(path), "ta", day("2026-09-06"), "Again and again.")) == [
        "calculation-void"
    ]
    record = (work.output / "WC-101" / "record.md").read_text(encoding="utf-8")
    assert "> Void since 2026-09-06: The cooler is replaced, see WC-201." in record


def test_a_reason_for_void_hides_no_character(path: Path) -> None:
    declare_void(work_of(path), "ta", day("2026-09-06"), "Replaced by\x07 the \u202ecooler WC-201.")
    void = read_signoffs(signoffs_path(path)).void
    assert void is not None
    assert void.because == "Replaced byU+0007 the U+202Ecooler WC-201."


def test_a_reason_for_void_is_a_sentence(path: Path) -> None:
    assert codes(lambda: declare_void(work_of(path), "ta", day("2026-09-06"), "ok")) == ["answer-bare"]


def test_open_work_tells_the_faults_of_the_file(path: Path) -> None:
    change(path, "value: 15.75 mm", "value: 15.75")
    assert "unit-missing" in codes(lambda: open_work(path, "wc-101.yaml", path.parent))


def test_a_sign_off_does_not_write_over_what_another_has_written_meanwhile(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = make_book(tmp_path)
    meanwhile = signoffs_text(SignOffFile(void=Voiding("ta", "2026-09-02", "It is replaced by WC-201.")))

    def another_writes(entry: SignOff) -> SignOff:
        signoffs_path(path).write_text(meanwhile, encoding="utf-8")
        return bound(entry)

    monkeypatch.setattr(signing, "bound", another_writes)
    with pytest.raises(Faults) as caught:
        sign_prepared(path)
    assert [fault.code for fault in caught.value.faults] == ["sign-offs-moved"]
    assert signoffs_path(path).read_text(encoding="utf-8") == meanwhile
    assert not (tmp_path / "output").exists()


@pytest.mark.parametrize("blind", [False, True])
def test_a_folder_in_the_place_of_a_form_is_told(tmp_path: Path, blind: bool) -> None:
    path = make_book(tmp_path)
    sign_prepared(path)
    form = forms.form_path(path, "checked", blind)
    form.mkdir()
    with pytest.raises(Faults) as caught:
        sign(work_of(path), "checked", "mr", day("2026-09-03"), blind)
    (fault,) = caught.value.faults
    assert (fault.code, fault.place.file) == ("file-is-folder", form.as_posix())


def test_what_stands_in_the_place_of_the_issued_copies_is_told(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    issued = tmp_path / "output/WC-101/issued"
    issued.parent.mkdir(parents=True)
    issued.write_text("a file, not a folder", encoding="utf-8")
    with pytest.raises(Faults) as caught:
        sign_prepared(path)
    (fault,) = caught.value.faults
    assert (fault.code, fault.place.file) == ("issued-unreadable", issued.as_posix())
