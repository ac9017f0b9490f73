"""What the workbench works on: one sheet's text with its history, its verdicts, and what is selected. Knows no
Textual.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from workbench.library.checking import check_loaded
from workbench.library.loading import Loaded, load_text
from workbench.program.priced import Claim, Program, Specification
from workbench.program.pricing import price
from workbench.proof.derivation import Line, derivation
from workbench.proof.report import ClaimReport, Decided, RoutineReport, SheetReport
from workbench.screens.saving import Disk
from workbench.sheet import tree
from workbench.sheet.walks import headers_in
from workbench.sheet.writer import replace


@dataclass(frozen=True, slots=True)
class ClaimPlace:
    """A claim of the sheet: which routine's, of which specification in it ("" for the routine itself)."""

    routine: str
    specification: str
    claim: Claim


@dataclass(frozen=True, slots=True)
class Group:
    """Obligations that belong together: of one claim, or of no single claim of a routine, a law or a function."""

    title: str
    routine: str
    claim: ClaimReport | None
    obligations: tuple[Decided, ...]


@dataclass(slots=True)
class Session:
    """One open sheet. `text` is what stands in the workbench, `disk` what is known of the file.

    `version` counts changes of the text; a report belongs to the version that it was made from.
    """

    disk: Disk
    text: str
    loaded: Loaded
    program: Program | None = None
    version: int = 0
    report: SheetReport | None = None
    report_version: int = -1
    selected: int = 0  # which obligation, over all groups
    shown: int = 1  # steps of its derivation that are shown
    _past: list[str] = field(default_factory=list)
    _future: list[str] = field(default_factory=list)
    _lines: tuple[tuple[int, int], tuple[Line, ...]] | None = None

    @classmethod
    def open(cls, path: str) -> Session:
        """The sheet at the path; an unreadable one opens too, with its problems. Raises OSError where the file
        cannot be read.
        """
        disk = Disk.read(path)
        session = cls(disk, disk.text, load_text(path, disk.text))
        session._priced()
        return session

    # -------------------------------------------------------------- the text
    @property
    def changed(self) -> bool:
        """Whether there is something to save."""
        return self.text != self.disk.text

    def set_text(self, text: str) -> None:
        """A new text; the old one can be had back."""
        if text == self.text:
            return
        self._past.append(self.text)
        self._future.clear()
        self._take(text)

    def _take(self, text: str) -> None:
        self.text = text
        self.version += 1
        self.loaded = load_text(self.disk.path, text)
        self._priced()

    def _priced(self) -> None:
        self.program = None
        if self.loaded.sheet is not None and not self.loaded.problems:
            try:
                self.program = price(self.loaded.path, self.loaded.sheet, self.loaded.used)
            except RecursionError:
                self.program = None

    def undo(self) -> bool:
        """The text before the last change; False where there is none."""
        if not self._past:
            return False
        self._future.append(self.text)
        self._take(self._past.pop())
        return True

    def redo(self) -> bool:
        """The text that was undone last; False where there is none."""
        if not self._future:
            return False
        self._past.append(self.text)
        self._take(self._future.pop())
        return True

    def save(self, *, over: bool = False) -> None:
        """Writes the text; raises ChangedOnDisk where somebody else has written meanwhile, unless `over` says to go
        on.
        """
        self.disk = self.disk.written(self.text, over=over)

    # -------------------------------------------------------------- claims
    def claims(self) -> list[ClaimPlace]:
        """The claims of the sheet's own routines, in the order of the text."""
        found: list[ClaimPlace] = []
        if self.program is None:
            return found
        for routine in self.program.routines.values():
            if routine.sheet == self.program.path:
                for spec in specifications(self, routine.name):
                    found += [ClaimPlace(routine.name, spec.label, c) for c in spec.claims]
        return found

    def formula_of(self, place: ClaimPlace) -> str:
        """The claim's formula as it stands in the text."""
        written = self._written(place)
        if written is None:
            return place.claim.text
        return self.text[written.formula_span.start : written.formula_span.end]

    def edit_claim(self, place: ClaimPlace, formula: str) -> bool:
        """Puts another formula into the text; False where the claim is not in the text (the tool worked it out)."""
        written = self._written(place)
        if written is None:
            return False
        self.set_text(replace(self.text, written.formula_span, formula))
        return True

    def _written(self, place: ClaimPlace) -> tree.Claim | None:
        if self.loaded.sheet is None or place.claim.inferred:
            return None
        for item in self.loaded.sheet.items:
            if isinstance(item, tree.Routine) and item.name == place.routine:
                for header in headers_in(item):
                    for claim in header.claims:
                        if claim.span == place.claim.span:
                            return claim
        return None

    def verdict(self, place: ClaimPlace) -> ClaimReport | None:
        """The claim's report; None while it is not known for the present text."""
        if self.report is None or self.report_version != self.version:
            return None
        for routine in self.report.routines:
            if routine.routine.name == place.routine:
                for c in routine.claims:
                    if c.specification == place.specification and c.claim.label == place.claim.label:
                        return c
        return None

    # -------------------------------------------------------------- proofs
    def judge(self, version: int, cancelled: Callable[[], bool]) -> tuple[int, SheetReport]:
        """The report of the present text; runs for long, away from the screen. Raises Stopped when cancelled."""
        return version, check_loaded(self.loaded, cancelled=cancelled)

    def take_report(self, version: int, report: SheetReport) -> bool:
        """Keeps a report that belongs to the present text; others come too late."""
        if version != self.version:
            return False
        self.report, self.report_version = report, version
        self.selected = min(self.selected, max(0, len(self.obligations()) - 1))
        self.shown = 1
        return True

    def groups(self) -> list[Group]:
        """All obligations of the present report, claim by claim."""
        if self.report is None or self.report_version != self.version:
            return []
        found: list[Group] = []
        for m in self.report.mathematics:
            found.append(Group(f"{m.kind} {m.name}", "", None, m.obligations))
        for r in self.report.routines:
            found += _routine_groups(r)
        return [g for g in found if g.obligations]

    def obligations(self) -> list[Decided]:
        """All of them in one row, as `selected` counts."""
        return [d for g in self.groups() for d in g.obligations]

    @property
    def obligation(self) -> Decided | None:
        """The selected one."""
        every = self.obligations()
        return every[self.selected] if self.selected < len(every) else None

    def select(self, index: int) -> None:
        """Another obligation, with only the first step of its derivation shown."""
        every = self.obligations()
        index = max(0, min(index, len(every) - 1))
        if index != self.selected:
            self.selected, self.shown = index, 1

    def select_claim(self, place: ClaimPlace) -> None:
        """The first obligation of the claim, one that is not proved if there is one."""
        index = 0
        for g in self.groups():
            here = g.claim is not None and g.routine == place.routine
            if (
                here
                and g.claim is not None
                and (g.claim.specification, g.claim.claim.label)
                == (
                    place.specification,
                    place.claim.label,
                )
            ):
                order = {"refuted": 0, "open": 1, "proved": 2}
                worst = min(range(len(g.obligations)), key=lambda i: order[g.obligations[i].verdict])
                self.select(index + worst)
                return
            index += len(g.obligations)

    def lines(self) -> tuple[Line, ...]:
        """The derivation of the selected obligation, all of it."""
        d = self.obligation
        if d is None or self.report is None or self.report.workings is None:
            return ()
        key = (self.version, self.selected)
        if self._lines is None or self._lines[0] != key:
            w = self.report.workings
            self._lines = (key, derivation(w.algebra, w.laws, w.functions, d).lines)
        return self._lines[1]

    def step(self, by: int) -> None:
        """That many steps more of the derivation, or fewer."""
        self.shown = max(1, min(self.shown + by, max(1, len(self.lines()))))

    def all_steps(self) -> None:
        self.shown = max(1, len(self.lines()))


def specifications(session: Session, routine: str) -> list[Specification]:
    """The routine's specification, then those of its loops and stages; with claims that were worked out, once they
    are known.
    """
    program = session.program
    if program is None or routine not in program.routines:
        return []
    if session.report is not None and session.report_version == session.version:
        report = next((r for r in session.report.routines if r.routine.name == routine), None)
        if report is not None:
            by_label: dict[str, list[Claim]] = {}
            for c in report.claims:
                by_label.setdefault(c.specification, []).append(c.claim)
            span = report.routine.span
            return [
                Specification(label, report.routine.spec.givens if not label else (), tuple(claims), None, span)
                for label, claims in by_label.items()
            ]
    return [program.routines[routine].spec]


def _routine_groups(r: RoutineReport) -> list[Group]:
    name = r.routine.name
    found = [Group(f"{name}.{c.label}", name, c, c.obligations) for c in r.claims]
    found.append(Group(f"{name}: what it owes beside its claims", name, None, r.obligations))
    return found
