"""The way in: what `ullage` answers before any command has been loaded, and how calls end."""

from __future__ import annotations

import os
import subprocess
import sys
import types
from collections.abc import Callable
from pathlib import Path

import pytest

import workbench
from workbench import __main__ as entry
from workbench.errors import UsageError
from workbench.exits import Exit

ROOT = Path(__file__).resolve().parents[2]
Call = Callable[[list[str]], int]


def ullage(*arguments: str, **options: object) -> subprocess.CompletedProcess[str]:
    return subprocess.run(  # type: ignore[call-overload, no-any-return]
        [sys.executable, "-m", "workbench", *arguments],
        cwd=ROOT,
        text=True,
        stdin=subprocess.DEVNULL,
        check=False,
        **({"capture_output": True} | options),
    )


@pytest.fixture
def command(monkeypatch: pytest.MonkeyPatch) -> Callable[[Call], None]:
    """Puts a function in the place of the check command."""

    def put(main: Call) -> None:
        module = types.ModuleType("workbench.commands.check")
        module.main = main  # type: ignore[attr-defined]
        monkeypatch.setitem(sys.modules, "workbench.commands.check", module)

    return put


def test_version_is_the_packages() -> None:
    done = ullage("--version")
    assert (done.returncode, done.stdout, done.stderr) == (0, f"ullage {workbench.__version__}\n", "")


@pytest.mark.parametrize("words", [["--help"], ["-h"], ["help"]])
def test_help_names_every_command_and_fits_a_terminal(words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert entry.main(words) == Exit.OK
    text = capsys.readouterr().out
    assert all(f"\n  {name} " in text for name in entry.COMMANDS)
    assert max(len(line.removesuffix(" (not there yet)")) for line in text.splitlines()) <= 100


def test_help_says_which_commands_are_not_there_yet(capsys: pytest.CaptureFixture[str]) -> None:
    entry.main(["--help"])
    marked = {line.split()[0] for line in capsys.readouterr().out.splitlines() if line.endswith("(not there yet)")}
    present = {path.stem for path in (ROOT / "workbench" / "commands").glob("*.py")}
    assert marked == set(entry.COMMANDS) - present


def test_command_gets_the_words_after_its_name_and_its_status_is_the_programs(command: Callable[[Call], None]) -> None:
    seen: list[list[str]] = []
    command(lambda arguments: seen.append(arguments) or Exit.UNPROVED)  # type: ignore[func-returns-value]
    assert entry.main(["check", "a.ullage", "--json"]) == 1
    assert entry.main(["help", "check"]) == 1
    assert seen == [["a.ullage", "--json"], ["--help"]]


def test_wrong_use_is_a_message_and_status_2(
    command: Callable[[Call], None], capsys: pytest.CaptureFixture[str]
) -> None:
    def main(arguments: list[str]) -> int:
        raise UsageError("--jobs wants a number, not 'x'")

    command(main)
    assert entry.main(["check"]) == Exit.UNUSABLE
    assert capsys.readouterr() == ("", "ullage: --jobs wants a number, not 'x'\n")


def test_command_that_is_not_there_yet_says_so(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setitem(entry.COMMANDS, "ponder", ("", ""))
    assert entry.main(["ponder"]) == Exit.UNUSABLE
    assert capsys.readouterr().err == f"ullage: ullage ponder is not there yet in version {workbench.__version__}\n"


def test_missing_package_inside_a_command_is_not_taken_for_a_missing_command(monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(name: str) -> None:
        raise ModuleNotFoundError("No module named 'sympy'", name="sympy")

    monkeypatch.setattr("importlib.import_module", fail)
    with pytest.raises(ModuleNotFoundError, match="sympy"):
        entry.main(["check"])


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["chek"], "'chek' is no command, and no file or folder of that name is here; is check meant?"),
        (["no/such.ullage"], "'no/such.ullage' is no command, and no file or folder of that name is here"),
        (["chek", "a", "b"], "'chek' is no command"),
        (["--frob"], "there is no option '--frob'; see ullage --help"),
        ([str(ROOT), str(ROOT)], "the workbench opens one file or folder"),
        (["bell\x07"], "'bell\\x07' is no command"),
    ],
)
def test_what_cannot_be_opened_is_named(words: list[str], message: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert entry.main(words) == Exit.UNUSABLE
    assert message in capsys.readouterr().err


@pytest.mark.parametrize(
    ("words", "expected"), [([], (None, False)), (["specs"], ("specs", False)), (["--plain", "specs"], ("specs", True))]
)
def test_a_path_or_nothing_opens_the_workbench(
    words: list[str], expected: tuple[str | None, bool], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(ROOT)
    opened: list[tuple[str | None, bool]] = []

    def main(path: str | None, *, plain: bool) -> int:
        opened.append((path, plain))
        return 0

    module = types.ModuleType("workbench.screens.app")
    module.main = main  # type: ignore[attr-defined]
    # With its room, which need not be there: importing a submodule imports the package above it first.
    monkeypatch.setitem(sys.modules, "workbench.screens", types.ModuleType("workbench.screens"))
    monkeypatch.setitem(sys.modules, "workbench.screens.app", module)
    assert entry.main(words) == 0
    assert opened == [expected]


def test_interrupt_ends_with_130_and_one_line(
    command: Callable[[Call], None], capsys: pytest.CaptureFixture[str]
) -> None:
    def main(arguments: list[str]) -> int:
        raise KeyboardInterrupt

    command(main)
    assert entry.main(["check"]) == Exit.INTERRUPTED
    assert capsys.readouterr() == ("", "ullage: interrupted\n")


def test_reader_that_went_away_ends_the_program_silently() -> None:
    reading, writing = os.pipe()
    os.close(reading)
    try:
        done = ullage("--help", capture_output=False, stdout=writing, stderr=subprocess.PIPE)
    finally:
        os.close(writing)
    assert (done.returncode, done.stderr) == (Exit.PIPE_CLOSED, "")


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="this system has no /dev/full")
def test_full_disk_is_a_message_and_status_2() -> None:
    with open("/dev/full", "w") as full:
        done = ullage("--help", capture_output=False, stdout=full, stderr=subprocess.PIPE)
    assert done.returncode == Exit.UNUSABLE
    assert done.stderr == "ullage: No space left on device\n"


def test_terminal_that_lacks_a_character_gets_an_escape() -> None:
    done = ullage("fichier-\N{LATIN SMALL LETTER E WITH ACUTE}", env=os.environ | {"PYTHONIOENCODING": "ascii"})
    assert done.returncode == Exit.UNUSABLE
    assert done.stderr.startswith("ullage: 'fichier-\\xe9' is no command")


def test_statuses_of_the_entry_are_those_of_the_commands() -> None:
    ours = (entry.OK, entry.UNUSABLE, entry.INTERRUPTED, entry.PIPE_CLOSED)
    assert ours == (Exit.OK, Exit.UNUSABLE, Exit.INTERRUPTED, Exit.PIPE_CLOSED)
