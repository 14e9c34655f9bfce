"""Uncertainty of the results: what is in it, a budget for each result, and the samples where the file asks."""

from __future__ import annotations

import math

from calcbook.chain.outcome import CriterionResult
from calcbook.chain.uncertainty_outcome import Budget, BudgetRow, Chance, SampledResult, Sampling, Uncertainty
from calcbook.formulas.names import written_name
from calcbook.quantities import QuantityKind, in_unit
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import asked_text, fixed, number, percent, report_unit, share_text, unit_text
from calcbook.record.page import Page, case_name

STANDARD_DIGITS = 2
SLOPE_DIGITS = 4
FACTOR_PLACES = 3
# Above this share, samples without an answer or outside a limit are a caution.
MOST_UNSAID = 0.001
AT_STATED = " at the stated values"
# So many standard deviations of a share tell it from another at about 95 %.
NEAR = 2.0
# What a figure on a scale with a zero of its own is given as a part of its value.
NO_PART = "none of a temperature"
NOT_SEPARABLE = "not separable"


def uncertainty(page: Page) -> list[Block]:
    """Budgets and samples, or why there are none."""
    found = page.solved.uncertainty
    heading = Heading(3, "Uncertainty")
    if found is None:
        return [heading, Paragraph("No tolerance is stated; no uncertainty of a result is given.")]
    blocks: list[Block] = [heading, *_what_is_in_it(found, page), _summary(found, page)]
    cautions = _cautions(found)
    if cautions:
        blocks.append(Bullets(cautions))
    if found.elsewhere:
        blocks += _elsewhere(found, page)
    if found.without:
        lines = (f"Case {case} has no uncertainty: {why}." for case, why in found.without)
        blocks.append(Bullets(tuple(lines)))
    for budget in found.budgets:
        blocks += _budget(budget, page)
    return [*blocks, *_sampled(found, page)]


def how_sure(page: Page) -> list[Block]:
    """For the brief: how often each criterion holds over the samples, where the file asks for them."""
    found = page.solved.uncertainty
    samples = found.sampling if found is not None else None
    if found is None or samples is None or not samples.chances:
        return []
    words = "; ".join(f"{one.text}: {_held(one, samples.trials)}" for one in samples.chances)
    return [
        Paragraph(
            f"Probability that it holds in {_case(found)}, from the uncertainties of section 11: {words}."
        )
    ]


def certainty_words(found: Uncertainty | None, item: CriterionResult) -> str:
    """What the uncertainty says of a verdict at the stated values; empty where nothing is known of it.

    The probability is that of the samples; without samples, whether the limit lies within the expanded
    uncertainty of the result.
    """
    if found is None or item.words:
        return ""
    known_chance = found.chance(item.case, item.id)
    if known_chance is not None:
        held = _held(known_chance.chance, known_chance.trials)
        lacking = _lacking(_missing_in(found, item.case), ", without")
        if math.isnan(item.required):
            return f"{AT_STATED}; holds with {held}{lacking}"
        as_stated = "met" if item.is_met_as_stated else "not met"
        return (
            f": it holds with {held}{lacking}, and {asked_text(item.required)} is asked for;"
            f" {as_stated}{AT_STATED}{_near(known_chance.chance)}"
        )
    if not math.isnan(item.required):
        return f"{AT_STATED}; the probability that is asked for is not worked out"
    known = _expanded(found, item)
    if known is None:
        return f"{AT_STATED}; its uncertainty is not worked out"
    expanded, missing = known
    if abs(item.margin) < expanded:
        return f"{AT_STATED}; the limit lies within the expanded uncertainty"
    return _lacking(missing, f"{AT_STATED}; its uncertainty lacks")


def _near(chance: Chance) -> str:
    """That a share cannot be told from what is asked for by so many samples."""
    if abs(chance.probability - chance.required) > NEAR * chance.deviation:
        return ""
    return (
        f"; the share is known within a standard deviation of {number(100.0 * chance.deviation, 2)} %, so that other"
        " samples may decide otherwise"
    )


