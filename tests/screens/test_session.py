"""The session: text, history, verdicts and steps, without a screen."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from workbench.screens.saving import ChangedOnDisk, NotSaved
from workbench.screens.session import Session

SHEET = """\
sheet "Wake-ups"   # kept

tariff core
  counter time in ms
end

routine wake(samples: nat)
  claim elapsed: spent time = 3*samples   # kept too
  measure samples
is
  if samples > 0 then
    spend 3 time
    wake(samples - 1)
  end
end
"""


@pytest.fixture
def session(tmp_path: Path) -> Session:
    path = tmp_path / "wake.ullage"
    path.write_text(SHEET, encoding="utf-8")
    return Session.open(str(path))


def judged(session: Session) -> Session:
    version, report = session.judge(session.version, lambda: False)
    assert session.take_report(version, report)
    return session


def test_a_claim_has_no_verdict_before_it_is_judged(session: Session) -> None:
    (place,) = session.claims()
    assert session.verdict(place) is None
    report = judged(session).verdict(session.claims()[0])
    assert report is not None and report.verdict == "proved"


def test_an_edit_changes_the_formula_and_nothing_else(session: Session) -> None:
    assert session.edit_claim(session.claims()[0], "spent time = 3*samples + 1")
    assert session.text == SHEET.replace("3*samples ", "3*samples + 1 ")
    assert session.changed


def test_a_wrong_formula_is_refuted_with_values(session: Session) -> None:
    session.edit_claim(session.claims()[0], "spent time = 3*samples + 1")
    report = judged(session).verdict(session.claims()[0])
    assert report is not None and report.verdict == "refuted"
    assert any(d.witness for d in report.obligations)


def test_a_report_of_an_older_text_is_not_taken(session: Session) -> None:
    version, report = session.judge(session.version, lambda: False)
    session.edit_claim(session.claims()[0], "spent time = samples")
    assert not session.take_report(version, report)
    assert session.verdict(session.claims()[0]) is None


def test_undo_and_redo_go_through_all_texts(session: Session) -> None:
    texts = [session.text]
    for n in range(5):
        session.edit_claim(session.claims()[0], f"spent time = {n}*samples")
        texts.append(session.text)
    for text in reversed(texts[:-1]):
        assert session.undo() and session.text == text
    assert not session.undo()
    for text in texts[1:]:
        assert session.redo() and session.text == text
    assert not session.redo()


def test_steps_go_forward_one_by_one_all_at_once_and_back(session: Session) -> None:
    judged(session)
    total = len(session.lines())
    assert total > 2 and session.shown == 1
    session.step(1)
    assert session.shown == 2
    session.all_steps()
    assert session.shown == total
    session.step(1)
    assert session.shown == total
    session.step(-1)
    assert session.shown == total - 1


def test_an_unreadable_sheet_opens_with_its_problems(tmp_path: Path) -> None:
    path = tmp_path / "broken.ullage"
    path.write_text("routine (", encoding="utf-8")
    session = Session.open(str(path))
    assert session.loaded.problems and session.claims() == []
    session.set_text(SHEET)
    assert not session.loaded.problems and len(session.claims()) == 1


def test_saving_keeps_the_mode_and_leaves_no_other_file(session: Session) -> None:
    path = Path(session.disk.path)
    path.chmod(0o640)
    session.edit_claim(session.claims()[0], "spent time <= 3*samples")
    session.save()
    assert path.read_text(encoding="utf-8") == session.text
    assert path.stat().st_mode & 0o777 == 0o640
    assert [p.name for p in path.parent.iterdir()] == ["wake.ullage"]
    assert not session.changed


def test_a_sheet_changed_on_disk_is_not_written_over_unasked(session: Session) -> None:
    path = Path(session.disk.path)
    path.write_text(SHEET + "# theirs\n", encoding="utf-8")
    session.edit_claim(session.claims()[0], "spent time <= 3*samples")
    with pytest.raises(ChangedOnDisk):
        session.save()
    assert path.read_text(encoding="utf-8").endswith("# theirs\n")
    session.save(over=True)
    assert path.read_text(encoding="utf-8") == session.text


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everything")
def test_a_read_only_file_says_so_and_keeps_the_text(session: Session) -> None:
    Path(session.disk.path).chmod(0o400)
    session.edit_claim(session.claims()[0], "spent time <= 3*samples")
    with pytest.raises(NotSaved):
        session.save()
    assert session.changed
