"""The words and limits of the sheet language, in one place.

A word is reserved where it stands in the grammar of statements, headers, hints, formulas, short forms, expressions
or types. All others (`in over lines digest below call test use …`) are names wherever the grammar does not want them.
"""

from __future__ import annotations

from collections.abc import Iterable


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


STATEMENT_WORDS = _words(
    "skip note if then elif else end either while do for from to var size spend acquire release hold stage is"
)
HEADER_WORDS = _words("given claim measure source cases using")
FORMULA_WORDS = _words("not and or implies true false if then else")
ASPECTS = _words("spent net peak area mean")
FUNCTION_WORDS = _words("max min abs floor ceil lg fact binom")
EXPRESSION_WORDS = FUNCTION_WORDS | _words("result div mod sum for from to")
SORTS = _words("nat int real bool")

RESERVED = STATEMENT_WORDS | HEADER_WORDS | FORMULA_WORDS | ASPECTS | EXPRESSION_WORDS | SORTS

# How tightly operators bind; unary minus may follow any of them.
IMPLIES, OR, AND, NOT, COMPARE, ADD, MULTIPLY, MINUS, POWER = range(1, 10)
LEVELS = {
    "implies": IMPLIES, "or": OR, "and": AND,
    "=": COMPARE, "!=": COMPARE, "<": COMPARE, "<=": COMPARE, ">": COMPARE, ">=": COMPARE,
    "+": ADD, "-": ADD, "*": MULTIPLY, "/": MULTIPLY, "div": MULTIPLY, "mod": MULTIPLY, "^": POWER,
}  # fmt: skip
RIGHT = frozenset((IMPLIES, POWER))  # a ^ b ^ c is a ^ (b ^ c)

# Built-in functions and how many arguments each takes (least, most; None: any number).
ARITIES: dict[str, tuple[int, int | None]] = {
    "max": (2, None), "min": (2, None), "abs": (1, 1), "floor": (1, 1), "ceil": (1, 1), "lg": (1, 1),
    "fact": (1, 1), "binom": (2, 2),
}  # fmt: skip

ITEM_WORDS = _words("use source constant state function law tariff routine budget pool")
EVENTS = ("call", "declare", "assign", "test")

SUFFIXES = {"KiB": 2**10, "MiB": 2**20, "GiB": 2**30, "TiB": 2**40, "PiB": 2**50, "EiB": 2**60}  # IEC 80000-13

NESTING = 200  # levels, as the language promises; two or three stack frames a level stay far below Python's limit
TALLEST = NESTING + 50  # depth of an expression's tree and the blocks round it: a formula fits into the last block
LONGEST_CHAIN = 2_000  # operators in a row, as in a + b + …; more is no formula that a person wrote
LARGEST_DIGITS = 4_000  # of a number, written or worked out: Python itself refuses to print more than 4,300
LARGEST_SHEET = 2**20  # bytes, as the language promises
MOST_TOKENS = 120_000  # words and signs: ten thousand full lines, which are read within two seconds
MOST_PROBLEMS = 100  # told in one go; whoever has more mends these first
SHOWN = 40  # characters of the sheet's text that a message quotes
CANDIDATES = 2_000  # names looked through for the nearest one: comparing costs about 10 µs each


def visible(text: str) -> str:
    """The text with everything that could steer a terminal written out, such as `\\x1b` for an escape.

    Control characters (newline and tab among them), bidi controls and other invisible format characters, line and
    paragraph separators, and lone surrogates, private and unassigned characters.
    """
    if text.isascii() and text.isprintable():
        return text
    return "".join(c if c.isprintable() else _escaped(c) for c in text)


def _escaped(character: str) -> str:
    code = ord(character)
    if character == " " or (code >= 0xA0 and character.isspace() and code not in (0x2028, 0x2029)):
        return " "  # wide and narrow spaces are harmless
    if code < 0x100:
        return f"\\x{code:02x}"
    return f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"


def quoted(text: str) -> str:
    """The text as a message quotes it: visible, in quotes, cut where it is long."""
    return f"'{visible(text[:SHOWN])}…'" if len(text) > SHOWN else f"'{visible(text)}'"


def nearest_word(word: str, words: Iterable[str]) -> str | None:
    """The word of the language that is most like a misspelt one; stricter than for names, since it changes how what
    follows is read."""
    return nearest(word, sorted(words), likeness=0.7)


def nearest(word: str, known: Iterable[str], likeness: float = 0.6) -> str | None:
    """The known name that is most like the word, if any is."""
    from difflib import get_close_matches
    from itertools import islice

    if len(word) > SHOWN:
        return None
    candidates = {k.lower(): k for k in islice(known, CANDIDATES) if len(k) <= SHOWN and k != word}
    letters = sorted(word.lower())
    found = [k for k in candidates if len(k) == len(word) and sorted(k) == letters]  # two letters swapped, most often
    found = found or get_close_matches(word.lower(), candidates, n=1, cutoff=likeness)
    return candidates[found[0]] if found else None
