"""Typed text to tree: what is read, and what is refused where."""

import ast
import pickle

import pytest
from hypothesis import given
from hypothesis import strategies as st

from calcbook.formulas import (
    FAULT_CODES,
    Binary,
    Call,
    Column,
    Compare,
    Conditional,
    Logic,
    Negate,
    Not,
    Number,
    RelationFault,
    Symbol,
    parse_expression,
    parse_relation,
    parse_written,
)

_PYTHON_OPS = {
    **{ast.Add: "+", ast.Sub: "-", ast.Mult: "*", ast.Div: "/", ast.Pow: "**", ast.And: "and", ast.Or: "or"},
    **{ast.Lt: "<", ast.LtE: "<=", ast.Gt: ">", ast.GtE: ">=", ast.Eq: "==", ast.NotEq: "!="},
}


def read_by_python(node, text):
    """The same tree from Python's own parser: the reference for precedence and grouping."""
    match node:
        case ast.Expression(body=body):
            return read_by_python(body, text)
        case ast.Constant(value=value):
            return Number(float(value), ast.get_source_segment(text, node))
        case ast.Name(id=name):
            return Symbol(name)
        case ast.Attribute(value=ast.Name(id=table), attr=name):
            return Column(table, name)
        case ast.UnaryOp(op=op, operand=x):
            return (Negate if isinstance(op, ast.USub) else Not)(read_by_python(x, text))
        case ast.BinOp(op=op, left=a, right=b):
            return Binary(_PYTHON_OPS[type(op)], read_by_python(a, text), read_by_python(b, text))
        case ast.Compare(left=first, ops=ops, comparators=others):
            pairs = zip(ops, others, strict=True)
            rest = tuple((_PYTHON_OPS[type(op)], read_by_python(b, text)) for op, b in pairs)
            return Compare(read_by_python(first, text), rest)
        case ast.BoolOp(op=op, values=parts):
            return Logic(_PYTHON_OPS[type(op)], tuple(read_by_python(part, text) for part in parts))
        case ast.IfExp(test=test, body=yes, orelse=no):
            return Conditional(*(read_by_python(part, text) for part in (test, yes, no)))
        case ast.Call(func=ast.Name(id=name), args=args):
            return Call(name, tuple(read_by_python(part, text) for part in args))
    raise TypeError(ast.dump(node))


_operand = st.sampled_from(
    ["x", "y", "2", "0.5", "ideal.a_1", "(x + y)", "-x", "(-x)", "sqrt(x*y)", "(x if flag else y)"]
)
_sums = st.lists(
    st.tuples(_operand, st.sampled_from(["+", "-", "*", "/", "**"])), min_size=1, max_size=7
).map(lambda parts: " ".join(f"{operand} {op}" for operand, op in parts).rsplit(" ", 1)[0])
_comparisons = st.tuples(_sums, st.sampled_from(["<", "<=", ">", ">=", "==", "!="]), _sums).map(" ".join)
_conditions = st.lists(
    st.tuples(st.sampled_from(["", "not "]), _comparisons, st.sampled_from(["and", "or"])),
    min_size=1,
    max_size=4,
).map(lambda parts: " ".join(f"{negation}{part} {op}" for negation, part, op in parts).rsplit(" ", 1)[0])
_texts = (
    _sums
    | _conditions
    | st.tuples(_sums, _conditions, _sums).map(lambda part: "{} if {} else {}".format(*part))
)


@given(_texts)
def test_precedence_and_grouping_are_those_of_python(text):
    assert parse_expression(text).tree == read_by_python(ast.parse(text, mode="eval"), text)


def test_relation_has_target_and_symbols_in_order_of_appearance():
    relation = parse_relation("Nu = a.c * Re**n if Re > pi*Gz else mean(k.s, T_1, T_2)*Re + g_n")
    assert relation.target == "Nu"
    assert relation.symbols == ("a.c", "Re", "n", "Gz", "k.s", "T_1", "T_2")
    assert parse_expression("Re >= 1e4").target is None


def test_positions_take_no_part_in_equality():
    assert parse_expression("x+y").tree == parse_expression("x   +   y").tree
    assert hash(parse_expression("x+y").tree) == hash(parse_expression("(x) + (y)").tree)


def test_relation_survives_pickling():
    relation = parse_relation("h = Nu*lam/d_i")
    assert relation.tree.symbols == ("Nu", "lam", "d_i")
    assert pickle.loads(pickle.dumps(relation)) == relation


