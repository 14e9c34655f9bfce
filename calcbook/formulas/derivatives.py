"""A tree to its derivative tree, simplified so far that no factor 0 or 1 and no term 0 remains."""

from __future__ import annotations

from collections.abc import Callable
from decimal import Decimal

from calcbook.formulas.nodes import (
    Binary,
    Call,
    Compare,
    Conditional,
    Negate,
    Node,
    Number,
    Relation,
    RelationFault,
    is_truth,
    number,
    span_of,
    tree_of,
)

ZERO = number(0.0)
ONE = number(1.0)
TWO = number(2.0)
TEN = number(10.0)


def partial(relation: Relation | Node, symbol: str) -> Node:
    """The partial derivative by ``symbol`` (a free symbol or ``table.name``) as a tree; kept with the tree.

    The derivative of a condition is 0, at a joint of min, max or abs that of one side. Raises
    ``RelationFault`` ``derivative-unknown`` where a function has none that the formulas can express.
    """
    tree = tree_of(relation)
    key = (partial, symbol)
    found = tree.memory.get(key)
    if found is None:
        found = tree.memory[key] = _derive(tree, symbol) if symbol in tree.symbols else ZERO
    return found


def _derive(node: Node, symbol: str) -> Node:
    if is_truth(node):
        return ZERO
    match node:
        case Negate(x=x):
            return negated(partial(x, symbol))
        case Binary(op="**", a=a, b=b):
            return _power(a, b, symbol)
        case Binary(op=op, a=a, b=b):
            return _arithmetic(op, a, b, symbol)
        case Conditional(condition=condition, yes=yes, no=no):
            return conditional(condition, partial(yes, symbol), partial(no, symbol))
        case Call():
            return _call(node, symbol)
    return ONE


def _arithmetic(op: str, a: Node, b: Node, symbol: str) -> Node:
    da, db = partial(a, symbol), partial(b, symbol)
    if op == "+":
        return added(da, db)
    if op == "-":
        return subtracted(da, db)
    if op == "*":
        return added(multiplied(da, b), multiplied(a, db))
    if db == ZERO:
        return divided(da, b)
    return subtracted(divided(da, b), divided(multiplied(a, db), raised(b, TWO)))


def _power(base: Node, exponent: Node, symbol: str) -> Node:
    """n x**(n-1) x' for the base (safe at 0 from n = 1 up), x**n ln(x) n' for the exponent."""
    d_base, d_exponent = partial(base, symbol), partial(exponent, symbol)
    of_base = multiplied(multiplied(exponent, raised(base, subtracted(exponent, ONE))), d_base)
    of_exponent = multiplied(multiplied(raised(base, exponent), Call("ln", (base,))), d_exponent)
    return added(of_base if d_base != ZERO else ZERO, of_exponent if d_exponent != ZERO else ZERO)


def _call(node: Call, symbol: str) -> Node:
    name, args = node.name, node.args
    if name in ("min", "max"):
        return _extreme(name, args, symbol)
    if name == "gamma_p":
        _refuse_dependence(node, args[0], symbol)
        return multiplied(Call("gamma_p_density", args), partial(args[1], symbol))
    if name == "mean":
        column, first, second = args
        _refuse_dependence(node, column, symbol)
        # The mean itself comes along: it is the same from either end, and is worked out once.
        by_first = multiplied(Call("mean_slope", (column, first, second, node)), partial(first, symbol))
        by_second = multiplied(Call("mean_slope", (column, second, first, node)), partial(second, symbol))
        return added(by_first, by_second)
    if name not in _OUTER:
        raise _unknown(node, symbol)
    (inner,) = args
    return multiplied(_OUTER[name](inner, node), partial(inner, symbol))


def _refuse_dependence(node: Call, argument: Node, symbol: str) -> None:
    if symbol in argument.symbols:
        raise _unknown(node, symbol)


def _unknown(node: Call, symbol: str) -> RelationFault:
    return RelationFault(
        "derivative-unknown", f"{node.name} has no derivative by {symbol} here", span_of(node), "another form"
    )


def _extreme(name: str, args: tuple[Node, ...], symbol: str) -> Node:
    """The derivative of the argument that is smallest (largest), compared in pairs from the left."""
    op = "<=" if name == "min" else ">="
    best, slope = args[0], partial(args[0], symbol)
    for argument in args[1:]:
        slope = conditional(Compare(best, ((op, argument),)), slope, partial(argument, symbol))
        best = Call(name, (best, argument))
    return slope


def _call_of(name: str, *args: Node) -> Node:
    return Call(name, args)


