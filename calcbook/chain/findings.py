"""What a solution shows beyond the limits of cards: states of streams, phases at the wall, what was decided."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from calcbook.calcfile.calculation import Derived, Term
from calcbook.chain.checks import NOT_EVALUABLE, OUTSIDE, STATES, WITHIN, apart
from calcbook.chain.fluids import PropertyOperation
from calcbook.chain.gaps import gaps
from calcbook.chain.outcome import CheckResult
from calcbook.chain.roots import other_heat_flows
from calcbook.chain.solve import Solution, chosen
from calcbook.chain.types import (
    ABOVE_SITE,
    ABSENT,
    CONDITIONS,
    SERVICE,
    Branch,
    Candidate,
    Chain,
    ChainStep,
    Group,
    OpenItem,
    RunnerAssumption,
    StreamState,
)
from calcbook.faults import Collector, Place
from calcbook.formulas import number_text
from calcbook.library import vocabulary
from calcbook.library.operations import RelationOperation, run
from calcbook.properties import FluidAtPressure, PropertyFault
from calcbook.quantities import QuantityKind, si_unit, unit_display

Array = np.ndarray
ICE_POINT = 273.15
# What a quantity of a sign must be, in words.
SIGNS = {"positive": " above zero", "not negative": " of zero or more"}
# Stands for a figure that a state does not have: none that it has is negative.
UNKNOWN = -1.0
# Figures that are derived lie between these in SI, or are zero: growth rates of deposits are the smallest.
SMALLEST_DERIVED, LARGEST_DERIVED = 1e-16, 1e13
# How near a move in kelvin is to a whole number that rounding alone keeps them apart.
SAME_MOVE = 1e-9
# How a unit of temperature was understood, see ``Quantity.reading``.
POINT, POINT_OR_DIFFERENCE = "point", "point or difference"
# A pure fluid's two sides of saturation meet within rounding; a blend's dew point lies above by more than this, K.
GLIDE = 1e-3


def celsius(temperature: float, digits: int = 4) -> str:
    """A temperature as text in degrees Celsius."""
    return f"{number_text(temperature - ICE_POINT, digits)} °C"


# --- states of streams ------------------------------------------------------------------------------


def stream_findings(
    chain: Chain, case: str, inputs: Mapping[str, np.ndarray], collector: Collector
) -> tuple[OpenItem, ...]:
    """Check the bulk state of every stream of a case, and that walls are not turned inside out.

    Faults (a liquid that is vapour, two phases, outside the fluid's range) go to the collector with the
    stream's place; what only needs the engineer's eye becomes an open item.
    """
    values: dict[str, Any] = {**chain.constants, **inputs}
    run(chain.steps, values)
    _check_surfaces(chain, values, collector)
    _check_directions(chain, values, collector, case)
    _check_flows(chain, values, collector, case)
    _check_derived(chain, values, collector, case)
    _check_factors(chain, values, collector, case)
    items: list[OpenItem] = []
    for state in chain.streams.values():
        run(
            [
                step
                for step in film_steps(chain)
                if step.id in (state.temperature, state.pressure, state.fraction) and step.id not in values
            ],
            values,
        )
        fluid = _fluid_at(state, values, collector, f"stream {state.name}", case)
        if fluid is None:
            continue
        temperature = float(values[state.temperature])
        if state.saturation and math.isnan(temperature):
            _report_no_saturation(state, values, collector, case)
            continue
        items += _glide_items(chain, state, temperature, case)
        items += _state_items(state, fluid, temperature, state.phase, "", case, collector)
        # A stream keeps the phase of its mean from end to end: one that changes it on the way is another duty.
        phase = state.phase or fluid.phase_at(temperature)
        for place, bound in ends_of(chain, state.name):
            items += _state_items(state, fluid, float(values[bound]), phase, place, case, collector)
        items += _measured_items(chain, state, phase, values, case, collector)
    _check_gaps(chain, values, collector, case)
    return tuple(items)


def _measured_items(
    chain: Chain,
    state: StreamState,
    phase: str,
    values: Mapping[str, Any],
    case: str,
    collector: Collector,
) -> list[OpenItem]:
    """What the fluid says of the state at which a volume flow is measured: it must be of the phase of the stream.

    Normal cubic metres of moist air are those of a gas of its composition, though water would condense: an open item.
    """
    name = f"stream {state.name}/density of flow"
    step = next((step for step in chain.steps if step.id == name), None)
    if step is None or step.inputs["T"] == state.temperature:
        return []
    place = " where its flow is measured"
    measured = replace(state, temperature=step.inputs["T"], pressure=step.inputs["p"], phase=phase)
    fluid = _fluid_at(measured, values, collector, f"stream {state.name}{place}", case)
    if fluid is None:
        return []
    own = Collector()
    items = _state_items(measured, fluid, float(values[measured.temperature]), phase, place, case, own)
    for fault in own:
        if fault.code != "above-saturation":
            collector.take([fault])
            continue
        name = f"stream {state.name}{place}/{fault.code}" + (f"/{case}" if case else "")
        words = "the density there is that of a gas of this composition"
        items.append(OpenItem(name, "state", f"{fault.message[0].upper()}{fault.message[1:]}: {words}."))
    return items


def _check_flows(chain: Chain, values: Mapping[str, Any], collector: Collector, case: str) -> None:
    """That a film of forced flow has one; a stream of the duty is looked at there."""
    duty = chain.calculation.duty
    told = {side.stream for side in duty.sides.values()} if duty is not None else set()
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            if branch.situation is None or branch.situation.flow != "forced" or branch.stream in told:
                continue
            state = chain.streams[branch.stream]
            flow = values.get(state.flow)
            if flow is not None and float(flow) <= 0.0:
                where = f"case {case}: " if case else ""
                collector.add(
                    "flow-missing",
                    state.place,
                    f"{where}{branch.name} is a film of forced flow, and stream {state.name} has none",
                    found=f"{number_text(float(flow), 4)} {unit_display(vocabulary()[state.flow_kind].unit)}",
                    expected=f"a {state.flow_kind} above zero, or a situation of free flow",
                )


def _check_derived(chain: Chain, values: Mapping[str, Any], collector: Collector, case: str) -> None:
    """That every derived quantity has a value, and one that a quantity of its kind can have."""
    kelvin = vocabulary()["temperature"].dimension
    has_temperatures = any(kind.dimension == kelvin for kind in chain.derived_kinds.values())
    moves = _moves_of_derived(chain, values) if has_temperatures else {}
    cannot_be = dict(impossible_derived(chain, values))
    for symbol, item in chain.calculation.derived.items():
        if f"derived/{symbol}" not in values:
            continue
        kind, value = chain.derived_kinds.get(symbol), float(values[f"derived/{symbol}"])
        if kind is not None and kind.dimension == kelvin:
            _check_scale(item, kind, moves[symbol], collector, case)
        if kind is not None and kind.reading == "absolute":
            _check_pressure(chain, item, values, collector, case)
        if cannot_be[symbol]:
            what = f"the {f'{kind.name} ' if kind is not None else ''}{symbol} that is derived here"
            must = must_be(kind) if kind is not None else ""
            unit = kind.unit if kind is not None else si_unit(chain.dimensions[f"derived/{symbol}"])
            _report_derived(item.place, what, value, unit, must, collector, case)


def must_be(kind: QuantityKind) -> str:
    """What a quantity of a kind must be, in words; empty where it may be anything."""
    words = " above absolute zero" if kind.scale == "point" else SIGNS.get(kind.sign, "")
    bounds = " and ".join(
        text
        for text in (kind.least and f"{kind.least} or more", kind.most and f"{kind.most} or less")
        if text
    )
    return f"{words}{f' ({bounds})' if bounds else ''}"


def impossible_derived(chain: Chain, values: Mapping[str, Array]) -> Iterator[tuple[str, Array]]:
    """The symbols that are derived, and the samples in which each is what a quantity of its kind cannot be."""
    for symbol in chain.calculation.derived:
        figures = values.get(f"derived/{symbol}")
        if figures is not None:
            kind = chain.derived_kinds.get(symbol)
            can_be = kind.allowed(figures) if kind is not None else True
            yield symbol, ~(_has_size(figures) & can_be)


def impossible_factors(chain: Chain, values: Mapping[str, Array]) -> Iterator[tuple[Term, Array, Array]]:
    """The terms whose stated coefficient scales with something: the factor, and where it is not finite above zero."""
    for term in (term for term in chain.calculation.every_term if term.scales_with is not None):
        known = dict(values)
        steps = [step for step in film_steps(chain) if step.id == factor_of_term(term)]
        run([step for step in steps if known.keys() >= set(step.inputs.values())], known)
        factor = np.asarray(known.get(factor_of_term(term), 1.0))
        yield term, factor, ~(_has_size(factor) & (factor > 0.0))


def factor_of_term(term: Term) -> str:
    """The id of the factor that a stated coefficient is scaled with."""
    return f"{term.name}/factor"


def figures_to_hold(chain: Chain) -> set[str]:
    """The ids of what samples are held to by ``impossible_derived`` and ``impossible_factors``."""
    calculation = chain.calculation
    factors = {factor_of_term(term) for term in calculation.every_term if term.scales_with is not None}
    return factors | {f"derived/{symbol}" for symbol in calculation.derived}


def _has_size(values: Any) -> Array:
    """Whether a figure is finite, and not beyond everything that this trade calculates with."""
    size = np.abs(values)
    return (size == 0.0) | ((size >= SMALLEST_DERIVED) & (size <= LARGEST_DERIVED))


def _moves_of_derived(chain: Chain, values: Mapping[str, Any]) -> dict[str, float]:
    """By how many K each derived quantity moves where every temperature among the givens moves by one.

    NaN where that hangs on a given in K or degR of which nothing says whether it is a temperature or a difference.
    """
    moves = []
    for doubtful in (0.0, 1.0):
        part = {POINT: 1.0, POINT_OR_DIFFERENCE: doubtful}
        moved: dict[str, Any] = dict(values)
        for symbol, given in chain.calculation.givens.items():
            quantity = given.value.quantity
            move = part.get(quantity.reading, 0.0) if quantity is not None else 0.0
            moved[f"given/{symbol}"] = np.asarray(values[f"given/{symbol}"]) + move
        run([step for step in chain.steps if step.id.startswith("derived/")], moved)
        moves.append(
            {
                symbol: float(moved[f"derived/{symbol}"]) - float(values[f"derived/{symbol}"])
                for symbol in chain.calculation.derived
                if f"derived/{symbol}" in values
            }
        )
    first, second = moves
    return {
        symbol: move if abs(move - second[symbol]) < SAME_MOVE else math.nan for symbol, move in first.items()
    }


def _check_scale(item: Derived, kind: QuantityKind, moves: float, collector: Collector, case: str) -> None:
    """That a temperature is no difference, sum or multiple of temperatures, and a difference no temperature.

    A law that makes a temperature of another (of the sky, of a wet bulb) may move by any other part of a kelvin.
    """
    wanted = 1.0 if kind.scale == "point" else 0.0
    if math.isnan(moves) or abs(moves - round(moves)) > SAME_MOVE:
        return
    whole = round(moves)
    if whole != wanted:
        what = f"{f'case {case}: ' if case else ''}the {kind.name} {item.symbol} that is derived here"
        collector.add(
            "derived-not-possible",
            item.place,
            f"{what} stays where the temperatures it is taken from move by 1 K, as a difference does"
            if whole == 0
            else f"{what} moves by {whole} K where the temperatures it is taken from move by 1 K",
            found=item.relation.text.strip(),
            expected="a temperature, which moves by 1 K" if wanted else "a difference, which does not move",
        )


def _check_pressure(
    chain: Chain, item: Derived, values: Mapping[str, Any], collector: Collector, case: str
) -> None:
    """That an absolute pressure is no difference of gauge pressures: it moves with the pressure of the site."""
    above_site = [step for step in chain.steps if step.id.endswith(ABOVE_SITE)]
    taken = {f"given/{symbol}{ABOVE_SITE}" for symbol in item.relation.symbols}
    if len(taken & {step.id for step in above_site}) < 2:
        return
    moved = dict(values)
    for site in {step.inputs["p_site"] for step in above_site}:
        moved[site] = np.asarray(moved[site]) + 1.0
    run([*above_site, *(step for step in chain.steps if step.id.startswith("derived/"))], moved)
    name = f"derived/{item.symbol}"
    if abs(float(moved[name]) - float(values[name])) < SAME_MOVE * abs(float(values[name])):
        collector.add(
            "derived-not-possible",
            item.place,
            f"{f'case {case}: ' if case else ''}the pressure {item.symbol} that is derived here stays where the"
            " pressure of the site moves, as a difference of pressures does",
            found=item.relation.text.strip(),
            expected="a pressure less a drop, which is stated in bar and not in barg",
        )


def _check_factors(chain: Chain, values: Mapping[str, Any], collector: Collector, case: str) -> None:
    """That what a stated coefficient scales with is a finite factor above zero."""
    for term, factor, cannot_be in impossible_factors(chain, values):
        if cannot_be:
            what = f"the factor that {term.name} scales with"
            must = SIGNS["positive"]
            _report_derived(term.place_of("scales with"), what, float(factor), "1", must, collector, case)


def _report_derived(
    place: Place, what: str, value: float, unit: str, must: str, collector: Collector, case: str
) -> None:
    collector.add(
        "derived-not-possible",
        place,
        f"{f'case {case}: ' if case else ''}{what} cannot be",
        found=f"{number_text(value, 4)} {unit_display(unit)}".rstrip()
        if math.isfinite(value)
        else "no finite value",
        expected=f"a finite value{must}, from {SMALLEST_DERIVED:g} to {LARGEST_DERIVED:g} in SI units or zero"
        if math.isfinite(value) and not _has_size(value)
        else f"a finite value{must}",
    )


def ends_of(chain: Chain, stream: str) -> list[tuple[str, str]]:
    """The ends of a stream of the duty: where, and the id of the temperature there."""
    duty = chain.calculation.duty
    return [
        (f" at its {end}", chain.results[f"T {name} {end}"])
        for name, side in (duty.sides.items() if duty is not None else ())
        if side.stream == stream and f"T {name} mean" in chain.results
        for end in ("inlet", "outlet")
    ]


def _state_items(
    state: StreamState,
    fluid: FluidAtPressure,
    temperature: float,
    phase: str,
    place: str,
    case: str,
    collector: Collector,
) -> list[OpenItem]:
    """What a fluid says of one temperature of its stream: faults to the collector, the rest as open items."""
    items = []
    where = f"case {case}: " if case else ""
    for finding in fluid.check_state(temperature, phase or None):
        if finding.level == "fault":
            collector.add(finding.code, state.place, f"{where}stream {state.name}{place}: {finding.message}")
        elif finding.level == "open item":
            name = f"stream {state.name}{place}/{finding.code}" + (f"/{case}" if case else "")
            items.append(OpenItem(name, "state", f"{where}Stream {state.name}{place}: {finding.message}."))
    return items


def _check_gaps(chain: Chain, values: dict[str, Any], collector: Collector, case: str) -> None:
    """That the fluid of every gap has what its methods ask for.

    Its own temperature comes with the solution, where its phase is checked; between both streams' means stands for
    it here, and only what no temperature mends is told.
    """
    for layer, gap in gaps(chain):
        stated = (gap.fluid.pressure, gap.fluid.fraction)
        run([step for step in layer.steps if step.id in stated and step.id not in values], values)
        fluid = _fluid_at(gap.fluid, values, collector, f"gap {gap.fluid.name}", case)
        between = (float(values[chain.inner.bulk]) + float(values[chain.outer.bulk])) / 2.0
        for finding in fluid.check_state(between, gap.fluid.phase or None) if fluid is not None else ():
            if finding.code.endswith("-model"):
                where = f"case {case}: " if case else ""
                collector.add(
                    finding.code, gap.fluid.place, f"{where}gap {gap.fluid.name}: {finding.message}"
                )


def _glide_items(chain: Chain, state: StreamState, temperature: float, case: str) -> list[OpenItem]:
    """An open item for a blend that boils over a range of temperatures under a method for pure fluids."""
    changes = any(
        branch.stream == state.name and branch.situation is not None and branch.situation.changes_phase
        for group in (chain.inner, chain.outer)
        for branch in group.branches
    )
    if not changes or not state.saturation:
        return []
    sides = [state.fluid.state(None, None, phase) for phase in ("liquid", "gas")]
    pressure = float(sides[0].saturation_pressure(temperature, outside="nan"))
    dew = float(sides[1].boiling_temperature(pressure, outside="nan"))
    if not abs(dew - temperature) > GLIDE:
        return []
    where = f"case {case}: " if case else ""
    name = f"stream {state.name}/boils over a range" + (f"/{case}" if case else "")
    return [
        OpenItem(
            name,
            "state",
            f"{where}Stream {state.name}: {state.fluid.text.name} boils over a range of"
            f" {number_text(dew - temperature, 3)} K; the methods are for pure fluids.",
        )
    ]


def _report_no_saturation(
    state: StreamState, values: Mapping[str, Any], collector: Collector, case: str
) -> None:
    pressure = float(values[state.pressure])
    where = f"case {case}: " if case else ""
    collector.add(
        "saturation-unknown",
        state.place,
        f"{where}stream {state.name}: {state.fluid.text.name} has no saturation temperature at its pressure",
        found=f"{number_text(pressure / 1e5, 5)} bar",
        expected="a pressure between triple and critical point",
    )


def _check_directions(chain: Chain, values: Mapping[str, Any], collector: Collector, case: str) -> None:
    """A film that condenses has the colder side opposite, a film that boils the hotter one."""
    for here, opposite in ((chain.inner, chain.outer), (chain.outer, chain.inner)):
        for branch in here.branches:
            change = branch.situation.changes_phase if branch.situation is not None else ""
            if not change or branch.reference not in values or opposite.bulk not in values:
                continue
            own, other = float(values[branch.reference]), float(values[opposite.bulk])
            if (
                math.isnan(own)
                or math.isnan(other)
                or (own > other if change == "condensing" else own < other)
            ):
                continue
            where = f"case {case}: " if case else ""
            collector.add(
                "phase-change-direction",
                chain.streams[branch.stream].place,
                f"{where}{branch.name} is {change} at {celsius(own)}",
                found=f"the other side at {celsius(other)}",
                expected=f"the other side {'colder' if change == 'condensing' else 'hotter'}",
            )


def film_steps(chain: Chain) -> Iterator[ChainStep]:
    """The shared steps of a chain, then those of every film, in order."""
    yield from chain.steps
    for element in chain.elements:
        if isinstance(element, Group):
            for branch in element.branches:
                for candidate in branch.candidates:
                    yield from candidate.steps


def _fluid_at(
    state: StreamState, values: Mapping[str, Any], collector: Collector, what: str, case: str
) -> FluidAtPressure | None:
    """The fluid of ``what`` in a case; None after a fault."""
    pressure = float(values[state.pressure]) if state.pressure else None
    fraction = float(values[state.fraction]) if state.fraction else None
    try:
        return state.fluid.state(pressure, fraction, state.phase)
    except PropertyFault as error:
        collector.add(
            error.code,
            state.place,
            f"{f'case {case}: ' if case else ''}{what}: {error.message}",
            expected=error.expected,
            nearest=error.nearest,
        )
        return None


def _check_surfaces(chain: Chain, values: Mapping[str, Any], collector: Collector) -> None:
    place = (
        chain.calculation.geometry.place
        if chain.calculation.geometry is not None
        else chain.calculation.place
    )
    for before, after in zip(chain.surfaces, chain.surfaces[1:], strict=False):
        if not after.diameter:
            continue
        inner, outer = float(values[before.diameter]), float(values[after.diameter])
        if not outer > inner:
            collector.add(
                "wall-inverted",
                place,
                f"the surface `{after.name}` does not lie outside the surface `{before.name}`",
                found=f"{number_text(outer, 5)} m against {number_text(inner, 5)} m",
                expected="an outside diameter above the inside diameter",
            )
        elif not inner > 0.0:
            collector.add(
                "wall-inverted", place, "the bore is not above zero", found=f"{number_text(inner, 5)} m"
            )


# --- phases at the wall -----------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class WallLimit:
    """One limit of phase at a wetted surface; ``limit`` is NaN where it is not known. 0-d or by sample.

    ``acts`` are the samples whose stream has the phase that this limit is for.
    """

    owner: str
    name: str
    that: str
    sign: str
    surface: Array
    limit: Array
    acts: Array
    because: str
    provider: str

    @property
    def id(self) -> str:
        return f"{self.owner} / wall phase / {self.name}"

    @property
    def margin(self) -> Array:
        """How far the surface is from the limit, above zero within."""
        return self.limit - self.surface if self.sign == "<" else self.surface - self.limit

    @property
    def states(self) -> Array:
        """The places in ``STATES``."""
        return np.where(np.isfinite(self.limit), np.where(self.margin > 0.0, WITHIN, OUTSIDE), NOT_EVALUABLE)


def wall_checks(chain: Chain, case: str, solution: Solution, why_open: str = "") -> list[CheckResult]:
    """Against boiling, condensing and freezing at every wetted surface of a film or gap with a fluid.

    ``why_open`` is why the circuit does not close: its surfaces are not known then.
    """
    return [_wall_check(item, case, solution.condition, why_open) for item in wall_limits(chain, solution)]


def _wall_check(item: WallLimit, case: str, condition: str, why_open: str) -> CheckResult:
    surface, limit = float(item.surface.ravel()[0]), float(item.limit.ravel()[0])
    state = STATES[NOT_EVALUABLE if why_open else int(item.states.ravel()[0])]
    known = math.isfinite(limit)
    beside = () if why_open else (surface - ICE_POINT,)
    limit_text = (
        f"{item.sign} {apart(limit - ICE_POINT, beside, 4)} °C" if known else "not known without a pressure"
    )
    return CheckResult(
        item.id,
        item.owner,
        "wall phase",
        condition,
        case,
        item.that,
        why_open or f"T_s = {apart(surface - ICE_POINT, ((limit if known else 0.0) - ICE_POINT,), 4)} °C",
        limit_text,
        math.nan if why_open else surface,
        "K",
        "range",
        state,
        item.because,
        item.provider,
        "independent library",
        "" if state != "outside" else "above" if item.sign == "<" else "below",
    )


def wall_limits(chain: Chain, solution: Solution) -> list[WallLimit]:
    """The limits of phase at every wetted surface of a film or gap with a fluid, at every sample."""
    found: list[WallLimit] = []
    if not chain.has_temperatures:
        return found
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            if has_phase_to_keep(chain, branch):
                found += _film_limits(chain, solution, group, branch)
    for layer, gap in gaps(chain):
        sides = [solution.figure(name) for name in (layer.first_temperature, layer.second_temperature)]
        found += _phase_limits(layer.name, gap.fluid, "", sides, solution)
    return found


def has_phase_to_keep(chain: Chain, branch: Branch) -> bool:
    """Whether a film has a fluid whose phase at the wall can be looked at; a stated one needs a known one-phase stream."""
    state = chain.streams.get(branch.stream)
    if state is None:
        return False
    return branch.kind == "film" or (
        branch.kind == "stated" and bool(state.pressure) and not state.is_saturated
    )


def _film_limits(chain: Chain, solution: Solution, group: Group, branch: Branch) -> list[WallLimit]:
    surface = solution.figure(chain.results.get(f"T root {group.name}", group.surface_temperature))
    phase_change = branch.situation.changes_phase if branch.situation is not None else ""
    state, stated = chain.streams[branch.stream], branch.kind == "stated"
    return _phase_limits(branch.name, state, phase_change, [surface], solution, stated)


def _phase_limits(
    owner: str,
    state: StreamState,
    phase_change: str,
    sides: list[Array],
    solution: Solution,
    stated: bool = False,
) -> list[WallLimit]:
    """The phase of a fluid at the surfaces that it touches: at the hottest against boiling, else at the coldest.

    A ``stated`` coefficient of a gas may be that of its condensing.
    """
    phases, place = stream_phases(state, solution.values)
    facts = [_wall_facts(state, *figures) for figures in phases]
    hottest, coldest = np.maximum.reduce(sides), np.minimum.reduce(sides)
    limits = []

    def add(name: str, that: str, end: str, sign: str, because: str, wanted: list[bool]) -> None:
        if any(wanted):
            figures = np.array([getattr(one, end) if one is not None else math.nan for one in facts])[place]
            acts = np.array(wanted)[place]
            surface = hottest if sign == "<" else coldest
            limits.append(
                WallLimit(owner, name, that, sign, surface, figures, acts, because, state.fluid_name)
            )

    keeps_phase = not phase_change
    what = "stated coefficient" if stated else "method"
    add(
        "boils",
        "T_s < T_sat",
        "boiling",
        "<",
        f"the {what} is for a liquid without boiling at the surface",
        [one is not None and one.has_vapour and keeps_phase and one.phase == "liquid" for one in facts],
    )
    add(
        "condenses",
        f"T_s > {'T_dew' if state.fluid.text.kind == 'humid air' else 'T_sat'}",
        "boiling",
        ">",
        "the method is for a gas without condensing at the surface",
        [
            one is not None
            and one.has_vapour
            and keeps_phase
            and not stated
            and one.phase == "gas"
            and not math.isnan(one.boiling)
            for one in facts
        ],
    )
    add(
        "freezes",
        "T_s > T_freeze",
        "freezing",
        ">",
        f"the {what} is for a liquid that does not freeze at the surface",
        [
            one is not None and (one.phase == "liquid" or bool(phase_change)) and not math.isnan(one.freezing)
            for one in facts
        ],
    )
    return limits


@dataclass(frozen=True, slots=True)
class _WallFacts:
    """What a bulk state says about its wall; NaN for a temperature that is not known."""

    phase: str
    has_vapour: bool
    boiling: float
    freezing: float


def phases_not_checked(chain: Chain, solution: Solution) -> dict[str, tuple[str, ...]]:
    """The streams of films that are, or may be, liquids, of which boiling or freezing at the wall is not checked."""
    checked = {
        (item.owner, item.name) for item in wall_limits(chain, solution) if np.isfinite(item.limit).all()
    }
    found: dict[str, list[str]] = {"boiling": [], "freezing": []}
    for branch in (branch for group in (chain.inner, chain.outer) for branch in group.branches):
        state = chain.streams.get(branch.stream)
        if state is None or stream_phases(state, solution.values)[0][0][0] == "gas":
            continue
        means_to_change = branch.situation is not None and branch.situation.changes_phase
        if not means_to_change and (branch.name, "boils") not in checked:
            found["boiling"].append(branch.stream)
        if (branch.name, "freezes") not in checked:
            found["freezing"].append(branch.stream)
    return {change: tuple(dict.fromkeys(names)) for change, names in found.items() if names}


def lacks_vapour_pressure(state: StreamState) -> bool:
    """Whether boiling of a fluid at the wall cannot be checked."""
    return state.fluid.text.kind not in ("name", "humid air")


def lacks_freezing_point(state: StreamState, solution: Solution) -> bool:
    """Whether freezing at the wall cannot be checked of a stream that is, or may be, a liquid."""
    if state.phase == "gas" or state.fluid.text.kind == "humid air":
        return False
    try:
        return _freezing(state, solution) is None
    except PropertyFault:
        return False


def freezing_of(state: StreamState, solution: Solution) -> float:
    """Where a stream of a single record freezes, K; NaN where that is not known."""
    try:
        found = _freezing(state, solution)
    except PropertyFault:
        return math.nan
    return math.nan if found is None else found


def _freezing(state: StreamState, solution: Solution) -> float | None:
    return state.fluid.state(*_pressure_and_fraction(state, solution), state.phase).freezing_temperature()


def _pressure_and_fraction(state: StreamState, solution: Solution) -> tuple[float | None, float | None]:
    """The figures of a single record that a fluid's state takes beside its temperature; None for one it has not."""
    pressure, fraction = (
        solution.number(name) if name else None for name in (state.pressure, state.fraction)
    )
    return pressure, fraction


def _wall_facts(state: StreamState, phase: str, pressure: float, fraction: float) -> _WallFacts | None:
    """The facts of a bulk state; None where the fluid has no such state."""
    try:
        fluid = state.fluid.state(known_or_none(pressure), known_or_none(fraction), state.phase)
    except PropertyFault:
        return None
    boiling, freezing = fluid.saturation_temperature(), fluid.freezing_temperature()
    return _WallFacts(
        phase,
        fluid.has_vapour_pressure,
        math.nan if boiling is None else boiling,
        math.nan if freezing is None else freezing,
    )


def stream_phases(
    state: StreamState, values: Mapping[str, Array]
) -> tuple[list[tuple[str, float, float]], Array]:
    """The different phases of a stream with their pressure and fraction (NaN: none), and which each sample has.

    Along one pressure each phase has one stretch of temperatures: two ends of one phase settle what lies between.
    """
    states, place = stream_states(state, values)
    phases = [""] * len(states)
    for numbers in along_pressures(states):
        ends = [_phase(state, *states[number]) for number in (numbers[0], numbers[-1])]
        for number in numbers:
            phases[number] = ends[0] if ends[0] == ends[1] else _phase(state, *states[number])
    found: dict[tuple[str, float, float], int] = {}
    renamed = []
    for phase, (_, pressure, fraction) in zip(phases, states, strict=True):
        key = (phase, _or_unknown(pressure), _or_unknown(fraction))
        renamed.append(found.setdefault(key, len(found)))
    known = [
        (phase, *(math.nan if figure == UNKNOWN else figure for figure in figures))
        for phase, *figures in found
    ]
    return known, np.array(renamed)[place]  # type: ignore[return-value]


def _phase(state: StreamState, temperature: float, pressure: float, fraction: float) -> str:
    """The phase of a bulk state; empty where the fluid has no such state."""
    if state.phase:
        return state.phase
    try:
        fluid = state.fluid.state(known_or_none(pressure), known_or_none(fraction), "")
    except PropertyFault:
        return ""
    return "" if math.isnan(temperature) else fluid.phase_at(temperature)


def along_pressures(states: Sequence[tuple[float, float, float]]) -> list[list[int]]:
    """The numbers of states in groups of one pressure and fraction, in each from the coldest to the hottest."""
    groups: dict[tuple[float, float], list[int]] = {}
    for number, (_, pressure, fraction) in enumerate(states):
        groups.setdefault((_or_unknown(pressure), _or_unknown(fraction)), []).append(number)
    return [sorted(numbers, key=lambda number: states[number][0]) for numbers in groups.values()]


def known_or_none(figure: float) -> float | None:
    """A figure, or None where there is none (NaN)."""
    return None if math.isnan(figure) else figure


def _or_unknown(figure: float) -> float:
    """A figure that may stand in a key: NaN is not even equal to itself."""
    return UNKNOWN if math.isnan(figure) else figure


def stream_states(
    state: StreamState, values: Mapping[str, Array]
) -> tuple[list[tuple[float, float, float]], Array]:
    """The different bulk states of a stream, and which of them each sample has.

    A state is temperature, pressure and fraction; NaN for what the stream does not have.
    """
    names = (state.temperature, state.pressure, state.fraction)
    columns = np.broadcast_arrays(
        *(np.asarray(values[name], dtype=float) if name else np.asarray(math.nan) for name in names)
    )
    shape = columns[0].shape
    temperature, *others = (np.nan_to_num(column.ravel(), nan=UNKNOWN) for column in columns)
    if all((other == other[0]).all() for other in others):
        temperatures, place = np.unique(temperature, return_inverse=True)
        rows = np.stack([temperatures, *(np.full(temperatures.shape, other[0]) for other in others)])
    else:
        rows, place = np.unique(np.stack([temperature, *others]), axis=1, return_inverse=True)
    rows = np.where(rows == UNKNOWN, np.nan, rows)
    states = [(first, second, third) for first, second, third in rows.T.tolist()]
    return states, np.asarray(place).reshape(shape)


def ending_properties(chain: Chain, solution: Solution) -> Iterator[tuple[Branch, Group, str, Array]]:
    """What films read at their surfaces and fluids do not have as far as the bulk of the other side.

    A film, the other side, the property, and whether it is missing there at each sample: why a surface that lies
    between both may not be found.
    """
    if not chain.has_temperatures:
        return
    for group, other in ((chain.inner, chain.outer), (chain.outer, chain.inner)):
        for branch in group.branches:
            steps = {step.id: step for candidate in branch.candidates for step in candidate.steps}
            for step in steps.values():
                operation = step.operation
                if not isinstance(operation, PropertyOperation) or not operation.keeps_phase:
                    continue
                at = {**solution.values, step.inputs["T"]: solution.values[other.bulk]}
                if all(bound in at for bound in step.inputs.values()):
                    value = operation.value({local: at[bound] for local, bound in step.inputs.items()})
                    yield branch, other, operation.property_name, ~np.isfinite(value)


def lacking_property(chain: Chain, solution: Solution) -> str:
    """Why the circuit of a single record does not close, where a fluid ends before the other side; else empty."""
    for branch, _, name, missing in ending_properties(chain, solution):
        if missing.all():
            return f"{branch.stream} has no {name} at the temperature of the other side"
    return ""


# --- what the runner decided ------------------------------------------------------------------------


def _of_other_methods(chain: Chain, solutions: Mapping[str, Solution]) -> set[str]:
    """Ids of what was taken for methods of films that neither condition chose."""
    unused: set[str] = set()
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            used = {chosen(branch, solution).method.id for solution in solutions.values()}
            drop = branch.pressure_drop
            acting = [item for item in branch.candidates if item.method.id in used]
            acting += [*drop.laws, drop.total] if drop is not None else []
            kept = {symbol for item in acting for symbol in _needed(item)}
            if branch.situation is not None:
                kept |= {need.symbol for need in branch.situation.needs}
            asked = {symbol for item in branch.candidates for symbol in _needed(item)}
            unused |= {f"{branch.name}/{symbol}" for symbol in asked - kept}
    return unused


def _idle(chain: Chain, solutions: Mapping[str, Solution]) -> set[str]:
    """Ids of figures taken for want of a stated one that no relation looks at here: an exponent of gases, for a liquid."""
    idle: set[str] = set()
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            drop = branch.pressure_drop
            for name in (name for name in chain.constants if name.startswith(f"{branch.name}/")):
                if not name.endswith(ABSENT):
                    continue
                acts = any(
                    _looks_at(step, name, solution)
                    for solution in solutions.values()
                    for step in (*chosen(branch, solution).steps, *(drop.steps if drop is not None else ()))
                )
                if not acts:
                    idle.add(name.removesuffix(ABSENT))
    return idle


def _looks_at(step: ChainStep, constant: str, solution: Solution) -> bool:
    """Whether a step has another value where a constant moves, with the others that are taken for want of a stated one:
    lanes that are not there have no width either."""
    if constant not in step.inputs.values():
        return False
    if not isinstance(step.operation, RelationOperation) or not solution.values.keys() >= set(
        step.inputs.values()
    ):
        return True
    arguments = {symbol: solution.values[bound] for symbol, bound in step.inputs.items()}
    moved = {
        symbol: 1.01 * np.asarray(value) + 1e-3 if step.inputs[symbol].endswith(ABSENT) else np.asarray(value)
        for symbol, value in arguments.items()
    }
    now, then = (step.operation.value(figures) for figures in (arguments, moved))
    return not np.array_equal(now, then)


def _is_mean_over_length(candidate: Candidate) -> bool:
    """Whether a method follows the length, and with it what came before a place."""
    return any(need.quantity.name == "length" for need in candidate.method.needs)


def _where_parted(chain: Chain) -> str:
    """The places and parts of the unit that its films are worked out for again, in words; empty for none."""
    duty = chain.calculation.duty
    in_parts = ("in every part of the unit",) if duty is not None and duty.parts > 1 else ()
    return ", ".join((*chain.calculation.places, *in_parts))


def _needed(candidate: Candidate) -> Iterator[str]:
    """The symbols that a method and the cards it uses take from outside."""
    yield from (need.symbol for card in candidate.cards for need in card.needs)


def assumptions_of(chain: Chain, solutions: Mapping[str, Solution]) -> tuple[RunnerAssumption, ...]:
    """The runner's decisions: those of the build, and those that only a solution shows."""
    unused = _of_other_methods(chain, solutions) | _idle(chain, solutions)
    found: dict[str, RunnerAssumption] = {
        item.id: item for item in chain.assumptions if item.id not in unused
    }

    def say(name: str, text: str, decided_by: str, acts_on: str) -> None:
        found.setdefault(name, RunnerAssumption(name, text, decided_by, acts_on))

    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            for condition in reversed(CONDITIONS):
                solution = solutions[condition]
                candidate = chosen(branch, solution)
                parted = _where_parted(chain)
                if parted and _is_mean_over_length(candidate):
                    say(
                        f"{branch.name}/mean over the length",
                        f"{candidate.method.id} gives {branch.name} its mean over the whole length,"
                        f" {parted} too: with the properties there, and no local coefficient.",
                        "its card takes the length",
                        branch.name,
                    )
                if branch.situation is not None and not branch.is_forced:
                    figures = _choice_figures(branch, solution)
                    say(
                        f"{branch.name}/method/{condition}",
                        f"{condition}: method {candidate.method.id}.",
                        f"{candidate.because}; {figures}",
                        branch.name,
                    )
                if candidate.needs_direction and chain.has_temperatures:
                    text, by = _direction(group, branch, solution)
                    say(f"{branch.name}/direction/{condition}", f"{condition}: {text}", by, branch.name)
    for layer, gap in gaps(chain):
        for way in gap.ways:
            for condition in reversed(CONDITIONS):
                candidate = chosen(way, solutions[condition])
                if way.situation is not None and not way.is_forced:
                    say(
                        f"{way.name}/method/{condition}",
                        f"{condition}: method {candidate.method.id}.",
                        f"{candidate.because}; {_choice_figures(way, solutions[condition])}",
                        layer.name,
                    )
    for state in chain.fluids.values():
        owner = f"stream {state.name}" if state.name in chain.streams else state.name
        if not state.pressure and state.fluid.text.kind == "name":
            say(
                f"{owner}/saturated",
                f"Properties of {state.name} are those of the saturated liquid.",
                "no pressure is stated; checks against boiling at the wall cannot be evaluated",
                owner,
            )
        if lacks_vapour_pressure(state):
            say(
                f"{owner}/vapour pressure",
                f"Boiling at the wall is not checked for {state.name}.",
                "its fluid has no vapour pressure",
                owner,
            )
        if lacks_freezing_point(state, solutions[SERVICE]):
            say(
                f"{owner}/freezing point",
                f"Freezing at the wall is not checked for {state.name}, nor its pour point, nor what separates from it.",
                "its fluid has no freezing point",
                owner,
            )
        if not state.phase:
            solution = solutions[SERVICE]
            pressure, fraction = _pressure_and_fraction(state, solution)
            at = solution.number(state.temperature) if state.temperature in solution.values else math.nan
            if math.isfinite(at):
                phase = state.fluid.state(pressure, fraction, "").phase_at(at)
                say(
                    f"{owner}/phase",
                    f"{state.name} is taken as {phase}.",
                    f"state at {celsius(at)}"
                    + (f" and {number_text(pressure / 1e5, 5)} bar" if pressure else ""),
                    owner,
                )
    if chain.has_temperatures:
        duty = chain.calculation.duty
        if duty is not None and not duty.has_ends:
            text, reason = "at the same saturation temperatures", "both streams keep their temperatures"
        elif "duty" in chain.results:
            text, reason = "at the same ends of the streams", "the duty is stated"
        elif duty is not None:
            text, reason = "at the ends that the unit reaches in service", "the outlets are not stated"
        else:
            text, reason = "at the stated bulk temperatures", "no duty is stated"
        say("conditions", f"Clean and service are compared {text}.", reason, "U")
    sides = {layer.surface for layer in chain.elements if getattr(layer, "kind", "") == "fouling"}
    if not sides:
        say(
            "fouling",
            "No fouling term is stated: clean and service are the same.",
            "the list of resistances",
            "U",
        )
    else:
        middle = (len(chain.surfaces) - 1) / 2.0
        for side, there in (("inside", min(sides) < middle), ("outside", max(sides) > middle)):
            if not there:
                say(f"fouling/{side}", f"No fouling is taken on the {side}.", "the list of resistances", "U")
    return tuple(found.values())


def _choice_figures(branch: Branch, solution: Solution) -> str:
    """The figures that the choice was made on."""
    names = dict.fromkeys(
        f"{symbol}"
        for row in branch.choice
        for symbol in row.inputs
        if row.inputs[symbol] in solution.values and not row.inputs[symbol].startswith("word ")
    )
    texts = []
    for symbol in names:
        bound = next(row.inputs[symbol] for row in branch.choice if symbol in row.inputs)
        value = solution.number(bound)
        if symbol in ("heated", "liquid"):
            texts.append(symbol if value else f"not {symbol}")
        elif not bound.startswith(f"{branch.name}/with"):
            texts.append(f"{symbol} = {number_text(value, 5)}")
    return ", ".join(texts) or "the only method of the table"


def _direction(group: Group, branch: Branch, solution: Solution) -> tuple[str, str]:
    surface, bulk = solution.number(group.surface_temperature), solution.number(branch.reference)
    figures = (
        f"surface {apart(surface - ICE_POINT, (bulk - ICE_POINT,), 4)} °C,"
        f" bulk {apart(bulk - ICE_POINT, (surface - ICE_POINT,), 4)} °C of this fluid"
    )
    if surface == bulk:
        return "the direction of heat flow is undetermined.", figures
    return f"the fluid is {'heated' if surface > bulk else 'cooled'}.", figures


def root_items(
    chain: Chain, case: str, inputs: Mapping[str, np.ndarray], solutions: Mapping[str, Solution]
) -> tuple[OpenItem, ...]:
    """Open items for a circuit that closes at more than one heat flow."""
    items = []
    for condition in reversed(CONDITIONS):
        where = f"case {case}, {condition}" if case else condition
        others = other_heat_flows(chain, inputs, condition, solutions[condition])
        if others:
            taken = number_text(solutions[condition].number("solution/Q"), 4)
            shown = ", ".join(number_text(other, 3) for other in others)
            items.append(
                OpenItem(
                    f"circuit / heat flows / {where}",
                    "jump",
                    f"The circuit ({where}) closes at more than one heat flow: {taken} W is taken, it"
                    f" closes near {shown} W as well.",
                )
            )
    return tuple(items)


def jump_items(chain: Chain, case: str, solutions: Mapping[str, Solution]) -> tuple[OpenItem, ...]:
    """Open items for laws without a root at a joint, and for a direction that is undetermined."""
    items = []
    for condition in reversed(CONDITIONS):
        solution = solutions[condition]
        where = f"case {case}, {condition}" if case else condition
        for film, (lower, upper) in solution.jump_sides.items():
            items.append(
                OpenItem(
                    f"{film} / joint / {where}",
                    "jump",
                    f"{film} ({where}): the law jumps at a joint and has no root there; the lower side"
                    f" {number_text(float(lower.ravel()[0]), 5)} W/(m²·K) is taken, the upper is"
                    f" {number_text(float(upper.ravel()[0]), 5)} W/(m²·K).",
                )
            )
        if not chain.has_temperatures:
            continue
        for group in (chain.inner, chain.outer):
            for branch in group.branches:
                still = solution.number(group.surface_temperature) == solution.number(group.bulk)
                if still and chosen(branch, solution).needs_direction:
                    items.append(
                        OpenItem(
                            f"{branch.name} / direction / {where}",
                            "check",
                            f"{branch.name} ({where}): surface and bulk have one temperature; heated or"
                            " cooled is undetermined.",
                        )
                    )
    return tuple(items)
