"""What a person sees: a live bar on a real pseudo terminal, lines elsewhere."""

from __future__ import annotations

import contextlib
import io
import re
import sys
from pathlib import Path

import pytest

from fleetcount.cli.screen import LINE_SECONDS, Screen, amount, duration, status
from fleetcount.fleet.snapshot import Snapshot
from tests.fleet.program import LONGEST, PROGRAM, environment, line

MOMENT = Snapshot(top=30, done=25.0, remaining=75.0, settled=10, units=40, rate=1.5e8, cores=2, seconds=1.0)
BAR = "━"


class Terminal:
    """As much of a terminal as a bar needs: lines that can be overwritten and erased."""

    def __init__(self, columns: int) -> None:
        self.columns = columns
        self.lines = [""]
        self.row = self.column = 0
        self.shown: list[str] = []
        """Every line as it stood when the cursor left it."""

    def feed(self, text: str) -> None:
        for part in re.split(r"(\x1b\[[0-9;?]*[A-Za-z]|[\r\n])", text):
            self._put(part)

    def _put(self, part: str) -> None:
        if part in ("\r", "\n"):
            self._leave()
            self.row, self.column = self.row + (part == "\n"), 0
            self.lines += [""] * (self.row + 1 - len(self.lines))
        elif part.endswith("K") and part.startswith("\x1b["):
            self.lines[self.row] = "" if "2" in part else self.lines[self.row][: self.column]
        elif part.endswith("A") and part.startswith("\x1b["):
            self.row = max(0, self.row - int(part[2:-1] or 1))
        elif part and not part.startswith("\x1b"):
            line = self.lines[self.row].ljust(self.column)
            self.lines[self.row] = line[: self.column] + part + line[self.column + len(part) :]
            self.column += len(part)

    def _leave(self) -> None:
        self.shown.append(self.lines[self.row])

    @property
    def bars(self) -> list[str]:
        """The live line, each time it was drawn."""
        return [line for line in self.shown if BAR in line]


@pytest.mark.skipif(sys.platform == "win32", reason="needs a pseudo terminal")
@pytest.mark.parametrize(("columns", "stop"), [(100, False), (40, True)])
def test_the_bar(columns: int, stop: bool, tmp_path: Path) -> None:
    """The bar appears, fits the terminal, and is gone when the count is done or stopped with Ctrl-C."""
    import pexpect  # type: ignore[import-untyped]

    env = environment()
    del env["COLUMNS"]
    env["TERM"] = "xterm-256color"
    arguments = line() if stop else ("count", "square", "walk", "--to", "21")
    child = pexpect.spawn(
        PROGRAM[0],
        [*PROGRAM[1:], *arguments],
        cwd=str(tmp_path),
        env=env,
        dimensions=(24, columns),
        encoding="utf-8",
        timeout=LONGEST,
    )
    seen = io.StringIO()
    child.logfile_read = seen
    try:
        if stop:
            child.expect("starting 2 cores")
        child.expect(rf"n=2.*{BAR}")
        if stop:
            child.sendintr()
        child.expect(pexpect.EOF)
    finally:
        child.close(force=True)
    terminal = Terminal(columns)
    terminal.feed(seen.getvalue())
    assert child.exitstatus == (3 if stop else 0)
    assert len(terminal.bars) > 1
    drawn = [bar.replace("^C", "").rstrip() for bar in terminal.bars]
    assert all(re.match(r"n=\d+ ", bar) and "%" in bar for bar in drawn), drawn
    assert all(len(bar) <= columns - 2 for bar in drawn), "a ^C would break the line"
    wide = any("units" in bar and "nodes/s" in bar for bar in terminal.bars)
    assert wide == (columns == 100)
    left = [shown.rstrip() for shown in terminal.lines if shown.strip()]
    assert not any(BAR in shown for shown in left)
    if stop:
        assert "the same line goes on from there" in left[-1]
    else:
        assert "  21  2408806028" in left
    assert seen.getvalue().rindex("\x1b[?25h") > seen.getvalue().rindex("\x1b[?25l"), "the cursor is back"


def test_lines_where_there_is_no_terminal(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Without a terminal a line comes now and then, the first one soon; `quiet` says nothing at all."""
    clock = [100.0]
    monkeypatch.setattr("fleetcount.cli.screen.time.monotonic", lambda: clock[0])
    with Screen() as screen, Screen(quiet=True) as silent:
        for second in range(60):
            clock[0] = 100.0 + second
            screen.moment(MOMENT)
            silent.moment(MOMENT)
        silent.stage("starting")
        silent.note("something")
    said = capsys.readouterr()
    assert said.out == ""
    lines = said.err.splitlines()
    assert len(lines) == 1 + (60 - 2) // LINE_SECONDS
    assert set(lines) == {"to n=30: 25.0%, 10/40 units, 150 Mnodes/s on 2 cores, 0 s left"}


@pytest.mark.parametrize("stderr", [None, "/dev/full"])
def test_nobody_can_read_it(stderr: str | None, monkeypatch: pytest.MonkeyPatch) -> None:
    """A standard error that is closed, or on a full disk, does not stop a count."""
    if stderr is not None and not Path(stderr).exists():
        pytest.skip(f"needs {stderr}")
    file = None if stderr is None else Path(stderr).open("w")  # noqa: SIM115 - it cannot be closed cleanly
    with monkeypatch.context() as patched:
        patched.setattr(sys, "stderr", file)
        with Screen() as screen:
            screen.stage("starting")
            screen.note("something")
            screen._last = 0.0
            screen.moment(MOMENT)
    if file is not None:
        with contextlib.suppress(OSError):
            file.close()


def test_a_status_never_says_done_too_soon() -> None:
    """99.99 is the most that is said while anything is left; nothing left is done."""
    nearly = Snapshot(10, 1e18, 1.0, 9, 10, 1e8, 1, 1.0)
    assert "100.0%, 9/10 units" in status(nearly) or "99.9" in status(nearly)
    assert nearly.share < 1.0
    done = Snapshot(10, 5.0, 0.0, 10, 10, 1e8, 1, 1.0)
    assert done.share == 1.0 and status(done).endswith("on 1 core, done")


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0 "),
        (999.0, "999 "),
        (1000.0, "1 k"),
        (1.5e8, "150 M"),
        (2e9, "2 G"),
        (3.456e13, "34.6 T"),
        (1e30, "1e+15 P"),
    ],
)
def test_amounts(value: float, text: str) -> None:
    """Three digits and the prefixes of the trade."""
    assert amount(value) == text


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (None, "unknown"),
        (0.2, "0 s"),
        (99.0, "99 s"),
        (100.0, "1 min 40 s"),
        (5999.0, "99 min 59 s"),
        (7500.0, "2 h 05 min"),
        (86400.0 * 10, "10 days"),
        (86400.0 * 365.25 * 5, "5 years"),
        (86400.0 * 365.25 * 5e4, "50 k years"),
        (1e300, "over a billion years"),
    ],
)
def test_durations(seconds: float | None, text: str) -> None:
    """Time spans in the two largest of their units, however long."""
    assert duration(seconds) == text