def result_of(item: CriterionResult) -> str:
    """The name of what a criterion judges."""
    return item.that.split(">")[0].split("<")[0].strip()


def _expanded(found: Uncertainty, item: CriterionResult) -> tuple[float, tuple[str, ...]] | None:
    """The expanded uncertainty of what a criterion judges, and the terms that have no part in it."""
    result = result_of(item)
    if item.case == found.case:
        missing = missing_terms(found)
        spreads = {
            name: (budget.expanded, missing)
            for budget in found.budgets
            for name in (budget.result, *budget.also)
        }
        return spreads.get(result)
    spread = found.spread(item.case, result)
    return (spread.expanded, spread.missing) if spread is not None else None


def _missing_in(found: Uncertainty, case: str) -> tuple[str, ...]:
    """The terms whose method has no part in the uncertainty of a case."""
    if case == found.case:
        return missing_terms(found)
    return next((one.missing for one in found.elsewhere if one.case == case), ())


def missing_terms(found: Uncertainty) -> tuple[str, ...]:
    """The terms whose method has no part in the uncertainty."""
    return tuple(dict.fromkeys(item.term for item in found.left_out))


def _lacking(terms: tuple[str, ...], words: str) -> str:
    return f"{words} the part of {', '.join(terms)}" if terms else ""


# --- what it is made of -----------------------------------------------------------------------------


def _what_is_in_it(found: Uncertainty, page: Page) -> list[Block]:
    words = (
        f"First-order propagation (JCGM 100:2008, 5.1.2) in {_case(found)}, from the tolerances of the givens and"
        " the accuracy of the methods; slopes are those of the relations. The accuracy of a method is a factor B"
        " around 1 on the film coefficient that its card gives, one for all terms of that card."
    )
    facts = [
        "Figures without a tolerance count as exact, among them the properties of fluids and the conductivities"
        " of material cards.",
        *_allowances(found),
        *_linked(page),
        *(
            f"{item.term}: the part of the method {item.card} is missing: {item.reason}."
            for item in found.left_out
        ),
        *(
            f"{written_name(one.first)} and {written_name(one.second)} go together with r ="
            f" {number(one.coefficient, 4)} ({one.source or 'no source'})."
            for one in found.correlations
        ),
        *_correlated_samples(found),
    ]
    return [Paragraph(words), Bullets(tuple(facts))]


def _correlated_samples(found: Uncertainty) -> list[str]:
    if not found.correlations or found.sampling is None:
        return []
    return [
        "In the samples each of these keeps its own law, and r is the coefficient of their normal scores: that of"
        " figures with rectangular laws is smaller by up to 0.02."
    ]


def _case(found: Uncertainty) -> str:
    return f"case {found.case}" if found.case else "the base case"


def _linked(page: Page) -> list[str]:
    """The figures that come from other calculations without what those say of their uncertainty."""
    return [
        f"{written_name(given.symbol)} is a result of calculation {given.link.calculation}; what that says of its"
        " uncertainty does not come with it, and no tolerance is stated here."
        for given in page.calculation.givens.values()
        if given.link is not None and given.tolerance is None
    ]


def _allowances(found: Uncertainty) -> list[str]:
    if not found.exact_allowances:
        return []
    return [
        f"No tolerance is stated for the fouling of {', '.join(found.exact_allowances)}: an allowance is an agreed"
        " figure and gets none by itself."
    ]


def _summary(found: Uncertainty, page: Page) -> Table:
    return Table(
        (
            "Result",
            "Value",
            "Unit",
            "Standard uncertainty",
            "Coverage factor k",
            f"Expanded uncertainty, {_coverage(found)}{_of_inputs(found)}",
            "Relative to the value",
        ),
        tuple(_summary_row(budget, page) for budget in found.budgets),
    )


