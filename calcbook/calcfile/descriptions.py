"""The one description of the calculation file and of book.yaml.

It drives reading, positions, nearest names, the documentation and the JSON Schema for editors.
"""

from __future__ import annotations

from calcbook.calcfile.survey_keys import SURVEY
from calcbook.documents import Description, Key

TERM_KINDS = ("film", "fouling", "wall", "contact", "gap", "radiation", "stated")

HEAD = Description(
    "calculation",
    "title block of the calculation",
    (
        Key(
            "number",
            "unique number: letters, digits, - _ . (at most 40)",
            "name",
            required=True,
            example="WC-101",
        ),
        Key("title", "what is calculated", required=True),
        Key("plant", "plant or site", required=True),
        Key("revision", "revision letter or number", "name", required=True, example="A"),
        Key("prepared by", "who prepared it", required=True),
        Key("date", "date of preparation, YYYY-MM-DD", "date", required=True),
    ),
)
REVISION = Description(
    "a revision",
    "one line of the revision history",
    (
        Key("revision", "revision letter or number", "name", required=True),
        Key("date", "YYYY-MM-DD", "date", required=True),
        Key("reason", "why the revision was made", required=True),
    ),
)
TOLERANCE = Description(
    "a tolerance",
    "a tolerance with its distribution",
    (
        Key("rectangular", "half-width within which every value is as likely", "quantity"),
        Key("triangular", "half-width of a distribution that falls evenly from the value", "quantity"),
        Key("standard", "standard deviation", "quantity"),
        Key("expanded", "expanded tolerance", "quantity"),
        Key("k", "coverage factor of the expanded tolerance", "number"),
        Key("degrees of freedom", "of a standard or expanded tolerance from few readings", "number"),
    ),
)
LINK = Description(
    "a link",
    "a result of another calculation",
    (
        Key("calculation", "number of the calculation", "name", required=True),
        Key("result", "name of its result", "name", required=True),
        Key("revision", "issued revision that the figure is taken from", "name"),
    ),
)
GIVEN = Description(
    "a given",
    "a named input quantity",
    (
        Key("value", "number with unit, as the source writes it", "name", example="15.75 mm"),
        Key("is", "what the symbol means"),
        Key("source", "document, revision and place the value comes from"),
        Key(
            "tolerance",
            "half-width, or {triangular: …}, {standard: …}, {expanded: …, k: 2}",
            "node",
            of=TOLERANCE,
        ),
        Key("from", "a result of another calculation, in place of a value", "mapping", of=LINK),
    ),
)
DERIVED = Description(
    "a derived quantity",
    "a relation over givens",
    (
        Key("relation", "right-hand side over givens", "relation", required=True),
        Key("is", "what the symbol means", required=True),
    ),
)
VERIFIED = Description(
    "a verification",
    "who verified an assumption, when and how",
    (
        Key("by", "who verified it", required=True),
        Key("date", "YYYY-MM-DD", "date", required=True),
        Key("evidence", "document that shows it", required=True),
    ),
)
ASSUMPTION = Description(
    "an assumption",
    "a statement taken as true",
    (
        Key("text", "the statement", required=True),
        Key("basis", "what it rests on", required=True),
        Key("verified", "no, or {by: …, date: …, evidence: …}", "node", of=VERIFIED),
    ),
)
SOURCED = Description(
    "a figure",
    "a value with its source",
    (
        Key("value", "number with unit", "name", required=True),
        Key("source", "document and place the value comes from"),
    ),
)
FLOW_STATE = Description(
    "a flow state",
    "state that a volume flow is measured at",
    (
        Key("temperature", "temperature of the stated volume", "node", of=SOURCED, required=True),
        Key("pressure", "pressure of the stated volume", "node", of=SOURCED, required=True),
    ),
)
FLOW = Description(
    "a flow",
    "a flow with its source",
    (*SOURCED.keys, Key("at", "state a volume flow is measured at", "mapping", of=FLOW_STATE)),
)
FLUID_TABLE = Description(
    "a fluid table",
    "properties against temperature",
    (
        Key("T", "temperatures, rising", "list"),
        Key("density", "density", "node"),
        Key("viscosity", "dynamic viscosity, or {astm d341: [[T, ν], [T, ν]]}", "node"),
        Key("conductivity", "thermal conductivity", "node"),
        Key("heat capacity", "specific heat capacity", "node"),
    ),
)
HUMID_AIR = Description(
    "humid air",
    "humid air by its relative humidity or its humidity ratio",
    (
        Key("relative humidity", "at the temperature and pressure of the stream", "node", of=SOURCED),
        Key("humidity ratio", "mass of water for a mass of dry air", "node", of=SOURCED),
    ),
)
PRODUCTS = ("crude oil", "gasoline", "kerosene", "fuel oil", "lubricating oil")
PETROLEUM = Description(
    "a petroleum liquid",
    "a petroleum liquid by its relative density",
    (
        Key("relative density", "at 60 degF against water at 60 degF", "node", of=SOURCED, required=True),
        Key("product", "what it is, for its expansion", "choice", choices=PRODUCTS),
    ),
)
FLUID = Description(
    "a fluid",
    "a mixture, humid air, a petroleum liquid, a table or constants",
    (
        Key("mixture", "names of the parts, such as ethylene glycol + water"),
        Key("mass fraction", "mass fraction of the first part", "node", of=SOURCED),
        Key("volume fraction", "volume fraction of the first part", "node", of=SOURCED),
        Key("humid air", "humid air: {relative humidity: 60 %}", "mapping", of=HUMID_AIR),
        Key("petroleum", "petroleum liquid: {relative density: 0.86}", "mapping", of=PETROLEUM),
        Key("viscosity", "viscosity of a petroleum liquid: {astm d341: [[T, ν], [T, ν]]}", "node"),
        Key("table", "properties against temperature", "mapping", of=FLUID_TABLE),
        Key("table file", "CSV file beside the calculation with a unit row", "name"),
        Key("constants", "properties that do not change", "mapping", of=FLUID_TABLE),
        Key("source", "document the properties come from"),
    ),
)
NON_CONDENSABLE = Description(
    "non-condensable gas",
    "gas that does not condense, in the vapour",
    (Key("mole fraction", "mole fraction in the vapour", "node", of=SOURCED, required=True),),
)
ARRANGEMENTS = (
    "counterflow",
    "parallel flow",
    "shell and tube",
    "crossflow both unmixed",
    "crossflow hot mixed",
    "crossflow cold mixed",
    "crossflow both mixed",
)
DUTY_SIDE = Description(
    "a side of the duty",
    "one stream from its inlet to its outlet",
    (
        Key("stream", "name of the stream", "name", required=True),
        Key(
            "inlet",
            "inlet temperature; none for a saturated stream; left out beside an outlet, it is found by heat balance",
            "node",
            of=SOURCED,
        ),
        Key("outlet", "outlet temperature; left out, it is found", "node", of=SOURCED),
    ),
)
DUTY = Description(
    "the duty",
    "what the unit has to transfer, and how its flows are arranged",
    (
        Key("arrangement", "how the flows are arranged", "choice", choices=ARRANGEMENTS, required=True),
        Key("shells", "shells in series, each of one shell pass and an even number of tube passes", "name"),
        Key("hot", "the stream that cools", "mapping", of=DUTY_SIDE, required=True),
        Key("cold", "the stream that warms", "mapping", of=DUTY_SIDE, required=True),
        Key("parts", "equal parts of the duty along the unit, each with its own U", "name", example="4"),
        Key(
            "heat flow",
            "heat flow that the unit has to transfer; left out, that of the heat balances, or what the unit reaches",
            "node",
            of=SOURCED,
        ),
        Key(
            "installed area",
            "area of the unit on the surface of U; left out, that of the geometry",
            "node",
            of=SOURCED,
        ),
        Key(
            "throttled",
            "side that the control throttles: its flow, or the pressure of a stream that changes phase",
            "choice",
            choices=("hot", "cold"),
        ),
    ),
)
STREAM = Description(
    "a stream",
    "a fluid with its state and flow",
    (
        Key("fluid", "name of a fluid, or a mixture, table or constants", "node", of=FLUID, required=True),
        Key(
            "temperature",
            "mean bulk temperature, or saturation; left out, the mean of its ends in the duty",
            "node",
            of=SOURCED,
        ),
        Key("pressure", "pressure; needed for gases", "node", of=SOURCED),
        Key("flow", "mass flow, volume flow or speed, told apart by its unit", "node", of=FLOW),
        Key("phase", "phase the engineer states", "choice", choices=("liquid", "gas")),
        Key("non-condensable", "non-condensable gas in a vapour", "mapping", of=NON_CONDENSABLE),
    ),
)
PLUGGED = Description(
    "plugged tubes",
    "tubes that carry no flow and transfer no heat",
    (
        Key("count", "how many", "name", required=True, example="6"),
        Key("source", "document that says so"),
    ),
)
GEOMETRY = Description(
    "geometry",
    "shape and dimensions of the surface",
    (
        Key("shape", "tube, plane or sphere", "choice", choices=("tube", "plane", "sphere"), required=True),
        Key("inside diameter", "bore of the tube", "node", of=SOURCED, quantity="inside diameter"),
        Key(
            "outside diameter",
            "outside diameter of the tube",
            "node",
            of=SOURCED,
            quantity="outside diameter",
        ),
        Key("length", "heated length of one tube", "node", of=SOURCED, quantity="length"),
        Key("parallel", "tubes that share the flow", "node", of=SOURCED, quantity="tubes in parallel"),
        Key("height", "height of a plane wall", "node", of=SOURCED, quantity="height"),
        Key("width", "width of a plane wall", "node", of=SOURCED, quantity="width"),
        Key("area", "area of a plane wall", "node", of=SOURCED, quantity="area"),
        Key("perimeter", "perimeter of a plane wall", "node", of=SOURCED, quantity="perimeter"),
        Key("tubes", "tubes of a bundle, in place of parallel", "node", of=SOURCED, quantity="tubes"),
        Key("passes", "tube passes of a bundle", "node", of=SOURCED, quantity="tube passes"),
        Key("plugged", "plugged tubes of a bundle: {count: 6, source: …}", "mapping", of=PLUGGED),
        Key("effective length", "length that transfers heat", "node", of=SOURCED, quantity="length"),
    ),
)
DEPOSIT = Description(
    "a deposit",
    "a fouling layer by thickness",
    (
        Key(
            "thickness",
            "thickness of the layer; it follows from the resistance where that grows",
            "node",
            of=SOURCED,
            quantity="thickness",
        ),
        Key(
            "conductivity",
            "conductivity of the layer",
            "node",
            of=SOURCED,
            quantity="wall conductivity",
            required=True,
        ),
        Key("narrows", "whether it narrows the bore", "flag"),
    ),
)
FOULING_SPECIFIED = Description(
    "a specified fouling",
    "fouling of the whole unit, for the fouling terms that state no resistance",
    (
        Key("cleanliness", "U in service over U clean", "node", of=SOURCED, quantity="ratio"),
        Key("excess surface", "U clean over U in service, less one", "node", of=SOURCED, quantity="ratio"),
        Key(
            "split",
            "share of every open fouling term; inside and outside stand for the only one there",
            "mapping",
            of=Description("a split", "", free=Key("<term>", "share of a fouling term", "node", of=SOURCED)),
        ),
    ),
)
GROWTH = Description(
    "a growth",
    "a fouling resistance that grows in service",
    (
        Key("model", "method card of the growth, such as kern-seaton-1959", "name", required=True),
        Key(
            "after",
            "time in service since the last cleaning",
            "node",
            of=SOURCED,
            quantity="service time",
            required=True,
        ),
    ),
    free=Key("<symbol>", "figure that the card of the growth needs", "node", of=SOURCED),
)
TIME_IN_SERVICE = Description(
    "a time in service",
    "the unit followed from one cleaning on",
    (
        Key("until", "end of the table", "node", of=SOURCED, quantity="service time", required=True),
        Key("steps", "rows of the table, the first at the cleaned unit", "name", required=True, example="13"),
    ),
)
CLEANING = Description(
    "a cleaning",
    "what one cleaning takes and costs",
    (
        Key(
            "duration",
            "time out of service",
            "node",
            of=SOURCED,
            quantity="cleaning time",
            required=True,
        ),
        Key("currency", "word for the money of this calculation, such as EUR; nothing is converted", "name"),
        Key(
            "cost of one cleaning",
            "money for one cleaning, with the production that is lost in it",
            "node",
            of=SOURCED,
            quantity="cleaning cost",
        ),
        Key(
            "price of heat",
            "money for the heat that fouling loses",
            "node",
            of=SOURCED,
            quantity="price of heat",
        ),
        Key(
            "loss against",
            "what lost heat is counted from; left out, the cleaned unit",
            "choice",
            choices=("cleaned unit", "duty"),
        ),
    ),
)
FINS = Description(
    "fins",
    "fins on the surface that a film acts on",
    (
        Key("shape", "annular or straight", "choice", choices=("annular", "straight"), required=True),
        Key("height", "from the root to the tip", "node", of=SOURCED, quantity="fin height", required=True),
        Key("thickness", "of one fin", "node", of=SOURCED, quantity="fin thickness", required=True),
        Key("pitch", "distance of fins at the root", "node", of=SOURCED, quantity="fin pitch"),
        Key("count", "straight fins around a tube, not the pitch", "node", of=SOURCED, quantity="fins"),
        Key("material", "material card of the fins", "name"),
        Key("conductivity", "of the fins", "node", of=SOURCED, quantity="wall conductivity"),
        Key("tip", "whether the tip exchanges heat", "choice", choices=("convective", "adiabatic")),
        Key("method", "method of the fin efficiency", "name"),
    ),
)


