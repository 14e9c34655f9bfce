"""Streams: their fluid, state and flow, made into figures of the chain."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from calcbook import properties
from calcbook.calcfile.calculation import FluidText, Stream, Value
from calcbook.calcfile.empty import is_empty
from calcbook.chain.fluids import BoilingOperation, FluidSource, PropertyOperation
from calcbook.chain.petroleum import petroleum
from calcbook.chain.scope import Scope
from calcbook.chain.types import ChainCheck, StreamState
from calcbook.formulas import parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import practice_limit
from calcbook.properties import LAW_REACH, PropertyFault
from calcbook.quantities import QuantityFault, as_kind, si_unit

SATURATION = "saturation"
HUMIDITY_RATIO = "humidity ratio"
# From the relative humidity, with the molar mass of water over that of dry air (ASHRAE Handbook Fundamentals
# 2017, chapter 1).
HUMIDITY = "0.621945*phi*x_ws/(1 - phi*x_ws)"
FLOW_KINDS = ("mass flow", "volume flow", "speed")


def lay_out_stream(scope: Scope, stream: Stream, library: Library, mean: str = "") -> StreamState | None:
    """The state and flow of a stream as ids; None when its fluid or temperature cannot be read.

    ``mean`` is the id of the temperature of a stream that states none: the mean of its ends.
    """
    owner = f"stream {stream.name}"
    fluid = fluid_source(scope, stream.fluid, library) if stream.fluid is not None else None
    on_line = is_saturation(scope, stream.temperature)
    temperature = "" if on_line else scope.value(stream.temperature, "temperature", owner, "temperature")
    temperature = temperature or (mean if stream.temperature is None else "")
    pressure = scope.value(stream.pressure, "pressure", owner, "pressure")
    saturation = temperature if fluid is not None and not pressure and has_saturation(fluid) else ""
    if on_line:
        temperature = saturation = _saturation(scope, stream, fluid, pressure)
    if fluid is None or not temperature:
        return None
    fraction = ""
    assert stream.fluid is not None
    if fluid.text.kind == "humid air":
        fraction = _humidity(scope, stream, fluid, temperature, pressure)
        if not fraction:
            return None
    elif fluid.text.fraction is not None:
        kind = fluid.text.basis if fluid.text.kind == "petroleum" else "mass fraction"
        fraction = scope.value(fluid.text.fraction, kind, owner, fluid.text.basis)
    flow_kind = _flow_kind(scope, stream.flow)
    flow = scope.value(stream.flow, flow_kind, owner, "flow") if flow_kind else ""
    if stream.flow is not None and not flow:
        flow, flow_kind = scope.unread(vocabulary()["speed"]), "speed"
    place = stream.temperature.place if stream.temperature is not None else stream.place
    state = StreamState(
        stream.name,
        fluid,
        provider(scope, fluid),
        stream.phase,
        temperature,
        pressure,
        fraction,
        flow,
        flow_kind,
        "",
        place,
    )
    mass_flow = _mass_flow(scope, stream, state) if flow else ""
    share = scope.value(stream.non_condensable, "mole fraction", owner, "non-condensable")
    return StreamState(
        state.name,
        state.fluid,
        state.fluid_name,
        state.phase,
        temperature,
        pressure,
        fraction,
        flow,
        state.flow_kind,
        mass_flow,
        place,
        saturation,
        share,
    )


def is_saturation(scope: Scope, value: Value | None) -> bool:
    """Whether the word `saturation` stands where a temperature is wanted, and is no symbol of the file."""
    calculation = scope.calculation
    return (
        value is not None
        and value.symbol == SATURATION
        and SATURATION not in (*calculation.givens, *calculation.derived, *calculation.broken)
    )


def has_saturation(fluid: FluidSource) -> bool:
    """Whether a fluid has a saturation line: a pure fluid with a vapour side."""
    return fluid.text.kind == "name" and fluid.state(None, None, "liquid").has_vapour_pressure


def _saturation(scope: Scope, stream: Stream, fluid: FluidSource | None, pressure: str) -> str:
    """The id of the saturation temperature of a stream's pressure; empty after a fault."""
    assert stream.temperature is not None
    place = stream.temperature.place
    if fluid is None:
        return ""
    if not has_saturation(fluid):
        scope.collector.add(
            "saturation-unknown",
            place,
            f"{fluid.text.name} has no saturation line",
            found="temperature: saturation",
            expected="a pure fluid, or a temperature",
        )
        return ""
    for key, there in (("pressure", pressure), ("phase", stream.phase)):
        if not there:
            scope.collector.add(
                "key-missing",
                place,
                f"a saturated stream states its {key}",
                expected="pressure: … and phase: liquid or gas on the stream",
            )
    if not pressure or not stream.phase:
        return ""
    # A second saturated stream takes a symbol of its own, so that the heat flux names both.
    number = sum(isinstance(step.operation, BoilingOperation) for step in scope.steps.values()) + 1
    symbol = "T_sat" if number == 1 else f"T_sat{number}"
    return scope.step(
        f"stream {stream.name}/T_sat",
        symbol,
        "saturation temperature",
        f"stream {stream.name}",
        BoilingOperation(fluid),
        {"p": pressure},
        provider(scope, fluid),
        vocabulary()["saturation temperature"],
    )