def _elsewhere(found: Uncertainty, page: Page) -> list[Block]:
    """What the criteria judge in the cases that have no budget of their own."""
    rows = []
    for one in found.elsewhere:
        unit = _unit(one.kind, page)
        standard = in_unit(one.standard, _step(unit))
        rows.append(
            (
                case_name(one.case),
                one.result,
                beside(_value(one.value, one.kind, unit), standard),
                unit_text(unit),
                number(standard, STANDARD_DIGITS),
                number(in_unit(one.expanded, _step(unit)), STANDARD_DIGITS),
                ", ".join(one.missing) or "none",
            )
        )
    columns = (
        "Case",
        "Result",
        "Value",
        "Unit",
        "Standard uncertainty",
        f"Expanded uncertainty, {_coverage(found)}",
        "Terms without a part",
    )
    return [
        Paragraph("What the criteria judge in the other cases, by first order:"),
        Table(columns, tuple(rows)),
    ]


def _of_inputs(found: Uncertainty) -> str:
    """What heads an expanded uncertainty that lacks the part of a method."""
    return ", of the stated parts alone" if found.left_out else ""


def _coverage(found: Uncertainty) -> str:
    return f"{number(100.0 * found.coverage, 4)} %"


def _summary_row(budget: Budget, page: Page) -> tuple[str, ...]:
    unit = _unit(budget.kind, page)
    return (
        budget.result,
        beside(_value(budget.value, budget.kind, unit), in_unit(budget.standard, _step(unit))),
        unit_text(unit),
        number(in_unit(budget.standard, _step(unit)), STANDARD_DIGITS),
        fixed(budget.factor, FACTOR_PLACES),
        number(in_unit(budget.expanded, _step(unit)), STANDARD_DIGITS),
        NO_PART if budget.kind.scale == "point" else percent(budget.relative),
    )


def _cautions(found: Uncertainty) -> tuple[str, ...]:
    return tuple(
        f"Caution: {budget.result} is not near a straight line over one standard uncertainty to either side"
        f" ({_wide_words(budget)}); "
        + (
            "hold the budget against the samples below."
            if found.sampling and found.sampling.results
            else "samples (`uncertainty:`) show more."
        )
        for budget in found.budgets
        if budget.is_nonlinear
    )


def _wide_words(budget: Budget) -> str:
    if not math.isfinite(budget.wide_standard):
        return "the circuit has no value there"
    return f"slopes taken over them give {percent(budget.wide_standard / budget.standard - 1.0)} more"


# --- budgets ----------------------------------------------------------------------------------------


def _budget(budget: Budget, page: Page) -> list[Block]:
    unit = _unit(budget.kind, page)
    columns = (
        "Figure",
        "Meaning",
        "Value",
        "Standard uncertainty",
        "Unit",
        "Distribution",
        "From",
        f"Sensitivity{_of_unit(unit)} per unit of the figure",
        f"Contribution{_of_unit(unit)}",
        "Share of the variance",
    )
    heading = Heading(4, f"Budget of {', '.join((budget.result, *budget.also))}")
    if not budget.rows:
        return [heading, Paragraph("It depends on no figure with a tolerance.")]
    # Rounded before it is ranked, so that contributions that are alike keep the order of the file.
    rows = sorted(budget.rows, key=lambda row: -float(f"{abs(row.contribution):.9g}"))
    lines: list[Block] = [heading, Table(columns, tuple(_budget_row(row, unit) for row in rows))]
    joint = [row for row in rows if math.isnan(row.share)]
    if joint and budget.standard > 0.0:
        rest = 1.0 - sum(row.share for row in rows if not math.isnan(row.share))
        names = ", ".join(_symbol(row) for row in joint)
        lines.append(Paragraph(f"{names}: correlated, together {percent(rest)} of the variance."))
    if math.isfinite(budget.degrees):
        lines.append(
            Paragraph(
                f"Effective degrees of freedom {number(budget.degrees, 3)} (JCGM 100:2008, G.4.1); k is that of"
                f" the t law at {math.floor(budget.degrees)}."
            )
        )
    return lines