@pytest.mark.parametrize(
    ("text", "code", "column"),
    [
        ("x = log(y)", "relation-log-ambiguous", 5),
        ("x = 2*log", "relation-log-ambiguous", 7),
        ("x = a[0]", "relation-character", 6),
        ("x = а + 1", "relation-character", 5),  # cyrillic a
        ("x = ｓqrt(2)", "relation-character", 5),  # full-width s
        ("x = 'text'", "relation-character", 5),
        ("x = y\0", "relation-character", 6),
        ("x = y\n+ 1", "relation-character", 6),
        ("x = {y}", "relation-character", 5),
        ("x = (y := 3)", "relation-character", 8),
        ("x = y ^ 2", "relation-character", 7),
        ("x = y # note", "relation-character", 7),
        ("x = (lambda)", "relation-syntax", 6),
        ("x = y is z", "relation-syntax", 7),
        ("x = None", "relation-syntax", 5),
        ("x = True", "relation-syntax", 5),
        ("x = __import__", "relation-syntax", 5),
        ("x = y.__class__", "relation-syntax", 5),
        ("x = a.b.c", "relation-syntax", 5),
        ("x = y // 2", "relation-syntax", 7),
        ("x = +y", "relation-syntax", 5),
        ("x = (y)(z)", "relation-syntax", 8),
        ("x = 2 y", "relation-syntax", 7),
        ("x = (y", "relation-syntax", 7),
        ("x = y)", "relation-syntax", 6),
        ("x = ", "relation-syntax", 5),
        ("", "relation-syntax", 1),
        ("x == y", "relation-syntax", 1),
        ("x = y = z", "relation-syntax", 7),
        ("x = y if z", "relation-syntax", 11),
        ("sqrt = y", "relation-syntax", 1),
        ("pi = y", "relation-syntax", 1),
        ("x = sqrt*2", "relation-syntax", 5),
        ("x = g*rho", "relation-name", 5),
        ("x = sqr(y)", "relation-function-unknown", 5),
        ("x = y.append(3)", "relation-function-unknown", 5),
        ("x = mean_slope(t.k, y, z)", "relation-function-unknown", 5),
        ("x = sqrt(y, z)", "relation-arguments", 5),
        ("x = min(y)", "relation-arguments", 5),
        ("x = mean(y, z, w)", "relation-arguments", 10),
        ("x = 1_000", "relation-number", 5),
        ("x = 0x10", "relation-number", 5),
        ("x = 3j", "relation-number", 5),
        ("x = 1e999", "relation-number", 5),
        ("x = 1e-999999999", "relation-number", 5),
        ("x = (y > 2)*3", "relation-kind", 6),
        ("x = 1 if 3 else 2", "relation-kind", 10),
        ("x = y > 2 if z else 3", "relation-kind", 21),
        ("x = " + "(" * 51 + "y" + ")" * 51, "relation-too-deep", 56),
        ("x = " + "-" * 1900 + "y", "relation-too-deep", 56),
        ("x = " + "not " * 400 + "y", "relation-too-deep", 209),
        ("x = " + "y**" * 400 + "y", "relation-too-deep", 158),
        ("x = " + "+".join(["y"] * 900), "relation-too-deep", 1804),
        ("x = " + "(" * 40 + "y" + "+y-y+y)" * 40, "relation-too-deep", 326),
        ("x = " + "y" * 2000, "relation-too-long", 2001),
    ],
)
def test_refused_by_name_and_column(text, code, column):
    with pytest.raises(RelationFault) as caught:
        parse_relation(text)
    assert (caught.value.code, caught.value.column) == (code, column)
    assert caught.value.end_column > caught.value.column
    assert caught.value.message and caught.value.expected
    assert code in FAULT_CODES


def test_nearest_names():
    with pytest.raises(RelationFault) as caught:
        parse_expression("sqr(y)")
    assert caught.value.nearest[0] == "sqrt"
    with pytest.raises(RelationFault) as caught:
        parse_expression("log(y)")
    assert caught.value.nearest == ("ln", "log10")


def test_huge_powers_are_a_tree_and_nothing_more():
    tree = parse_expression("9**9**9**9**9").tree
    assert isinstance(tree, Binary) and tree.a == Number(9.0, "9")


@given(
    st.text(alphabet="xyRe.0123456789e+-*/()<>=!, ifelsandorot_log\u0430\x00", max_size=60)
    | st.text(max_size=40)
)
def test_any_text_is_read_or_refused(text):
    for reader in (parse_relation, parse_expression, parse_written):
        try:
            reader(text)
        except RelationFault as fault:
            assert fault.code in FAULT_CODES
            assert 1 <= fault.column <= len(text) + 1


def test_fifty_levels_are_read():
    text = "(x + 2*" * 45 + "y" + ")" * 45
    assert parse_expression(text).symbols == ("x", "y")