def _humidity(scope: Scope, stream: Stream, fluid: FluidSource, temperature: str, pressure: str) -> str:
    """The id of the humidity ratio of a stream of humid air; empty after a fault."""
    assert stream.fluid is not None and stream.fluid.fraction is not None
    owner, text = f"stream {stream.name}", stream.fluid
    if not pressure:
        scope.collector.add(
            "key-missing",
            text.place,
            f"the humid air of stream {stream.name} has no pressure",
            expected="pressure: … on the stream",
        )
        return ""
    scope.assume(
        f"{owner}/humid air",
        f"The mass flow of {stream.name} is that of the humid air: its density and heat"
        " capacity are those of a kilogram of humid air.",
        "its dry air and its water flow together",
        owner,
    )
    scope.assume(
        f"{owner}/humidity",
        f"{stream.name} keeps its water at a surface below its dew point, for its properties there.",
        "its films are for a gas that does not condense; the wall is checked",
        owner,
    )
    assert text.fraction is not None
    stated = scope.value(text.fraction, text.basis, owner, text.basis)
    humidity = _si_of(scope, text.fraction)
    if text.basis != HUMIDITY_RATIO and humidity is not None and humidity > 1.0:
        scope.collector.add(
            "fraction-outside",
            text.fraction.place,
            "a relative humidity lies from 0 to 100 %",
            found=f"{humidity:.6g}",
            expected="such as 60 %",
        )
        return ""
    if text.basis == HUMIDITY_RATIO:
        return stated
    name = properties.SATURATION_FRACTION
    operation = PropertyOperation(fluid, name, "gas", True, False)
    fraction = scope.step(
        f"{owner}/{name}",
        "x_ws",
        "mole fraction of water in saturated air",
        owner,
        operation,
        {"T": temperature, "p": pressure},
        fluid.at_fraction(None).provider,
        vocabulary()[name],
    )
    return scope.relation_step(
        f"{owner}/humidity ratio",
        "W",
        "humidity ratio",
        owner,
        parse_expression(HUMIDITY),
        {"phi": stated, "x_ws": fraction},
        "mole fractions; 0.621945 is the molar mass of water over that of dry air",
        HUMIDITY_RATIO,
    )


def provider(scope: Scope, fluid: FluidSource) -> str:
    """What gives a fluid's properties, in words. A fault where the fluid cannot be made."""
    fraction: float | None = None
    if fluid.text.kind != "humid air" and fluid.text.fraction is not None:
        fraction = _si_of(scope, fluid.text.fraction)
        if fraction is None:
            return fluid.text.name
    try:
        return fluid.at_fraction(fraction).provider
    except PropertyFault as error:
        scope.collector.add(
            error.code, fluid.text.place, error.message, expected=error.expected, nearest=error.nearest
        )
        return fluid.text.name


def _si_of(scope: Scope, value: Value) -> float | None:
    if value.symbol:
        given = scope.calculation.givens.get(value.symbol)
        return given.value.quantity.value if given is not None and given.value.quantity is not None else None
    return value.quantity.value if value.quantity is not None else None


