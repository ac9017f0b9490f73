"""The workbench in a real pseudo-terminal, read back by a terminal emulator library."""

from __future__ import annotations

import os
import pty
import select
import struct
import subprocess
import sys
import termios
import time
from fcntl import ioctl
from pathlib import Path

import pyte
import pytest

ROOT = Path(__file__).resolve().parents[2]
KEYS = {"enter": "\r", "down": "\x1b[B", "tab": "\t"}
PATIENCE = 30.0  # seconds until something must be on the screen, on a busy machine


class Terminal:
    """A child in a pty, and the screen that it draws."""

    def __init__(self, arguments: list[str], columns: int, lines: int, folder: Path) -> None:
        self.screen = pyte.Screen(columns, lines)
        self.stream = pyte.ByteStream(self.screen)
        self.master, slave = pty.openpty()
        ioctl(slave, termios.TIOCSWINSZ, struct.pack("HHHH", lines, columns, 0, 0))
        environment = {**os.environ, "TERM": "xterm-256color", "PYTHONPATH": str(ROOT), "HOME": str(folder)}
        environment.pop("NO_COLOR", None)
        self.child = subprocess.Popen(
            [sys.executable, "-m", "workbench", *arguments], stdin=slave, stdout=slave, stderr=slave,
            cwd=folder, env=environment, start_new_session=True,
        )  # fmt: skip
        os.close(slave)

    def text(self) -> str:
        return "\n".join(self.screen.display)

    def read(self, seconds: float = 0.2) -> None:
        end = time.monotonic() + seconds
        while (left := end - time.monotonic()) > 0:
            if select.select([self.master], [], [], left)[0]:
                try:
                    self.stream.feed(os.read(self.master, 65536))
                except OSError:
                    return

    def until(self, words: str) -> None:
        end = time.monotonic() + PATIENCE
        while words not in self.text():
            assert time.monotonic() < end, f"{words!r} never came:\n{self.text()}"
            self.read()

    def press(self, *keys: str) -> None:
        for key in keys:
            os.write(self.master, KEYS.get(key, key).encode())
            self.read(0.15)

    def __del__(self) -> None:
        if self.child.poll() is None:
            self.child.kill()
            self.child.wait()

    def close(self) -> int:
        end = time.monotonic() + PATIENCE
        while self.child.poll() is None and time.monotonic() < end:
            self.read(0.1)
        self.child.kill()
        os.close(self.master)
        return self.child.wait()


@pytest.mark.parametrize(("columns", "lines"), [(80, 24), (160, 50)])
def test_a_claim_is_broken_read_stepped_mended_saved_and_opened_again(tmp_path: Path, columns: int, lines: int) -> None:
    sheet = tmp_path / "first.ullage"
    sheet.write_bytes((ROOT / "specs" / "01-first-look.ullage").read_bytes())
    before = sheet.read_text(encoding="utf-8")
    terminal = Terminal([str(sheet)], columns, lines, tmp_path)
    terminal.until("verified")
    terminal.press("enter")
    terminal.until("Enter proves it")
    terminal.press(" ", "+", " ", "1", "enter")
    terminal.until("! refuted")
    terminal.until("broken by")
    terminal.press("n", "a")
    terminal.until("that is all of it")
    terminal.press("u")
    terminal.until("verified")
    terminal.press("enter")
    terminal.until("Enter proves it")
    terminal.press(" ", "+", " ", "0", "enter")
    terminal.until("verified")
    terminal.press("s")
    terminal.until("saved")
    terminal.press("q")
    assert terminal.close() == 0
    assert sheet.read_text(encoding="utf-8") == before.replace("= 3*samples", "= 3*samples + 0")
    again = Terminal([str(sheet)], columns, lines, tmp_path)
    again.until("3*samples + 0")
    again.until("verified")
    again.press("q")
    assert again.close() == 0


def test_a_terminal_that_goes_away_ends_the_program_and_keeps_the_text(tmp_path: Path) -> None:
    sheet = tmp_path / "first.ullage"
    sheet.write_bytes((ROOT / "specs" / "01-first-look.ullage").read_bytes())
    terminal = Terminal([str(sheet)], 80, 24, tmp_path)
    terminal.until("verified")
    terminal.press("enter")
    terminal.until("Enter proves it")
    terminal.press(" ", "+", " ", "1", "enter")
    terminal.until("! refuted")
    os.close(terminal.master)
    assert terminal.child.wait(PATIENCE) == 129
    again = Terminal([str(sheet)], 80, 24, tmp_path)
    again.until("take it up again")
    again.press("y")
    again.until("! refuted")
    again.press("q")
    again.until("not saved")
    again.press("d")
    assert again.close() == 0


def test_a_terminal_that_cannot_show_it_gets_a_hint(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "workbench", str(ROOT / "specs" / "01-first-look.ullage")],
        env={**os.environ, "TERM": "dumb", "PYTHONPATH": str(ROOT)}, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 2
    assert "ullage check" in done.stderr and "Traceback" not in done.stderr


def test_with_nothing_the_demo_sheets_are_offered(tmp_path: Path) -> None:
    terminal = Terminal([], 80, 24, tmp_path)
    terminal.until("01-first-look.ullage")
    terminal.press("enter")
    terminal.until("wake")
    terminal.press("q")
    assert terminal.close() == 0
