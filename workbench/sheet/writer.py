"""Tree to text, in the one style that sheets are written in; what is written reads back to an equal tree.

Comments are not in the tree: a sheet that a person wrote is edited with `replace`, never written anew.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from workbench.errors import Span
from workbench.sheet import tree
from workbench.sheet.tree import Expr
from workbench.sheet.words import ADD, COMPARE, IMPLIES, LEVELS, MINUS, MULTIPLY, NOT, RIGHT

ATOM = 10  # binds tighter than any operator
TIGHT = frozenset("*/^")  # written without spaces
STEP = "  "


def replace(text: str, span: Span, new: str) -> str:
    """The text with another formula in the span's place; all else, comments included, stays as it is."""
    line = " ".join(part.strip() for part in new.splitlines()).strip()
    return text[: span.start] + line + text[span.end :]


# ------------------------------------------------------------------ expressions
def write_expr(expr: Expr) -> str:
    """A formula or expression with no more brackets than needed; `read_formula` gives an equal tree."""
    return _write(expr, IMPLIES, True)


def write_sum(expr: Expr) -> str:
    """An expression where comparisons, `if` and logic stand in brackets only."""
    return _write(expr, ADD, False)


def _write(expr: Expr, least: int, last: bool) -> str:
    """`least`: how tightly it must bind to stand without brackets; `last`: nothing follows it before a bracket closes
    or a word ends it, so that an `if` may reach as far as it likes."""
    if isinstance(expr, tree.Binary):
        return _write_chain(expr, least, last)
    level = _level(expr)
    # Minus may follow any operator, and so may `if` where nothing follows it.
    free = isinstance(expr, tree.Conditional) and last
    if level < least and not free:
        return f"({_write(expr, IMPLIES, True)})"
    match expr:
        case tree.Number():
            return expr.text or decimal(expr.value)
        case tree.Truth():
            return "true" if expr.value else "false"
        case tree.Name():
            return expr.name + ("'" if expr.primed else "")
        case tree.Unary("-", operand):
            return "-" + _write(operand, MINUS, last)
        case tree.Unary(_, operand):
            return "not " + _write(operand, NOT, last)
        case tree.Comparison(operands, ops):
            parts = [_write(operands[0], COMPARE + 1, False)]
            for at, op in enumerate(ops, 1):
                least = _right_least(operands[at], COMPARE + 1)
                parts += [f" {op} ", _write(operands[at], least, last and at == len(ops))]
            return "".join(parts)
        case tree.Short(aspect, resource, op, bound):
            return f"{aspect} {resource} {op} {_write(bound, _right_least(bound, COMPARE + 1), last)}"
        case tree.Conditional(condition, then, otherwise):
            return f"if {write_expr(condition)} then {write_expr(then)} else {write_expr(otherwise)}"
        case tree.Application(name, arguments):
            return f"{name}({', '.join(map(write_expr, arguments))})"
        case tree.Summation(body, variable, low, high):
            return f"sum({write_expr(body)} for {variable} from {write_expr(low)} to {write_expr(high)})"


def _write_chain(expr: tree.Binary, least: int, last: bool) -> str:
    """Binary operators, down their left edge in a loop: sums have thousands of terms."""
    bracketed = LEVELS[expr.op] < least
    last = last or bracketed
    spine = [expr]
    while isinstance(left := spine[-1].left, tree.Binary) and LEVELS[left.op] >= _left_least(spine[-1]):
        spine.append(left)
    parts = [_write(spine[-1].left, _left_least(spine[-1]), False)]
    for node in reversed(spine):
        level = LEVELS[node.op]
        parts.append(node.op if node.op in TIGHT else f" {node.op} ")
        tight = level if level in RIGHT else level + 1
        parts.append(_write(node.right, _right_least(node.right, tight), last and node is expr))
    return f"({''.join(parts)})" if bracketed else "".join(parts)


def _left_least(node: tree.Binary) -> int:
    level = LEVELS[node.op]
    return level + 1 if level in RIGHT else level


def _right_least(expr: Expr, least: int) -> int:
    """How tightly what stands after an operator must bind: a minus needs no brackets there."""
    return MINUS if isinstance(expr, tree.Unary) and expr.op == "-" else least


def _level(expr: Expr) -> int:
    match expr:
        case tree.Unary():
            return MINUS if expr.op == "-" else NOT
        case tree.Comparison() | tree.Short():
            return COMPARE
        case tree.Conditional():
            return 0
        case tree.Number() if not expr.text:
            # Made by a program, not read: it may have no numeral of its own.
            return MINUS if expr.value < 0 else ATOM if is_decimal(expr.value) else MULTIPLY
        case _:
            return ATOM