def fluid_source(scope: Scope, text: FluidText, library: Library) -> FluidSource | None:
    """The property fluid behind a fluid of the file. Faults: what the properties room raises."""
    try:
        if text.kind == "name":
            return FluidSource(text, properties.pure(text.name))
        if text.kind == "mixture":
            return FluidSource(text)
        if text.kind == "humid air":
            return FluidSource(replace(text, basis=HUMIDITY_RATIO), make=properties.humid_air)
        if text.kind == "petroleum":
            law = properties.astm_d341(_astm_points(scope, text)) if text.astm else None
            return FluidSource(text, make=petroleum(library, text, law))
        _check_fluid_source(scope, text)
        if text.kind == "constants":
            return FluidSource(text, properties.constant(_constants(scope, text), name=text.name))
        return FluidSource(text, _tabulated(scope, text))
    except PropertyFault as error:
        scope.collector.add(
            error.code, text.place, error.message, expected=error.expected, nearest=error.nearest
        )
        return None


def _check_fluid_source(scope: Scope, text: FluidText) -> None:
    if is_empty(text.source):
        scope.open(f"fluid {text.name}/source", "source", f"The properties of {text.name} have no source.")


def _figures(scope: Scope, values: tuple[Value, ...], kind_name: str) -> list[float]:
    kind = vocabulary()[kind_name]
    figures = []
    for value in values:
        if value.quantity is None:
            scope.collector.add(
                "unit-missing",
                value.place,
                f"a {kind.name} is wanted here",
                found=value.text,
                expected=f"a number with its unit, such as 1 {kind.unit}",
            )
            continue
        try:
            figures.append(as_kind(value.quantity, kind).value)
        except QuantityFault as error:
            scope.collector.take([error.within(value.place)])
    return figures


def _constants(scope: Scope, text: FluidText) -> dict[str, float]:
    constants = {}
    for name, values in text.columns.items():
        figures = _figures(scope, values, "temperature" if name == "T" else name)
        if figures and name != "T":
            constants[name] = figures[0]
    return constants


def _tabulated(scope: Scope, text: FluidText) -> properties.Fluid:
    temperatures = _figures(scope, text.columns.get("T", ()), "temperature")
    columns = {}
    for name, values in text.columns.items():
        if name == "T":
            continue
        figures = _figures(scope, values, name)
        if len(figures) == 1 and not temperatures:
            columns[name] = ([273.15, 673.15], [figures[0], figures[0]])
        elif len(figures) == len(temperatures):
            columns[name] = (temperatures, figures)
    if not text.astm:
        return properties.tabulated(columns, name=text.name)
    points = _astm_points(scope, text)
    columns["kinematic viscosity"] = ([one for one, _ in points], [two for _, two in points])
    return properties.tabulated(columns, viscosity_law="astm d341", name=text.name)


def viscosity_checks(scope: Scope, streams: Mapping[str, StreamState]) -> list[ChainCheck]:
    """How far a viscosity after ASTM D341 is carried beyond its two points, at the bulk of each stream."""
    kelvin = vocabulary()["temperature"].dimension
    checks = []
    for state in streams.values():
        text, owner = state.fluid.text, f"stream {state.name}"
        if not text.astm or not state.temperature:
            continue
        ends = sorted(point for point, _ in _astm_points(scope, text))
        bounds = {
            "T_low": scope.constant(f"{owner}/viscosity from", ends[0], kelvin),
            "T_high": scope.constant(f"{owner}/viscosity to", ends[1], kelvin),
            "reach": scope.constant(f"{owner}/viscosity reach", LAW_REACH, kelvin),
        }
        for name, that, level, because in (
            (
                "between the points",
                "T_low <= T <= T_high",
                "caution",
                "beyond its points it is carried on by the law",
            ),
            (
                "reach of the points",
                "T_low - reach <= T <= T_high + reach",
                "range",
                f"more than {LAW_REACH:g} K beyond its points the law is no measurement of this liquid",
            ),
        ):
            limit = practice_limit(f"viscosity {name}", that, level, because, state.place)
            symbols = limit.that.symbols
            inputs = {"T": state.temperature, **{one: bounds[one] for one in symbols if one != "T"}}
            checks.append(ChainCheck(f"{owner} / astm d341 / {limit.id}", owner, "astm d341", limit, inputs))
    return checks


