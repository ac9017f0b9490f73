"""Which measure falls: the one that is written, or the first of the usual ones under which all that is owed is
proved.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from itertools import product

from workbench.program.measures import Measure, Site, loop_candidates, routine_candidates
from workbench.program.obligation import Obligation
from workbench.program.obligations import Owed
from workbench.program.priced import Program
from workbench.proof.deciding import Finding

# Combinations of measures tried for routines that call each other in a circle.
MEASURE_LIMIT = 60


class Choosing:
    """Settles the measures of some routines and their loops."""

    def __init__(
        self,
        program: Program,
        owed: Mapping[str, Owed],
        groups: Mapping[str, frozenset[str]],
        decide: Callable[[Obligation], Finding],
    ) -> None:
        self.program = program
        self.owed = owed
        self.groups = groups
        self.decide = decide

    def findings(self) -> dict[str, list[Finding]]:
        """What became of the measures' obligations, by routine."""
        found: dict[str, list[Finding]] = {name: [] for name in self.owed}
        for name, owed in self.owed.items():
            found[name] += self._loops(owed)
        done: set[str] = set()
        for name in self.owed:
            group = sorted(self.groups[name] & set(self.owed))
            if group and name not in done:
                done.update(group)
                for f in self._group(group):
                    found[f.obligation.routine].append(f)
        return found

    def _loops(self, owed: Owed) -> list[Finding]:
        found: list[Finding] = []
        for label in dict.fromkeys(s.specification for s in owed.sites if s.once_more):
            sites = [s for s in owed.sites if s.once_more and s.callee == label]
            written = owed.specifications[label].measure
            tries = [written] if written is not None else loop_candidates(owed.loops[label])
            found += self._first_that_falls(({label: m} for m in tries), sites, written is not None)
        return found

    def _group(self, group: Sequence[str]) -> list[Finding]:
        """Routines that call each other in a circle compare their measures with each other."""
        sites = [
            s
            for name in group
            for s in self.owed[name].sites
            if not s.once_more and s.callee in self.groups[name]
        ]
        options = []
        for name in group:
            routine = self.program.routines[name]
            written = routine.spec.measure
            options.append([written] if written is not None else routine_candidates(routine))
        all_written = all(self.program.routines[n].spec.measure is not None for n in group)
        tries = (dict(zip(group, choice, strict=True)) for choice in product(*options))
        return self._first_that_falls(tries, sites, all_written) if sites else []

    def _first_that_falls(
        self, tries: Iterable[Mapping[str, Measure]], sites: Sequence[Site], written: bool
    ) -> list[Finding]:
        """What is owed under the first of the measures that falls everywhere; under the first one tried, if none
        does.
        """
        best: list[Finding] = []
        for number, measures in enumerate(tries):
            if number >= MEASURE_LIMIT:
                break
            findings = self._under(measures, sites, to_the_end=written)
            if all(f.proved is not None for f in findings):
                return findings
            best = best or findings
        best = best or [Finding(o) for o in sites[0].make((), ())[:1]]
        if not written:
            for f in best:
                if f.proved is None:
                    f.witness, f.weak, f.residue = None, None, None
                    f.why = "no measure is written, and none of those tried falls"
        return best

    def _under(self, measures: Mapping[str, Measure], sites: Sequence[Site], *, to_the_end: bool) -> list[Finding]:
        findings: list[Finding] = []
        for site in sites:
            own = measures[site.specification if site.once_more else site.routine]
            for o in site.make(own, measures[site.callee]):
                findings.append(self.decide(o))
                if findings[-1].proved is None and not to_the_end:
                    return findings
        return findings