def term_description() -> Description:
    """One entry of the resistance list (it may hold parallel terms, so it describes itself)."""
    return TERM


TERM = Description(
    "a term",
    "one entry of the resistance list",
    (
        Key("name", "name of the term", "name"),
        Key("kind", "what resists", "choice", choices=TERM_KINDS),
        Key("parallel", "terms side by side in place of one", "list", of=term_description),
        Key("stream", "stream of the film", "name"),
        Key("situation", "where the film acts", "name"),
        Key("method", "method that is forced", "name"),
        Key(
            "method factor",
            "factor on the coefficient of the method",
            "node",
            of=SOURCED,
            quantity="method factor",
        ),
        Key("with", "what the situation needs and the geometry does not give", "mapping"),
        Key("coefficient", "stated film coefficient", "node", of=SOURCED, quantity="film coefficient"),
        Key("resistance", "stated resistance per area", "node", of=SOURCED, quantity="area resistance"),
        Key("on", "its surface: inside, outside, outside of <wall>, bare, total finned", "name"),
        Key("temperature", "bulk temperature of a stated film", "node", of=SOURCED, quantity="temperature"),
        Key("material", "material card of a wall", "name"),
        Key("conductivity", "stated wall conductivity", "node", of=SOURCED, quantity="wall conductivity"),
        Key("thickness", "wall thickness", "node", of=SOURCED, quantity="thickness"),
        Key(
            "outside diameter",
            "outside diameter of the wall",
            "node",
            of=SOURCED,
            quantity="outside diameter",
        ),
        Key("deposit", "fouling layer by thickness", "mapping", of=DEPOSIT),
        Key("service", "service of an allowance, to be held against what is typical of it", "name"),
        Key("emissivity", "emissivity of the surface", "node", of=SOURCED, quantity="emissivity"),
        Key(
            "surroundings", "temperature the surface radiates to", "node", of=SOURCED, quantity="temperature"
        ),
        Key("includes", "terms that a stated coefficient already includes", "list"),
        Key("holds for", "range in which a stated value holds: {symbol: low .. high}", "mapping"),
        Key("scales with", "factor on a stated value, as a relation", "relation"),
        Key("growth", "fouling resistance that grows in service", "mapping", of=GROWTH),
        Key("fins", "fins on the surface that the film acts on", "mapping", of=FINS),
        Key("fluid", "fluid that a gap holds", "node", of=FLUID),
        Key("phase", "phase of the fluid of a gap", "choice", choices=("liquid", "gas")),
        Key("pressure", "pressure of the fluid of a gap", "node", of=SOURCED, quantity="pressure"),
        Key(
            "inner emissivity",
            "emissivity of the inner side of a gap",
            "node",
            of=SOURCED,
            quantity="emissivity",
        ),
        Key(
            "outer emissivity",
            "emissivity of the outer side of a gap",
            "node",
            of=SOURCED,
            quantity="emissivity",
        ),
        Key(
            "vapour velocity", "speed of a condensing vapour", "node", of=SOURCED, quantity="vapour velocity"
        ),
    ),
)
# Which keys a term of each kind may have: a key that would have no effect is a fault.
_STATED = ("coefficient", "resistance", "on")
GAP_SIDES = ("inner emissivity", "outer emissivity")
TERM_KEYS = {
    "film": (
        "stream",
        "situation",
        "method",
        "method factor",
        "with",
        "vapour velocity",
        *_STATED,
        "temperature",
        "includes",
        "holds for",
        "scales with",
        "fins",
    ),
    "fouling": (*_STATED, "deposit", "growth", "service"),
    "wall": ("material", "conductivity", "thickness", "outside diameter", "resistance", "on"),
    "contact": _STATED,
    "gap": ("situation", "method", "with", "fluid", "phase", "pressure", "thickness", *GAP_SIDES),
    "radiation": ("emissivity", "surroundings", "method"),
    "stated": _STATED,
}
# Pairs of which only one can stand on a term.
TERM_CONFLICTS = (
    ("coefficient", "resistance"),
    ("stream", "temperature"),
    ("coefficient", "situation"),
    ("coefficient", "method"),
    ("coefficient", "method factor"),
    ("coefficient", "with"),
    ("coefficient", "vapour velocity"),
    ("resistance", "situation"),
    ("resistance", "method"),
    ("resistance", "method factor"),
    ("resistance", "with"),
    ("resistance", "deposit"),
    ("coefficient", "deposit"),
    ("resistance", "growth"),
    ("coefficient", "growth"),
    ("resistance", "material"),
    ("resistance", "conductivity"),
    ("material", "conductivity"),
    ("thickness", "outside diameter"),
)
CRITERION = Description(
    "a criterion",
    "an acceptance criterion",
    (
        Key(
            "that", "<result> <op> <quantity or given>", required=True, example="U_service >= 1000 W/(m^2 K)"
        ),
        Key("source", "document the criterion comes from"),
        Key(
            "probability",
            "how sure it must be over the samples of `uncertainty:`, a share such as 95 %",
            "name",
            example="95 %",
        ),
    ),
)
REPORT = Description(
    "report",
    "how results are reported",
    (
        Key(
            "U on",
            "surface of the U: inside, outside, outside of <wall>, bare, total finned",
            "name",
            required=True,
        ),
        Key("units", "SI, US customary, or a unit per quantity", "node"),
        Key("service", "service of the unit, for U to be held against what is typical of it", "name"),
    ),
)
ACCEPT = Description(
    "an accepted check",
    "the engineer's answer to a failed check",
    (
        Key("check", "id of the check", "name", required=True),
        Key("in", "all, a condition, a case, or a case with a condition behind it", "name"),
        Key("down to", "lowest value of the checked figure that is accepted", "name"),
        Key("up to", "highest value of the checked figure that is accepted", "name"),
        Key("because", "the reason", required=True),
        Key("by", "who accepts it", required=True),
        Key("date", "YYYY-MM-DD", "date", required=True),
    ),
)
CORRELATION = Description(
    "a correlation",
    "two givens whose errors go together",
    (
        Key("between", "the two givens", "list", required=True),
        Key("r", "correlation coefficient, -1 to 1", "number", required=True),
        Key("source", "what shows that they go together"),
    ),
)
UNCERTAINTY = Description(
    "uncertainty",
    "uncertainty of results by sampling, beside the budget that every stated tolerance gives",
    (
        Key("of", "results, such as U_service; absent: U and what acceptance names", "list"),
        Key("coverage", "coverage probability; absent: 95 %", "name", example="95 %"),
        Key(
            "digits",
            "significant digits of a standard uncertainty that the sampling makes sure of",
            "choice",
            choices=("1", "2"),
        ),
        Key("case", "the case whose results are meant; absent: the base case", "name"),
        Key("correlation", "givens whose errors go together", "list", of=CORRELATION),
    ),
)
SWEPT = Description(
    "a swept given",
    "a given and the figures that it takes, evenly spaced",
    (
        Key("from", "first figure", "name", required=True, example="0 m^2 K/W"),
        Key("to", "last figure", "name", required=True),
        Key("steps", "how many figures, both ends counted", "name", required=True, example="13"),
    ),
)
SWEEP = Description(
    "a sweep",
    "one or two givens varied over a range",
    (
        Key(
            "of",
            "names of the results shown; absent: U in service, U clean and those of the acceptance",
            "list",
        ),
    ),
    free=Key("<symbol>", "symbol of a given", "mapping", of=SWEPT),
)
FILE = Description(
    "the calculation file",
    "one calculation",
    (
        Key("calculation", "title block", "mapping", of=HEAD, required=True),
        Key("purpose", "what decision the result serves", required=True),
        Key("revisions", "revision history", "list", of=REVISION),
        Key(
            "givens",
            "named input quantities",
            "mapping",
            of=Description("givens", "", free=Key("<symbol>", "symbol of a given", "mapping", of=GIVEN)),
        ),
        Key(
            "derived",
            "relations over givens",
            "mapping",
            of=Description(
                "derived", "", free=Key("<symbol>", "symbol of a derived quantity", "mapping", of=DERIVED)
            ),
        ),
        Key(
            "assumptions",
            "statements taken as true",
            "mapping",
            of=Description("assumptions", "", free=Key("<id>", "A1, A2 …", "mapping", of=ASSUMPTION)),
        ),
        Key(
            "fluids",
            "fluids of this calculation",
            "mapping",
            of=Description("fluids", "", free=Key("<name>", "name of a fluid", "mapping", of=FLUID)),
        ),
        Key(
            "streams",
            "fluids with state and flow",
            "mapping",
            of=Description("streams", "", free=Key("<name>", "name of a stream", "mapping", of=STREAM)),
        ),
        Key("geometry", "shape and dimensions", "mapping", of=GEOMETRY, required=True),
        Key("resistances", "terms in order, from the inside to the outside", "list", of=TERM, required=True),
        Key("acceptance", "criteria stated before the result", "list", of=CRITERION),
        Key("report", "how results are reported", "mapping", of=REPORT, required=True),
        Key(
            "cases",
            "named variations of the givens",
            "mapping",
            of=Description("cases", "", free=Key("<case>", "name of a case", "mapping")),
        ),
        Key("accept", "answers to failed checks", "list", of=ACCEPT),
        Key("uncertainty", "uncertainty of results by sampling", "mapping", of=UNCERTAINTY),
        Key("duty", "duty of the unit", "mapping", of=DUTY),
        Key(
            "fouling specified as",
            "fouling of the whole unit, split over its terms",
            "mapping",
            of=FOULING_SPECIFIED,
        ),
        Key(
            "time in service",
            "table over the time since the last cleaning, where fouling grows",
            "mapping",
            of=TIME_IN_SERVICE,
        ),
        Key("cleaning", "what one cleaning takes and costs, for the interval", "mapping", of=CLEANING),
        Key("sweep", "sweep over one or two givens", "mapping", of=SWEEP),
        Key(
            "evaluate at",
            "named places along the unit, each with the givens that differ there",
            "mapping",
            of=Description("places", "", free=Key("<place>", "name of a place", "mapping")),
        ),
        Key("survey", "plant data of the unit", "mapping", of=SURVEY),
    ),
)
PERSON = Description(
    "a person",
    "a person of the book",
    (
        Key("name", "name as it is signed", required=True),
        Key("also", "other spellings", "list"),
    ),
)
BOOK_LIMITS = Description(
    "limits",
    "limits of the site",
    (
        Key("surface temperature", "hottest surface a person may touch", "node"),
        Key("excess surface", "largest excess surface due to fouling", "node"),
    ),
)
BOOK = Description(
    "the book file",
    "settings of a book",
    (
        Key("book", "name of the book", required=True),
        Key("site pressure", "absolute pressure of the site", "node"),
        Key("units", "SI or US customary", "choice", choices=("SI", "US customary")),
        Key("output", "folder of the records, from the book's folder", "name"),
        Key(
            "revisions",
            "scheme of revision names",
            "choice",
            choices=("letters", "numbers", "letters then numbers"),
        ),
        Key("roles", "roles that sign", "list"),
        Key(
            "people",
            "people by id",
            "mapping",
            of=Description("people", "", free=Key("<id>", "id of a person", "mapping", of=PERSON)),
        ),
        Key("limits", "limits of the site", "mapping", of=BOOK_LIMITS),
        Key(
            "open items",
            "what open items block",
            "choice",
            choices=("refuse final issue", "refuse any issue"),
        ),
    ),
)