def _astm_points(scope: Scope, text: FluidText) -> list[tuple[float, float]]:
    """The two points of a D341 viscosity in SI. Raises ``PropertyFault`` where one cannot be read."""
    points = [
        (_figures(scope, (one,), "temperature"), _figures(scope, (two,), "kinematic viscosity"))
        for one, two in text.astm
    ]
    if not all(one and two for one, two in points):
        raise PropertyFault(
            "astm-points",
            "the two points of the D341 viscosity cannot be read",
            expected="[[40 degC, 46 mm^2/s], [100 degC, 6.8 mm^2/s]]",
        )
    return [(one[0], two[0]) for one, two in points]


def _flow_kind(scope: Scope, flow: Value | None) -> str:
    """Mass flow, volume flow or speed, told apart by the unit; a fault when it is none of them."""
    if flow is None:
        return ""
    if flow.is_broken or flow.symbol in scope.calculation.broken:
        return ""
    if flow.symbol:
        given = scope.calculation.givens.get(flow.symbol)
        dim = (
            given.value.quantity.dimension
            if given is not None and given.value.quantity
            else scope.dimensions.get(f"derived/{flow.symbol}")
        )
        if dim is None and flow.symbol not in scope.calculation.derived:
            scope.value(flow, "mass flow", "stream", "flow")
        if dim is None:
            return ""
    else:
        dim = flow.quantity.dimension if flow.quantity is not None else None
    for name in FLOW_KINDS:
        if vocabulary()[name].dimension == dim:
            return name
    scope.collector.add(
        "unit-dimension",
        flow.place,
        "this is no flow",
        found=_stated(scope, flow),
        expected="a mass flow (kg/s), a volume flow (m^3/h) or a speed (m/s)",
    )
    return ""


def _stated(scope: Scope, flow: Value) -> str:
    """What stands behind a flow: its own text, that of its given, or the unit of its derived figure."""
    given = scope.calculation.givens.get(flow.symbol)
    if given is not None:
        return given.value.text
    derived = scope.dimensions.get(f"derived/{flow.symbol}")
    return si_unit(derived) if derived is not None else flow.text


def _mass_flow(scope: Scope, stream: Stream, state: StreamState) -> str:
    """The id of the mass flow, from a volume flow at its stated state or at the bulk state."""
    owner = f"stream {stream.name}"
    if stream.flow is not None and stream.flow.stated_at and state.flow_kind != "volume flow":
        scope.collector.add(
            "flow-state-idle",
            stream.flow.place,
            f"`at:` states where a volume flow is measured, and the flow of {stream.name} is a {state.flow_kind}",
            found=stream.flow.text,
            expected="the flow without `at:`, or a volume flow (m^3/h)",
        )
    if state.flow_kind == "mass flow":
        return state.flow
    if state.flow_kind == "speed":
        return ""
    assert stream.flow is not None
    operation = state.operation("density")
    inputs = state.state_inputs(state.temperature)
    where = "the bulk state"
    if stream.flow.stated_at:
        inputs = {
            "T": scope.value(
                stream.flow.stated_at.get("temperature"), "temperature", owner, "flow temperature"
            ),
            "p": scope.value(stream.flow.stated_at.get("pressure"), "pressure", owner, "flow pressure"),
        }
        if state.fraction:
            inputs["w"] = state.fraction
        if not all(inputs.values()):
            return ""
        operation = PropertyOperation(state.fluid, "density", state.phase, True, bool(state.fraction))
        where = "its stated state"
    else:
        scope.assume(
            f"{owner}/flow",
            f"The volume flow of {stream.name} is taken at its bulk state.",
            "no other state is stated",
            owner,
        )
    density = scope.step(
        f"{owner}/density of flow",
        "rho_V",
        f"density at {where}",
        owner,
        operation,
        inputs,
        state.fluid_name,
        vocabulary()["density"],
    )
    return scope.relation_step(
        f"{owner}/mass flow",
        "m",
        "mass flow",
        owner,
        parse_expression("V*rho_V"),
        {"V": state.flow, "rho_V": density},
        "volume flow and density",
        "mass flow",
    )
