"""What a person sees while a count runs: a live bar on a terminal, a line now and then elsewhere."""

from __future__ import annotations

import contextlib
import sys
import time
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from fleetcount.fleet.snapshot import Snapshot
    from fleetcount.series.table import CoefficientTable

LINE_SECONDS = 10.0
_NARROW = 60
_HOPELESS_YEARS = 1e9
_FIRST_LINE_SECONDS = 2.0


def amount(value: float) -> str:
    """A number of three digits with the trade's prefixes: `112 M`."""
    for size, prefix in ((1e15, "P"), (1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k")):
        if value >= size:
            return f"{value / size:.3g} {prefix}"
    return f"{value:.3g} "


def duration(seconds: float | None) -> str:
    """A time span in the two largest of its units: `2 h 05 min`."""
    if seconds is None:
        return "unknown"
    if seconds < 100:
        return f"{seconds:.0f} s"
    minutes, rest = divmod(round(seconds), 60)
    if minutes < 100:
        return f"{minutes} min {rest:02d} s"
    hours, minutes = divmod(minutes, 60)
    if hours < 72:
        return f"{hours} h {minutes:02d} min"
    days = hours / 24
    years = days / 365.25
    if years > _HOPELESS_YEARS:
        return "over a billion years"
    return f"{days:.0f} days" if days < 1000 else f"{amount(years).strip()} years"


def status(snapshot: Snapshot) -> str:
    """A moment as one line."""
    left = "done" if snapshot.remaining <= 0 else f"{duration(snapshot.seconds_left)} left"
    return (
        f"to n={snapshot.top}: {100 * snapshot.share:.1f}%, {snapshot.settled}/{snapshot.units} units, "
        f"{amount(snapshot.rate)}nodes/s on {snapshot.cores} core{'s' * (snapshot.cores != 1)}, {left}"
    )


def _print(text: str) -> None:
    """A line on standard error; that nobody can read it, or a full disk, is no reason to stop counting."""
    with contextlib.suppress(OSError):
        print(text, file=sys.stderr, flush=True)


class Screen:
    """Observer of a count. A context manager, so that the bar goes away whatever happens."""

    def __init__(self, quiet: bool = False) -> None:
        self._quiet = quiet or sys.stderr is None
        self._live = not self._quiet and sys.stderr.isatty()
        self._progress: Any = None
        self._task: Any = None
        self._last = time.monotonic() - LINE_SECONDS + _FIRST_LINE_SECONDS

    def __enter__(self) -> Screen:
        return self

    def __exit__(self, *exc: object) -> None:
        self._close()

    def stage(self, text: str) -> None:
        """Say what is being done now."""
        self._say(f"{text} ...")

    def terms(self, table: CoefficientTable) -> None:
        """The first terms, in a short line each on the way to the long reading."""
        shown = ", ".join(str(count) for count in table.counts().values())
        self._say(f"terms from n={table.least} to n={table.final}: {shown}")

    def note(self, text: str) -> None:
        """Something to know."""
        self._say(text)

    def moment(self, snapshot: Snapshot) -> None:
        """Move the bar, or print a line if the last one is old enough."""
        if self._live:
            self._move(snapshot)
        elif not self._quiet and time.monotonic() - self._last >= LINE_SECONDS:
            self._last = time.monotonic()
            _print(status(snapshot))

    def _say(self, text: str) -> None:
        if not self._quiet:
            self._close()
            _print(text)

    def _move(self, snapshot: Snapshot) -> None:
        left = "" if snapshot.remaining <= 0 else f"{duration(snapshot.seconds_left)} left"
        fields: dict[str, Any] = {
            "completed": snapshot.share,
            "top": snapshot.top,
            "units": f"{snapshot.settled}/{snapshot.units} units",
            "rate": f"{amount(snapshot.rate)}nodes/s",
            "left": left,
        }
        if self._progress is None:
            self._open(fields)
        self._progress.update(self._task, **fields)

    def _open(self, fields: dict[str, Any]) -> None:
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TaskProgressColumn, TextColumn
        from rich.table import Column

        console = Console(stderr=True)
        columns: list[Any] = [TextColumn("n={task.fields[top]}"), BarColumn(), TaskProgressColumn()]
        if console.width >= _NARROW:
            columns += [TextColumn("{task.fields[units]}"), TextColumn("{task.fields[rate]}")]
        columns.append(TextColumn("{task.fields[left]}"))
        # Room for the ^C that a terminal echoes: at the edge it would break the line, and the bar would stay.
        columns.append(TextColumn("  ", table_column=Column(min_width=2, no_wrap=True)))
        self._progress = Progress(*columns, console=console, transient=True, refresh_per_second=4)
        self._task = self._progress.add_task("", total=1.0, **fields)
        self._progress.start()

    def _close(self) -> None:
        if self._progress is not None:
            self._progress.stop()
            self._progress = None