def _scaled(plain: Node, sign_of: Node, same: Node) -> Node:
    """The derivative of exp(-|x|) I(x): the derivative of I, scaled, less sign(x) times the function."""
    return subtracted(plain, multiplied(_call_of("sign", sign_of), same))


# function: derivative by its argument, from the argument x and the call f itself
_OUTER: dict[str, Callable[[Node, Node], Node]] = {
    "sqrt": lambda x, f: divided(ONE, multiplied(TWO, f)),
    "exp": lambda x, f: f,
    "expm1": lambda x, f: _call_of("exp", x),
    "ln": lambda x, f: divided(ONE, x),
    "log10": lambda x, f: divided(ONE, multiplied(x, _call_of("ln", TEN))),
    "log1p": lambda x, f: divided(ONE, added(ONE, x)),
    "abs": lambda x, f: _call_of("sign", x),
    "sign": lambda x, f: ZERO,
    "sin": lambda x, f: _call_of("cos", x),
    "cos": lambda x, f: negated(_call_of("sin", x)),
    "tan": lambda x, f: added(ONE, raised(f, TWO)),
    "asin": lambda x, f: divided(ONE, _call_of("sqrt", subtracted(ONE, raised(x, TWO)))),
    "acos": lambda x, f: negated(divided(ONE, _call_of("sqrt", subtracted(ONE, raised(x, TWO))))),
    "atan": lambda x, f: divided(ONE, added(ONE, raised(x, TWO))),
    "sinh": lambda x, f: _call_of("cosh", x),
    "cosh": lambda x, f: _call_of("sinh", x),
    # 1/cosh**2 rather than 1 - tanh**2: the latter loses every digit for large x.
    "tanh": lambda x, f: divided(ONE, raised(_call_of("cosh", x), TWO)),
    # Abramowitz and Stegun, Handbook of Mathematical Functions (1964), 9.6.26 and 9.6.27.
    "i0e": lambda x, f: _scaled(_call_of("i1e", x), x, f),
    "i1e": lambda x, f: _scaled(divided(added(_call_of("i0e", x), _call_of("i2e", x)), TWO), x, f),
    "k0e": lambda x, f: subtracted(f, _call_of("k1e", x)),
    "k1e": lambda x, f: subtracted(f, added(_call_of("k0e", x), divided(f, x))),
}


def _constant(node: Node) -> Decimal | None:
    """The exact value of a literal, negated or not."""
    if isinstance(node, Negate):
        inner = _constant(node.x)
        return None if inner is None else -inner
    return Decimal(node.text) if isinstance(node, Number) else None


def _folded(op: str, a: Node, b: Node) -> Node | None:
    """The sum, difference or product of two literals as one literal."""
    first, second = _constant(a), _constant(b)
    if first is None or second is None:
        return None
    if op == "*":
        return number(float(first * second))
    return number(float(first + second if op == "+" else first - second))


def _is(node: Node, value: int) -> bool:
    return _constant(node) == value


def negated(a: Node) -> Node:
    if isinstance(a, Negate):
        return a.x
    return ZERO if _is(a, 0) else Negate(a)


def added(a: Node, b: Node) -> Node:
    if _is(a, 0):
        return b
    if _is(b, 0):
        return a
    if isinstance(b, Negate):
        return subtracted(a, b.x)
    return _folded("+", a, b) or Binary("+", a, b)


def subtracted(a: Node, b: Node) -> Node:
    if _is(a, 0):
        return negated(b)
    if _is(b, 0):
        return a
    return _folded("-", a, b) or Binary("-", a, b)


def multiplied(a: Node, b: Node) -> Node:
    if _is(a, 0) or _is(b, 0):
        return ZERO
    if _is(a, 1):
        return b
    if _is(b, 1):
        return a
    if isinstance(a, Negate) and not isinstance(a.x, Number):
        return negated(multiplied(a.x, b))
    if isinstance(b, Negate) and not isinstance(b.x, Number):
        return negated(multiplied(a, b.x))
    if isinstance(a, Binary) and a.op == "/" and a.a == ONE:
        return divided(b, a.b)
    return _folded("*", a, b) or Binary("*", a, b)


def divided(a: Node, b: Node) -> Node:
    if _is(a, 0):
        return ZERO
    return a if _is(b, 1) else Binary("/", a, b)


def raised(a: Node, b: Node) -> Node:
    if _is(b, 0):
        return ONE
    return a if _is(b, 1) else Binary("**", a, b)


def conditional(condition: Node, yes: Node, no: Node) -> Node:
    return yes if yes == no else Conditional(condition, yes, no)
