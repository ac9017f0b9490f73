"""Terms as people write them: the sheet's own notation, with no more parentheses than needed."""

from __future__ import annotations

from fractions import Fraction

from workbench.algebra.terms import Term

# How tightly an operator binds; a part that binds less tightly than its place asks for goes into parentheses.
_IF, _IMPLIES, _OR, _AND, _NOT, _COMPARE, _SUM, _PRODUCT, _NEGATIVE, _POWER, _ATOM = range(11)
_BINARY = {
    "+": (_SUM, _SUM, _PRODUCT),
    "-": (_SUM, _SUM, _PRODUCT),
    "*": (_PRODUCT, _PRODUCT, _NEGATIVE),
    "/": (_PRODUCT, _PRODUCT, _NEGATIVE),
    "div": (_PRODUCT, _PRODUCT, _NEGATIVE),
    "mod": (_PRODUCT, _PRODUCT, _NEGATIVE),
    "^": (_POWER, _ATOM, _POWER),
    "and": (_AND, _AND, _NOT),
    "or": (_OR, _OR, _AND),
    "implies": (_IMPLIES, _OR, _IMPLIES),
    **{op: (_COMPARE, _SUM, _SUM) for op in ("=", "!=", "<", "<=", ">", ">=")},
    "iff": (_COMPARE, _SUM, _SUM),
}
_TIGHT = frozenset({"*", "/", "^"})  # written without spaces
_NAMED = frozenset({"max", "min", "abs", "floor", "ceil", "lg", "fact", "binom"})


def show(term: Term) -> str:
    """The term in the sheet's notation. Reads back as an equal formula where its names are ones that a sheet can
    write.
    """
    memo: dict[Term, tuple[str, int]] = {}
    stack = [term]
    while stack:
        t = stack[-1]
        if t in memo:
            stack.pop()
            continue
        missing = [a for a in t.args if a not in memo]
        if missing:
            stack.extend(missing)
            continue
        memo[t] = _written(t, [memo[a] for a in t.args])
        stack.pop()
    return memo[term][0]


def _written(t: Term, parts: list[tuple[str, int]]) -> tuple[str, int]:
    """(text, how tightly it binds)"""
    op = t.op
    if op == "num":
        return show_number(t.value), _number_binds(t.value)
    if op in ("var", "true", "false"):
        return t.name or op, _ATOM
    if op in _BINARY:
        own, left, right = _BINARY[op]
        space = "" if op in _TIGHT else " "
        sign = "=" if op == "iff" else op
        return f"{_in(parts[0], left)}{space}{sign}{space}{_in(parts[1], right)}", own
    if op == "neg":
        return f"-{_in(parts[0], _NEGATIVE)}", _NEGATIVE
    if op == "not":
        return f"not {_in(parts[0], _NOT)}", _NOT
    if op == "if":
        condition, then, otherwise = (text for text, _ in parts)
        return f"if {condition} then {then} else {otherwise}", _IF
    if op == "sum":
        bound, low, high, body = (text for text, _ in parts)
        return f"sum({body} for {bound} from {low} to {high})", _ATOM
    name = t.name if op == "call" else op
    return f"{name}({', '.join(text for text, _ in parts)})", _ATOM


def _in(part: tuple[str, int], place: int) -> str:
    text, binds = part
    return text if binds >= place else f"({text})"


def show_number(value: int | Fraction) -> str:
    """12, -3, 7/2; a decimal where the fraction is one with few digits."""
    if isinstance(value, int) or value.denominator == 1:
        return str(int(value))
    for digits in range(1, 7):
        if 10**digits % value.denominator == 0:
            sign = "-" if value < 0 else ""
            whole, rest = divmod(abs(value.numerator) * 10**digits // value.denominator, 10**digits)
            return f"{sign}{whole}.{rest:0{digits}d}"
    return f"{value.numerator}/{value.denominator}"


def _number_binds(value: int | Fraction) -> int:
    if value < 0:
        return _NEGATIVE
    return _PRODUCT if "/" in show_number(value) else _ATOM