def is_decimal(value: Fraction) -> bool:
    """Whether finitely many decimals write it."""
    rest = value.denominator
    for prime in (2, 5):
        while rest % prime == 0:
            rest //= prime
    return rest == 1


def decimal(value: Fraction) -> str:
    """The number as the language writes it: `12`, `0.25`; one without finite decimals as a division, `1/3`."""
    if value.denominator == 1:
        return str(value.numerator)
    if not is_decimal(value):
        return f"{value.numerator}/{value.denominator}"
    places = 0
    while (value * 10**places).denominator != 1:
        places += 1
    digits = str(abs(int(value * 10**places))).rjust(places + 1, "0")
    return f"{'-' if value < 0 else ''}{digits[:-places]}.{digits[-places:]}"


# ------------------------------------------------------------------ statements
def write_value(value: tree.Value) -> str:
    if isinstance(value, tree.AnyValue):
        return "any" if value.condition is None else f"any where {write_expr(value.condition)}"
    text = write_expr(value)
    return f"({text})" if text == "any" else text  # a name that the language does not reserve


def write_block(block: tree.Block, indent: str = "") -> Iterator[str]:
    """The lines of a block."""
    for statement in block:
        yield from _statement(statement, indent)


def _statement(statement: tree.Statement, indent: str) -> Iterator[str]:
    match statement:
        case tree.If():
            for at, (condition, block) in enumerate(statement.branches):
                yield f"{indent}{'elif' if at else 'if'} {write_expr(condition)} then"
                yield from write_block(block, indent + STEP)
            if statement.otherwise is not None:
                yield f"{indent}else"
                yield from write_block(statement.otherwise, indent + STEP)
        case tree.Either():
            for at, block in enumerate(statement.branches):
                yield f"{indent}{'else' if at else 'either'}"
                yield from write_block(block, indent + STEP)
        case tree.While() | tree.For():
            head = _loop_head(statement)
            if statement.header.items:
                yield f"{indent}{head}"
                yield from write_header(statement.header, indent + STEP)
                yield f"{indent}do"
            else:
                yield f"{indent}{head} do"
            yield from write_block(statement.body, indent + STEP)
        case tree.HoldStatement(amount, gauge, body):
            yield f"{indent}hold {write_expr(amount)} {gauge} do"
            yield from write_block(body, indent + STEP)
        case tree.Stage(name, header, body):
            yield f"{indent}stage {name}"
            yield from write_header(header, indent + STEP)
            yield f"{indent}is"
            yield from write_block(body, indent + STEP)
        case _:
            yield indent + write_statement(statement)
            return
    yield f"{indent}end"


def _loop_head(loop: tree.While | tree.For) -> str:
    if isinstance(loop, tree.While):
        return f"while {write_expr(loop.condition)}"
    word = "to" if loop.inclusive else "below"
    return f"for {loop.variable} from {write_expr(loop.low)} {word} {write_expr(loop.high)}"


def write_statement(statement: tree.Statement) -> str:
    """A statement that is one line: none that has a block."""
    match statement:
        case tree.Assign(target, value):
            return f"{target} := {write_value(value)}"
        case tree.CallStatement(routine, arguments):
            return _called(routine, arguments)
        case tree.Note(name, expr):
            return f"note {name} = {write_expr(expr)}"
        case tree.Var(name, sort, size, first):
            sized = f" size {write_sum(size)}" if size is not None else ""
            assigned = f" := {write_value(first)}" if first is not None else ""
            return f"var {name}: {sort}{sized}{assigned}"
        case tree.ResourceStatement(verb, amount, resource):
            return f"{verb} {write_expr(amount)} {resource}"
        case _:
            return "skip"


def _called(name: str, arguments: tuple[Expr, ...]) -> str:
    return f"{name}({', '.join(map(write_expr, arguments))})"


# ------------------------------------------------------------------ headers
def write_header(header: tree.Header, indent: str) -> Iterator[str]:
    """The lines of a header."""
    for item in header.items:
        match item:
            case tree.Given():
                yield f"{indent}given {write_expr(item.formula)}"
            case tree.Measure():
                yield f"{indent}measure {', '.join(map(write_expr, item.components))}"
            case tree.Source():
                yield indent + _source(item)
            case tree.Claim():
                label = f"{item.label}: " if item.label is not None else ""
                yield f"{indent}claim {label}{write_expr(item.formula)}"
                for hint in item.hints:
                    yield f"{indent}{STEP}{_hint(hint)}"