def _budget_row(row: BudgetRow, unit: str) -> tuple[str, ...]:
    item = row.input
    own = item.kind.unit
    return (
        _symbol(row),
        item.title,
        number(item.value, 6),
        number(item.standard, STANDARD_DIGITS),
        unit_text(own),
        item.distribution,
        item.rule,
        number(in_unit(row.slope, _step(unit)), SLOPE_DIGITS),
        number(in_unit(row.contribution, _step(unit)), STANDARD_DIGITS),
        NOT_SEPARABLE if math.isnan(row.share) else percent(row.share),
    )


def _symbol(row: BudgetRow) -> str:
    item = row.input
    return item.id.replace("factor/", "B of ") if item.is_method else written_name(item.symbol)


# --- samples ----------------------------------------------------------------------------------------


def _sampled(found: Uncertainty, page: Page) -> list[Block]:
    if not page.calculation.uncertainty:
        return []
    heading = Heading(4, "Monte Carlo propagation")
    samples = found.sampling
    if samples is None:
        return [heading, Paragraph("No figure is drawn: no tolerance and no accuracy of a method acts.")]
    return [heading, *_figures(found, samples, page), *_chances(samples), *_counts(samples)]


def _figures(found: Uncertainty, samples: Sampling, page: Page) -> list[Block]:
    """The results over the samples beside their budgets, or that there are too few for any."""
    if not samples.is_answered:
        return [
            Paragraph(
                f"Of {_whole(samples.trials)} samples fewer than half of a block have an answer, and no figure of a"
                f" result is made from those. Random numbers: {samples.generator}, one stream for each figure."
            )
        ]
    budgets = {budget.result: budget for budget in found.budgets}
    still = [name for name in budgets if name not in {one.result for one in samples.results}]
    return [
        Paragraph(_how(samples)),
        *([Paragraph(f"Nothing that is drawn moves {', '.join(still)}.")] if still else []),
        Table(
            (
                "Result",
                "Mean",
                "Unit",
                "Standard uncertainty",
                f"Interval of {_coverage(found)}",
                "Interval of first order",
                "Ends apart by",
                "Tolerance",
                "First order",
            ),
            tuple(_sampled_row(one, budgets[one.result], page) for one in samples.results),
        ),
        Paragraph(
            "First order is validated where both ends of its interval lie within the tolerance, half of the last"
            " digit made sure of, of those of the samples (JCGM 101:2008, 8.1); otherwise the samples are to be"
            f" preferred.{_unsettled(samples)}"
        ),
    ]


def _unsettled(samples: Sampling) -> str:
    """What a result that was not steady when the samples stopped is called."""
    if all(one.verdict != "not settled" for one in samples.results):
        return ""
    return " It is not settled where the samples stopped before the result was steady."


def _how(samples: Sampling) -> str:
    stop = (
        f"stopped at the most that are drawn, {_whole(samples.trials)}, before every figure was steady"
        if samples.is_capped
        else f"stopped after {_whole(samples.trials)}, when twice the standard deviation of every figure over the blocks"
        " was below a fifth of its tolerance"
    )
    return (
        f"Samples (JCGM 101:2008, 7.9) in {samples.blocks} blocks of {_whole(samples.block_size)}, {stop}. The circuit is"
        f" closed in each sample. Random numbers: {samples.generator}, one stream for each figure."
    )


def _sampled_row(one: SampledResult, budget: Budget, page: Page) -> tuple[str, ...]:
    unit = _unit(one.kind, page)
    standard = in_unit(one.standard, _step(unit))

    def shown(value: float) -> str:
        return beside(_value(value, one.kind, unit), standard)

    low, high = (number(in_unit(part, _step(unit)), 2) for part in (one.low_difference, one.high_difference))
    return (
        one.result,
        shown(one.mean),
        unit_text(unit),
        number(standard, STANDARD_DIGITS),
        f"{shown(one.low)} to {shown(one.high)}",
        f"{shown(budget.value - budget.expanded)} to {shown(budget.value + budget.expanded)}",
        f"{low} and {high}",
        number(in_unit(one.tolerance, _step(unit)), 1),
        one.verdict,
    )


