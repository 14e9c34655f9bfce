"""The keys of `survey:`, the plant data of a unit: one description, as for every mapping of the file."""

from __future__ import annotations

from calcbook.documents import Description, Key

TIME = Description(
    "the time of a survey",
    "the column that holds the time of each row",
    (
        Key("column", "head of the column", "name", required=True),
        Key(
            "unit",
            "unit of a time that is a number; absent: date and time, YYYY-MM-DD hh:mm, no zone",
            "name",
        ),
    ),
)
COLUMN = Description(
    "a column of a survey",
    "the column that gives a given row by row",
    (
        Key("column", "head of the column", "name", required=True),
        Key("unit", "unit of its figures", "name", required=True, example="degC"),
        Key("range", "what the sensor can show: low .. high", "name", example="0 degC .. 150 degC"),
        Key("drift per year", "how far the sensor may wander in a year", "name", example="0.1 K"),
        Key("source", "document the range and the drift come from"),
    ),
)
COLUMNS = Description(
    "the columns of a survey",
    "givens by the column that gives them",
    free=Key("<symbol>", "symbol of a given", "node", of=COLUMN),
)
HEAT_LOSS = Description(
    "a heat loss",
    "what the hot stream gives to the surroundings",
    (
        Key("value", "part of the hot stream's heat that is lost", "name", required=True, example="1 %"),
        Key("tolerance", "half-width of that part", "name", example="1 %"),
        Key("source", "document it comes from"),
    ),
)
RULES = Description(
    "the rules of a survey",
    "the limits beyond which a row is rejected",
    (
        Key("closure", "largest heat balance closure, either sign", "name", example="8 %"),
        Key("steady state", "largest change of a temperature from the row before", "name", example="1.5 K"),
        Key("flow ratio", "flow to the flow of the givens: low .. high", "name", example="0.6 .. 1.4"),
        Key(
            "gap", "time without rows that is told; rows across it are not compared", "name", example="3 days"
        ),
        Key("source", "document the limits come from"),
    ),
)
CLEANING = Description(
    "a cleaning",
    "when the unit was cleaned",
    (
        Key("at", "end of the cleaning, in the way the time column is written", "name", required=True),
        Key("source", "document that says so"),
    ),
)
ZERO = Description(
    "the zero of a survey",
    "the data after each cleaning on which zero is anchored",
    (
        Key("rows", "so many kept rows after each cleaning", "name", example="10"),
        Key("over", "the kept rows of this time after each cleaning", "name", example="5 days"),
        Key("source", "document that says so"),
    ),
)
PROPOSAL = Description(
    "a proposal",
    "the allowance that is proposed from the fit",
    (
        Key("after", "time since cleaning that it is meant for", "name", required=True, example="12 months"),
        Key("percentile", "how sure it is to be large enough", "name", required=True, example="90 %"),
        Key("source", "document that says so"),
    ),
)
SURVEY = Description(
    "the survey",
    "plant data of the unit: fouling found row by row, and the allowance it proposes",
    (
        Key("file", "CSV file beside the calculation, heads in its first row", "name", required=True),
        Key("source", "where the data come from"),
        Key("time", "time of each row", "mapping", of=TIME, required=True),
        Key("columns", "givens by the column that gives them", "mapping", of=COLUMNS, required=True),
        Key("heat loss", "heat the hot stream gives to the surroundings", "mapping", of=HEAT_LOSS),
        Key("rules", "limits beyond which a row is rejected", "mapping", of=RULES),
        Key("cleanings", "when the unit was cleaned", "list", required=True),
        Key("zero", "data after each cleaning that zero is anchored on", "mapping", of=ZERO, required=True),
        Key("model", "card of the growth model", "name", required=True, example="kern-seaton-1959"),
        Key("propose", "allowance that is proposed", "mapping", of=PROPOSAL, required=True),
    ),
)