def _hint(hint: tree.CasesHint | tree.UsingHint) -> str:
    if isinstance(hint, tree.CasesHint):
        return f"cases {write_expr(hint.condition)}"
    return f"using {_called(hint.law, hint.arguments)}"


def _source(item: tree.Source) -> str:
    lines = f" lines {item.first_line} to {item.last_line}" if item.first_line is not None else ""
    digest = f' digest "{item.digest}"' if item.digest is not None else ""
    return f'source "{item.path}"{lines}{digest}'


# ------------------------------------------------------------------ items
def write_sheet(sheet: tree.Sheet) -> str:
    """The whole sheet. Items that are one line and of one kind stand together, others an empty line apart."""
    parts = [f'sheet "{sheet.title}"'] if sheet.title is not None else []
    before: type[tree.Item] | None = None
    for item in sheet.items:
        lines = list(_item(item))
        if parts and (len(lines) > 1 or type(item) is not before):
            parts.append("")
        parts += lines
        before = type(item)
    return "".join(f"{line}\n" for line in parts)


def _item(item: tree.Item) -> Iterator[str]:
    match item:
        case tree.Use(path):
            yield f'use "{path}"'
        case tree.Source():
            yield _source(item)
        case tree.Constant():
            value = f" = {write_expr(item.value)}" if item.value is not None else ""
            yield f"constant {item.name}: {item.sort}{value}{_optional('where', item.condition)}"
        case tree.State():
            yield f"state {item.name}: {item.sort}{_optional('where', item.condition)}"
        case tree.Function():
            measure = f" measure {write_sum(item.measure)}" if item.measure is not None else ""
            head = f"function {item.name}({_parameters(item.parameters)}): {item.sort}{measure}"
            yield f"{head} = {write_expr(item.body)}{_optional('given', item.given)}"
        case tree.Law():
            yield _law(item)
        case tree.Tariff():
            yield f"tariff {item.name}"
            yield from (STEP + _tariff_line(line) for line in item.items)
            yield "end"
        case tree.Routine():
            yield from _routine(item)
        case tree.Budget():
            head = f'budget "{item.title}": {_called(item.routine, item.arguments)} {item.aspect} {item.resource}'
            yield f"{head} <= {write_expr(item.limit)}{_given(item.bindings)}"
        case tree.Pool():
            head = f'pool "{item.title}": {item.count} of {_called(item.routine, item.arguments)}'
            overflow = f" overflow below {decimal(item.overflow_below)}" if item.overflow_below is not None else ""
            yield f"{head} within {write_expr(item.room)} {item.gauge}{overflow}{_given(item.bindings)}"


def _optional(word: str, formula: Expr | None) -> str:
    return f" {word} {write_expr(formula)}" if formula is not None else ""


def _parameters(parameters: tuple[tree.Parameter, ...]) -> str:
    return ", ".join(f"{p.name}: {p.sort}" for p in parameters)


def _given(bindings: tuple[tree.Binding, ...]) -> str:
    return " given " + ", ".join(f"{b.name} = {write_sum(b.value)}" for b in bindings) if bindings else ""


def _law(item: tree.Law) -> str:
    head = f"law {item.name}({_parameters(item.parameters)}){_optional('given', item.given)}"
    by = f" by induction on {item.induction_on}" if item.induction_on is not None else ""
    start = f" from {item.induction_from}" if item.induction_from is not None else ""
    return f"{head}: {write_expr(item.formula)}{by}{start}"


def _tariff_line(line: tree.Counter | tree.Gauge | tree.On) -> str:
    if isinstance(line, tree.On):
        charges = ", ".join(f"{c.verb} {write_expr(c.amount)} {c.resource}" for c in line.charges)
        return f"on {line.event}: {charges}"
    unit = f" in {line.unit}" if line.unit is not None else ""
    if isinstance(line, tree.Counter):
        return f"counter {line.name}{unit}"
    return f"gauge {line.name}{unit}" + (f" over {line.clock}" if line.clock is not None else "")


def _routine(item: tree.Routine) -> Iterator[str]:
    result = f" -> {item.result}" if item.result is not None else ""
    bindings = ", ".join(f"{b.name} = {write_expr(b.value)}" for b in item.bindings)
    yield f"routine {item.name}({_parameters(item.parameters)}){result}{' with ' + bindings if bindings else ''}"
    yield from write_header(item.header, STEP)
    yield "is"
    yield from write_block(item.body, STEP)
    yield "end"
