"""Random trees of the language, as the reader may make them: shared by tests of reading and writing."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

from hypothesis import strategies as st

from workbench.sheet import tree

# Words that are reserved nowhere, among them those that the grammar wants in some places.
WORDS = "n k total frame below over lines call in any where digest of x1 test sheet use by"
NAMES = st.sampled_from(WORDS.split(" "))
RESOURCES = st.sampled_from(["time", "stack", "heap"])
LABELS = st.sampled_from(["elapsed", "highest", "over"])
SORTS = st.sampled_from(["nat", "int", "real", "bool"])
TEXTS = st.text(st.characters(blacklist_characters='"\n\r', blacklist_categories=["Cs"]), max_size=12)
NUMERALS = st.sampled_from(["0", "1", "12", "0.25", "1_000", "2 KiB", "3MiB", "1e-6", "9.5e3", "007"])
VALUES = {"0": "0", "1": "1", "12": "12", "0.25": "1/4", "1_000": "1000", "2 KiB": "2048", "3MiB": "3145728",
          "1e-6": "1/1000000", "9.5e3": "9500", "007": "7"}  # fmt: skip


def _number(text: str) -> tree.Number:
    return tree.Number(Fraction(VALUES[text]), text)


def _gauge_part(name: str, part: str, primed: bool) -> tree.Name:
    return tree.Name(f"{name}.{part}", primed)


LEAVES = st.one_of(
    st.builds(_number, NUMERALS),
    st.builds(tree.Name, NAMES, st.booleans()),
    st.builds(tree.Name, st.just("result"), st.booleans()),
    st.builds(_gauge_part, RESOURCES, st.sampled_from(["peak", "area"]), st.booleans()),
    st.builds(tree.Truth, st.booleans()),
)
BINARY = st.sampled_from(["+", "-", "*", "/", "div", "mod", "^", "and", "or", "implies"])
RELATIONS = st.sampled_from(["=", "!=", "<", "<=", ">", ">="])
FUNCTIONS = st.sampled_from(["max", "min", "abs", "floor", "ceil", "lg", "fact", "binom", "passes"])


@st.composite
def _comparison(draw: st.DrawFn, operands: st.SearchStrategy[tree.Expr]) -> tree.Comparison:
    ops: list[Any] = draw(st.lists(RELATIONS, min_size=1, max_size=3))
    return tree.Comparison(tuple(draw(operands) for _ in range(len(ops) + 1)), tuple(ops))


def _larger(parts: st.SearchStrategy[tree.Expr]) -> st.SearchStrategy[tree.Expr]:
    return st.one_of(
        st.builds(tree.Binary, BINARY, parts, parts),
        st.builds(tree.Unary, st.sampled_from(["-", "not"]), parts),
        _comparison(parts),
        st.builds(tree.Conditional, parts, parts, parts),
        st.builds(tree.Application, FUNCTIONS, st.lists(parts, max_size=3).map(tuple)),
        st.builds(tree.Summation, parts, NAMES, parts, parts),
        st.builds(tree.Short, st.sampled_from(["spent", "net", "peak", "area", "mean"]), RESOURCES,
                  st.sampled_from(["=", "<=", ">="]), parts),
    )  # fmt: skip


CLAIMED = st.recursive(LEAVES, _larger, max_leaves=14)  # with short forms


def without_short_forms(expr: tree.Expr) -> bool:
    todo: list[tree.Expr] = [expr]
    while todo:
        node = todo.pop()
        if isinstance(node, tree.Short):
            return False
        todo += [v for name in node.__slots__ for v in _expressions(getattr(node, name))]
    return True


def _expressions(value: object) -> list[tree.Expr]:
    if isinstance(value, tuple):
        return [v for v in value if isinstance(v, tree.Expr)]
    return [value] if isinstance(value, tree.Expr) else []


EXPRESSIONS = st.recursive(LEAVES, _larger, max_leaves=6).filter(without_short_forms)
ARGUMENTS = st.lists(EXPRESSIONS, max_size=2).map(tuple)
VALUE = st.one_of(EXPRESSIONS, st.builds(tree.AnyValue, st.none() | EXPRESSIONS))
SIMPLE = st.one_of(
    st.builds(tree.Skip),
    st.builds(tree.Assign, NAMES | st.just("result"), VALUE),
    st.builds(tree.CallStatement, NAMES, ARGUMENTS),
    st.builds(tree.Note, NAMES, EXPRESSIONS),
    st.builds(tree.Var, NAMES, SORTS, st.none() | EXPRESSIONS, st.none() | VALUE),
    st.builds(tree.ResourceStatement, st.sampled_from(["spend", "acquire", "release"]), EXPRESSIONS, RESOURCES),
)
HINTS = st.one_of(st.builds(tree.CasesHint, EXPRESSIONS), st.builds(tree.UsingHint, NAMES, ARGUMENTS))
LINES = st.none() | st.tuples(st.integers(1, 9), st.integers(10, 99))


def _source(path: str, lines: tuple[int, int] | None, digest: str | None) -> tree.Source:
    first, last = lines or (None, None)
    return tree.Source(path, first, last, digest)


SOURCES = st.builds(_source, TEXTS, LINES, st.none() | st.just("ab" * 32))
HEADERS = st.lists(
    st.one_of(
        st.builds(tree.Given, EXPRESSIONS),
        st.builds(tree.Claim, st.none() | LABELS, CLAIMED, st.lists(HINTS, max_size=2).map(tuple)),
        st.builds(tree.Measure, st.lists(EXPRESSIONS, min_size=1, max_size=2).map(tuple)),
        SOURCES,
    ),
    max_size=3,
).map(lambda items: tree.Header(tuple(items)))


def _blocks(parts: st.SearchStrategy[tree.Statement]) -> st.SearchStrategy[tree.Statement]:
    block = st.lists(parts, max_size=2).map(tuple)
    branches = st.lists(st.tuples(EXPRESSIONS, block), min_size=1, max_size=2).map(tuple)
    return st.one_of(
        st.builds(tree.If, branches, st.none() | block),
        st.builds(tree.Either, st.lists(block, min_size=1, max_size=3).map(tuple)),
        st.builds(tree.While, EXPRESSIONS, HEADERS, block),
        st.builds(tree.For, NAMES, EXPRESSIONS, EXPRESSIONS, st.booleans(), HEADERS, block),
        st.builds(tree.HoldStatement, EXPRESSIONS, RESOURCES, block),
        st.builds(tree.Stage, NAMES, HEADERS, block),
    )


BODIES = st.lists(st.recursive(SIMPLE, _blocks, max_leaves=4), max_size=3).map(tuple)
PARAMETERS = st.lists(st.builds(tree.Parameter, NAMES, SORTS), max_size=2).map(tuple)
BINDINGS = st.lists(st.builds(tree.Binding, NAMES, EXPRESSIONS), max_size=2).map(tuple)
UNITS = st.none() | st.sampled_from(["ms", "µs", "1/s", "m^2", "%", "bytes_in-use"])
CHARGES = st.lists(
    st.builds(tree.Charge, st.sampled_from(["spend", "hold"]), EXPRESSIONS, RESOURCES), min_size=1, max_size=2
).map(tuple)
TARIFF_LINES = st.one_of(
    st.builds(tree.Counter, RESOURCES, UNITS),
    st.builds(tree.Gauge, RESOURCES, UNITS, st.none() | RESOURCES),
    st.builds(tree.On, st.sampled_from(["call", "declare", "assign", "test"]), CHARGES),
)


@st.composite
def _law(draw: st.DrawFn) -> tree.Law:
    on = draw(st.none() | NAMES)
    start = draw(st.none() | st.integers(-3, 9)) if on is not None else None
    return tree.Law(draw(NAMES), draw(PARAMETERS), draw(st.none() | EXPRESSIONS), draw(EXPRESSIONS), on, start)


ITEMS = st.one_of(
    st.builds(tree.Use, TEXTS),
    SOURCES,
    st.builds(tree.Constant, NAMES, SORTS, st.none() | EXPRESSIONS, st.none() | EXPRESSIONS),
    st.builds(tree.State, NAMES, SORTS, st.none() | EXPRESSIONS),
    st.builds(tree.Function, NAMES, PARAMETERS, SORTS, st.none() | EXPRESSIONS, EXPRESSIONS, st.none() | EXPRESSIONS),
    _law(),
    st.builds(tree.Tariff, NAMES, st.lists(TARIFF_LINES, max_size=3).map(tuple)),
    st.builds(tree.Routine, NAMES, PARAMETERS, st.none() | SORTS, BINDINGS, HEADERS, BODIES),
    st.builds(tree.Budget, TEXTS, NAMES, ARGUMENTS, st.sampled_from(["spent", "peak", "mean"]), RESOURCES,
              EXPRESSIONS, BINDINGS),
    st.builds(tree.Pool, TEXTS, st.integers(1, 99), NAMES, ARGUMENTS, EXPRESSIONS, RESOURCES,
              st.none() | st.sampled_from([Fraction(1, 10**6), Fraction(1, 2)]), BINDINGS),
)  # fmt: skip
SHEETS = st.builds(tree.Sheet, st.none() | TEXTS, st.lists(ITEMS, max_size=3).map(tuple))
