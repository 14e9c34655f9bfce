"""The formula room: one text per relation, and five readings of its tree.

A relation is one line, ``Nu = 0.023 * Re**0.8 * Pr**n``. It is parsed once; the number, the derivative, the
symbolic line, the line with values and the dimension all come from that one tree, so that the printed
relation is the computed relation.

May import: the standard library and numpy; scipy inside functions. Must never: run text as code, know a
unit, a card or a file, print, or let one sample's value depend on another's.
"""

from calcbook.formulas.derivatives import partial
from calcbook.formulas.dimensions import DIMENSIONLESS, Dimension, dimension, dimension_text
from calcbook.formulas.evaluation import evaluate, evaluate_quietly, evaluate_with_slopes
from calcbook.formulas.figures import number_text, parse_number
from calcbook.formulas.grammar import parse_expression, parse_relation, parse_written
from calcbook.formulas.nodes import (
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
    Symbol,
)
from calcbook.formulas.writing import write, write_with_values

# Every code a RelationFault can bear, with its meaning.
FAULT_CODES: dict[str, str] = {
    "relation-syntax": "the text is no relation: something stands where it cannot",
    "relation-character": "a character that no relation has, such as a letter of another alphabet",
    "relation-number": "a literal that is no decimal number or is beyond the range of numbers",
    "relation-name": "a symbol that would be printed like a constant",
    "relation-kind": "a condition where a number is wanted, or the other way round",
    "relation-function-unknown": "a function that relations do not have",
    "relation-arguments": "a function with too few, too many or the wrong arguments",
    "relation-log-ambiguous": "log, which may mean the natural or the decimal logarithm",
    "relation-too-long": "more characters than a relation may have",
    "relation-too-deep": "brackets or operations nested more deeply than a relation may be",
    "derivative-unknown": "a derivative that the formulas cannot express",
    "dimension-slip": "quantities joined whose dimensions do not fit",
}

__all__ = [
    "CONSTANTS",
    "DIMENSIONLESS",
    "FAULT_CODES",
    "Binary",
    "Call",
    "Column",
    "Compare",
    "Conditional",
    "Dimension",
    "Logic",
    "Negate",
    "Node",
    "Not",
    "Number",
    "Relation",
    "RelationFault",
    "Symbol",
    "dimension",
    "dimension_text",
    "evaluate",
    "evaluate_quietly",
    "evaluate_with_slopes",
    "number_text",
    "parse_expression",
    "parse_number",
    "parse_relation",
    "parse_written",
    "partial",
    "write",
    "write_with_values",
]
