"""Random relation trees for the tests of the formula room."""

from hypothesis import strategies as st

from calcbook.formulas import Binary, Call, Column, Compare, Conditional, Logic, Negate, Not, Number, Symbol

NAMES = ("x", "y", "Re", "mu_s", "rho", "dT", "lam", "T_s", "g_n", "pi", "sigma")

numbers = st.sampled_from(["0", "1", "2", "0.023", "1e-4", "1E+3", ".5", "3.", "62"]).map(
    lambda text: Number(float(text), text)
)
leaves = numbers | st.sampled_from(NAMES).map(Symbol) | st.just(Column("ideal", "a_1"))


def _larger(inner: st.SearchStrategy) -> st.SearchStrategy:
    comparisons = st.builds(
        Compare,
        inner,
        st.lists(
            st.tuples(st.sampled_from(["<", "<=", ">", ">=", "==", "!="]), inner), min_size=1, max_size=2
        ).map(tuple),
    )
    flags = comparisons | st.sampled_from(["heated", "liquid"]).map(Symbol)
    joined = st.builds(
        Logic, st.sampled_from(["and", "or"]), st.lists(flags, min_size=2, max_size=3).map(tuple)
    )
    conditions = flags | joined | st.builds(Not, flags | joined)
    return (
        st.builds(Negate, inner)
        | st.builds(Binary, st.sampled_from(["+", "-", "*", "/", "**"]), inner, inner)
        | st.builds(Conditional, conditions, inner, inner)
        | st.builds(lambda x: Call("exp", (x,)), inner)
        | st.builds(lambda x, y: Call("max", (x, y)), inner, inner)
    )


trees = st.recursive(leaves, _larger, max_leaves=12)
