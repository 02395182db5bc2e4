"""A coefficient table laid out for people: lengths down, the values of a statistic across, wide tables in blocks."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING, NamedTuple

if TYPE_CHECKING:
    from fleetcount.series.table import Cell, CoefficientTable

WIDTH = 80
_NOTHING = "."
"""Stands where a cell is zero."""


class _Column(NamedTuple):
    head: str
    entries: Sequence[str]

    @property
    def width(self) -> int:
        return max(len(self.head), *(len(entry) for entry in self.entries))


def text(table: CoefficientTable, width: int) -> str:
    """The whole table; lines are at most `width` characters where one column of numbers fits."""
    lines = [table.series.title()]
    if table.divisor != 1:
        lines[0] += f" (sums over the {table.divisor} sites of a cell; divide by {table.divisor})"
    cells, partial = table.cells(), table.partial_cells()
    if table.area_denominator not in (None, 1):
        lines.append(f"area in units of 1/{table.area_denominator} of the cell's")
    if table.series.statistics and table.final is not None:
        lines.append(f"final to n={table.final}; {_NOTHING} stands for 0")
    if not cells and not partial:
        none = (
            "no final term yet" if table.final is None else f"none of length {table.least} to {table.final}"
        )
        return f"{lines[0]}\n  {none}\n"
    if _is_list(table):
        lines += _list(table, cells, partial, width)
    else:
        lines += _joint(table, cells, "", width)
        lines += _joint(table, partial, "so far, ", width)
    return "\n".join(lines) + "\n"


def _is_list(table: CoefficientTable) -> bool:
    """Plain terms, and the distribution of ends, whose places are no numbers to be put along a line."""
    return not table.series.statistics or any(one.name == "end" for one in table.series.statistics)


def _list(
    table: CoefficientTable, cells: Sequence[Cell], partial: Sequence[Cell], width: int
) -> Iterator[str]:
    """One line a cell."""
    if table.series.moments and table.denominator != 1:
        yield f"{', '.join(table.series.moments)} to be divided by {table.denominator}"
    every = [*cells, *partial]
    entries = [[*map(str, place), *map(str, values)] for place, values in every]
    columns = [_Column(head, [row[i] for row in entries]) for i, head in enumerate(table.series.columns)]
    fixed = len(every[0][0])
    marks = [""] * len(cells) + [" so far"] * len(partial)
    yield from _packed(columns[:fixed], columns[fixed:], marks, width)


def _joint(table: CoefficientTable, cells: Sequence[Cell], mark: str, width: int) -> Iterator[str]:
    """A block for the count and each moment; of two statistics, one for each length."""
    if not cells:
        return
    names = [one.text() for one in table.series.statistics]
    for column, quantity in enumerate(("count", *table.series.moments)):
        head = quantity
        if column and table.denominator != 1:
            head += f" to be divided by {table.denominator}"
        found = [(place, values[column]) for place, values in cells if values[column]]
        if not found:
            yield from ("", f"{mark}{head}: nothing but zeros")
        elif len(names) == 1:
            yield from ("", f"{mark}{head}: n down, {names[0]} across")
            yield from _grid("n", found, width)
        else:
            for n in dict.fromkeys(place[0] for place, _ in found):
                yield from ("", f"{mark}{head}, n={n}: {names[0]} down, {names[1]} across")
                yield from _grid("", [(p[1:], value) for p, value in found if p[0] == n], width)


def _grid(corner: str, found: Iterable[tuple[tuple[int, ...], int]], width: int) -> Iterator[str]:
    """Numbers by two coordinates, the first down, the second across."""
    numbers = {(place[0], place[1]): str(number) for place, number in found}
    down, across = (sorted({place[i] for place in numbers}) for i in (0, 1))
    columns = [_Column(str(j), [numbers.get((i, j), _NOTHING) for i in down]) for j in across]
    yield from _packed([_Column(corner, list(map(str, down)))], columns, [""] * len(down), width)


def _packed(
    fixed: Sequence[_Column], columns: Sequence[_Column], marks: Sequence[str], width: int
) -> Iterator[str]:
    """Columns side by side, as many as fit beside the fixed ones; the others below, without rows of nothing."""
    room = width - sum(2 + column.width for column in fixed) - max(map(len, marks))
    first = 0
    while first < len(columns):
        taken, used = first, 0
        while taken < len(columns) and (taken == first or used + 2 + columns[taken].width <= room):
            used += 2 + columns[taken].width
            taken += 1
        if first:
            yield ""
        yield from _lines([*fixed, *columns[first:taken]], len(fixed), marks)
        first = taken


def _lines(columns: Sequence[_Column], fixed: int, marks: Sequence[str]) -> Iterator[str]:
    yield "".join(f"  {column.head:>{column.width}}" for column in columns)
    for i, mark in enumerate(marks):
        if any(column.entries[i] != _NOTHING for column in columns[fixed:]):
            yield "".join(f"  {column.entries[i]:>{column.width}}" for column in columns) + mark