def _chances(samples: Sampling) -> list[Block]:
    if not samples.chances and not samples.not_sampled:
        return []
    blocks: list[Block] = []
    if samples.chances:
        rows = tuple(
            (
                one.text,
                "holds" if one.nominal else "does not hold",
                _held(one, samples.trials),
                f"{number(100.0 * one.deviation, 2)} %" if one.deviation else "no other case seen",
            )
            for one in samples.chances
        )
        columns = (
            "Criterion",
            "At the stated values",
            "Probability that it holds",
            "Standard deviation of that",
        )
        blocks.append(Table(columns, rows))
    if samples.not_sampled:
        blocks.append(Paragraph(f"Not counted over the samples: {'; '.join(samples.not_sampled)}."))
    return blocks


def _held(chance: Chance, trials: int) -> str:
    """How often a statement holds, with the samples that count against it for want of an answer."""
    words = _chance(chance, trials)
    if not chance.unanswered:
        return words
    return f"{words} ({share_text(chance.unanswered)} of the samples have no answer and count against it)"


def _chance(chance: Chance, trials: int) -> str:
    """A probability in per cent; never a certainty, where the samples merely show no other case."""
    probability = chance.probability
    if probability in (0.0, 1.0):
        # Rounded away from certainty, with the digits that show it.
        digits = max(3, 1 - math.floor(math.log10(300.0 / trials)))
        bound = math.ceil(300.0 / trials * 10.0**digits - 1e-6) / 10.0**digits
        words = ("less than", bound) if probability == 0.0 else ("more than", 100.0 - bound)
        return f"{words[0]} {fixed(words[1], digits)} %"
    return share_text(probability, chance.required)


def _counts(samples: Sampling) -> list[Block]:
    """Samples without an answer and samples outside a limit, with a caution where they are many."""
    words = (
        f"{_caution(samples.unanswered, samples)}Samples without an answer: {_part(samples.unanswered, samples)}."
        " They have no solution, a figure that cannot be, or lie outside a limit that stops; they are left out of"
        " the figures above."
    )
    more = (
        f"{_caution(samples.outside_any, samples)}Samples outside a range limit of a method or term, or"
        f" of the phase at a wall: {_part(samples.outside_any, samples)}. They are counted in."
    )
    blocks: list[Block] = [Bullets((words, more))]
    if samples.outside:
        columns = (
            "Limit that samples leave",
            "Condition",
            "Level",
            "At the stated values",
            "Samples outside",
        )
        blocks.append(
            Table(
                columns,
                tuple(
                    (row.check, row.condition, row.level, row.nominal, _part(row.samples, samples))
                    for row in samples.outside
                ),
            )
        )
    return blocks


def _caution(count: int, samples: Sampling) -> str:
    return "Caution: " if count > MOST_UNSAID * samples.trials else ""


def _part(count: int, samples: Sampling) -> str:
    return f"{_whole(count)} of {_whole(samples.trials)} ({percent(count / samples.trials, 2)})"


def _whole(count: int) -> str:
    """A whole number in groups of three."""
    return number(float(count), len(str(count)))


# --- units and digits -------------------------------------------------------------------------------


def _unit(kind: QuantityKind, page: Page) -> str:
    return report_unit(kind, page.calculation.report)


def _step(unit: str) -> str:
    """The unit of a difference of figures in this unit."""
    return {"degC": "K", "degF": "degR"}.get(unit, unit)


def _of_unit(unit: str) -> str:
    """The unit of a column behind a comma; a plain number needs none."""
    text = unit_text(_step(unit))
    return "" if text == "1" else f", {text}"


def _value(value: float, kind: QuantityKind, unit: str) -> float:
    return in_unit(value, unit, point=kind.scale == "point")


def beside(value: float, standard: float) -> str:
    """A figure rounded where its standard uncertainty, of two digits, ends."""
    if not math.isfinite(value) or not standard > 0.0:
        return number(value)
    end = math.floor(math.log10(standard)) - (STANDARD_DIGITS - 1)
    if end < 0:
        return fixed(value, -end)
    digits = max(math.floor(math.log10(abs(value))) - end + 1, 1) if value else 1
    return number(value, digits)
