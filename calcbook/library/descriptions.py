"""The one description of each kind of card: it drives reading, positions, nearest names and documentation."""

from __future__ import annotations

from calcbook.documents import Description, Key
from calcbook.library.cards import STANDINGS

SOURCE = Description(
    "a source",
    "a publication and what it supports",
    (
        Key("cite", "authors, title, place, year, pages", required=True),
        Key("for", "what of the card it supports", required=True),
        Key("standing", "how the figures stand", "choice", choices=STANDINGS, required=True),
    ),
)
LIMIT = Description(
    "a limit",
    "a condition for using the card",
    (
        Key("id", "name of the limit", required=True),
        Key("that", "the condition as a relation", "relation", required=True),
        Key(
            "level", "what a failed limit does", "choice", choices=("stop", "range", "caution"), required=True
        ),
        Key("because", "why the limit exists", required=True),
        Key("source", "number of the source, `common practice` or `from memory`", required=True),
        Key("standing", "standing, where it differs from that of the source", "choice", choices=STANDINGS),
    ),
)
CHECK_POINT = Description(
    "a check point",
    "given values and what must follow",
    (
        Key("given", "symbols and their values in SI units", "mapping", required=True),
        Key("gives", "symbols and the values that must follow", "mapping", required=True),
        Key("within", "relative deviation allowed", "number", required=True),
        Key("source", "where the reference values come from, and the reason of the deviation", required=True),
        Key("standing", "how the reference stands", "choice", choices=STANDINGS, required=True),
    ),
)
STATE = Description(
    "the state",
    "lifecycle of the card",
    (
        Key(
            "is",
            "trial, checked or withdrawn",
            "choice",
            choices=("trial", "checked", "withdrawn"),
            required=True,
        ),
        Key("since", "version that brought the state", "name", required=True),
        Key("successor", "the card that replaces a withdrawn one", "name"),
    ),
)
ACCURACY = Description(
    "the accuracy",
    "how good the method is said to be",
    (
        Key("within", "deviation", required=True),
        Key("coverage", "share of the data inside it", required=True),
        Key("stated by", "who says so", required=True),
        Key("standing", "how the figure stands", "choice", choices=STANDINGS, required=True),
    ),
)
TABLE = Description(
    "a table",
    "rows of figures found by symbols",
    (
        Key("by", "symbol: exact, step, linear or log-log", "mapping", required=True),
        Key(
            "outside",
            "what happens outside the rows",
            "choice",
            choices=("stop", "open item", "hold last"),
            required=True,
        ),
        Key("columns", "column names", "list", required=True),
        Key("rows", "one list of figures a row", "list", required=True),
    ),
)
NEED = Description(
    "a need",
    "a quantity that the card asks for",
    (
        Key("is", "quantity of the vocabulary, and its place", required=True),
        Key("one of", "the words or numbers it may take", "list"),
        Key("absent", "the value taken when nothing is given", "name"),
    ),
)
USE = Description(
    "a used card",
    "another card's result",
    (
        Key("method", "id of the card", "name", required=True),
        Key("with", "its needs given by relations of this card", "mapping"),
        Key("counts when", "condition under which its limits count", "relation"),
    ),
)
SUM = Description(
    "a summed line",
    "a sum over 0, 1, 2 …",
    (
        Key("gives", "symbol of the sum", "name", required=True),
        Key("over", "index symbol", "name", required=True),
        Key("terms", "number of terms", "number", required=True),
        Key("of", "the term as a relation", "relation", required=True),
    ),
)
SOLVE = Description(
    "a solved line",
    "the root of an equation",
    (
        Key("for", "symbol of the root", "name", required=True),
        Key("between", "lower and upper bound", "list", required=True),
        Key("start", "first value", "number", required=True),
        Key("sum", "a sum that the equation names, over values of the root", "mapping"),
        Key("equation", "left == right", "relation", required=True),
    ),
)
METHOD = Description(
    "a method card",
    "a published correlation",
    (
        Key("method", "id, the same as the file name", "name", required=True),
        Key("title", "published name", required=True),
        Key("gives", "symbol of the result", "name", required=True),
        Key(
            "closes on",
            "what it needs from the solution",
            "choice",
            choices=("nothing", "surface", "flux"),
            required=True,
        ),
        Key(
            "properties at",
            "place of the conductivity in h = Nu·λ/L_c",
            "choice",
            choices=("bulk", "film", "surface"),
        ),
        Key("needs", "symbol: quantity [at place]", "mapping", required=True),
        Key("constants", "symbol: figure with unit", "mapping"),
        Key("uses", "symbol: another card", "mapping"),
        Key("tables", "name: table", "mapping"),
        Key("relations", "the equations in order", "list", required=True),
        Key("limits", "conditions for using it", "list", required=True),
        Key("accuracy", "how good it is said to be", "mapping"),
        Key("assumes", "plain sentences for the record", "list", required=True),
        Key("family", "methods that share an ancestor share a family", "name", required=True),
        Key("sources", "publications", "list", required=True),
        Key("check points", "given values and what must follow", "list", required=True),
        Key("state", "lifecycle", "mapping", required=True),
        Key("notes", "disagreements settled in writing", "list"),
        Key("serves", "situations of the library that a book's own method is made for", "list"),
    ),
)
GROUP = Description(
    "a group",
    "a dimensionless group",
    (
        Key("is", "quantity of the vocabulary", required=True),
        Key("relation", "right-hand side", "relation", required=True),
    ),
)
CHOICE = Description(
    "a row of the choice table",
    "the first row whose condition holds is taken",
    (
        Key("when", "condition on the groups", "relation"),
        Key("use", "method id", "name", required=True),
        Key("because", "reason for the record", required=True),
    ),
)
FRICTION = Description(
    "the friction of a situation",
    "how the stream's pressure drop is found; it stands beside the film and never acts on it",
    (
        Key("needs", "symbol: quantity, for what the pressure drop alone asks for", "mapping"),
        Key("groups", "symbol: figure that is formed from needs, groups and properties", "mapping"),
        Key(
            "choose",
            "choice table of friction laws, on groups at bulk; absent: the card under `dp` has its own",
            "list",
        ),
        Key("dp", "method id of the card that gives the pressure drop", "name", required=True),
    ),
)
SITUATION = Description(
    "a situation card",
    "where a film acts",
    (
        Key("situation", "id, the same as the file name", "name", required=True),
        Key("title", "plain name", required=True),
        Key("shape", "geometries it fits", "list", required=True),
        Key("on", "surfaces it may act on", "list", required=True),
        Key(
            "flow",
            "forced, free, or forced and free",
            "choice",
            choices=("forced", "free", "forced and free"),
            required=True,
        ),
        Key(
            "changes phase",
            "what the fluid does at the surface: its stream is then saturated",
            "choice",
            choices=("condensing", "boiling"),
        ),
        Key("needs", "symbol: quantity", "mapping", required=True),
        Key("flow area", "right-hand side", "relation"),
        Key("characteristic length", "right-hand side", "relation", required=True),
        Key("groups", "symbol: group", "mapping", required=True),
        Key("choose", "choice table", "list", required=True),
        Key(
            "choose at",
            "place of the groups in the choice table",
            "choice",
            choices=("bulk", "film", "liquid film"),
            required=True,
        ),
        Key("methods", "every method of the situation", "list", required=True),
        Key("friction", "how the pressure drop is found", "mapping"),
        Key("assumes", "plain sentences for the record", "list", required=True),
        Key("sources", "publications", "list", required=True),
    ),
)
MATERIAL_TABLE = Description(
    "a conductivity table",
    "conductivity against temperature",
    (
        Key("T", "temperatures, rising", "list", required=True),
        Key("k", "conductivities", "list", required=True),
    ),
)
SPREAD = Description(
    "the spread",
    "how far sources differ",
    (
        Key("within", "deviation", required=True),
        Key("because", "why", required=True),
    ),
)
MATERIAL = Description(
    "a material card",
    "conductivity of a solid",
    (
        Key("material", "id, the same as the file name", "name", required=True),
        Key("title", "plain name with its UNS number", required=True),
        Key(
            "kind",
            "metal, insulation or other",
            "choice",
            choices=("metal", "insulation", "other"),
            required=True,
        ),
        Key("quantity", "what the table holds", "choice", choices=("wall conductivity",), required=True),
        Key("table", "conductivity against temperature", "mapping", required=True),
        Key(
            "outside",
            "what happens outside the rows",
            "choice",
            choices=("open item", "hold last"),
            required=True,
        ),
        Key("spread", "how far sources differ", "mapping", required=True),
        Key("standing", "how the figures stand", "choice", choices=STANDINGS, required=True),
        Key("sources", "publications", "list", required=True),
        Key("check points", "given values and what must follow", "list", required=True),
        Key("state", "lifecycle", "mapping", required=True),
        Key("notes", "what the reader must know", "list"),
    ),
)
