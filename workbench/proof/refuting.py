"""Values that break an obligation, found by exact evaluation; and claims that a real run breaks.

An obligation without middle states is refuted by values that satisfy its facts and falsify its goal. With middle
states such values only say that what the callees claim is too weak; then a run of the program must break the claim
itself.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from workbench.algebra.evaluate import Evaluator, TooLarge, Undefined
from workbench.program.obligation import Obligation
from workbench.proof.sampling import Sampler, Values

# Tries before a search for a proof, and after one has failed.
QUICK_TRIES = 40
THOROUGH_TRIES = 600


@dataclass(frozen=True, slots=True)
class Trial:
    """`broken`: values of all names that satisfy the facts and falsify the goal. `reached`: some values satisfy the
    facts.
    """

    broken: Values | None
    reached: bool


def tried(obligation: Obligation, evaluator: Evaluator, tries: int, seed: int = 1) -> Trial:
    """Small values and edges, by exact evaluation."""
    facts = [f.formula for f in obligation.facts]
    try:
        goal = evaluator.compiled(obligation.goal)
        sampler = Sampler(facts, [obligation.goal], evaluator, seed)
    except TooLarge:
        return Trial(None, True)  # too long to evaluate: nothing is known
    reached = False
    for values in sampler.draw(tries):
        reached = True
        try:
            if not goal(values):
                return Trial(tidied(values), True)
        except (Undefined, TooLarge):
            continue
    return Trial(None, reached)


def tidied(values: Values) -> Values:
    """Whole numbers as integers."""
    result: Values = {}
    for name, value in values.items():
        if isinstance(value, Fraction) and value.denominator == 1:
            value = value.numerator
        result[name] = value
    return result
