"""Adding stored tallies up, out of their texts."""

from __future__ import annotations

from collections import Counter, defaultdict
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import sqlalchemy as sa

from fleetcount.errors import TrustError
from fleetcount.ledger import record
from fleetcount.ledger.record import TallyRecord
from fleetcount.series.tally import Tally

ROWS_AT_ONCE = 1000


class Sum:
    """What is summed on the way, out of the fields of tallies as their texts have them."""

    def __init__(self, width: int) -> None:
        self.width = width
        self.counts: dict[str, int] = defaultdict(int)
        self.columns: list[dict[tuple[str, ...], int]] = [defaultdict(int) for _ in range(width)]
        self.seconds = 0.0
        self.tallies = 0
        self.machines: Counter[str] = Counter()
        self.engines: set[str] = set()

    def add(self, fields: dict[str, Any], weight: int, seconds: float | None) -> None:
        """Add a tally times the weight of its unit."""
        rows = fields["rows"]
        if self.width == 1 and rows and len(rows[0]) == 2:  # plain counts by length, in half the time
            counts = self.counts
            for length, count in rows:
                counts[length] += weight * int(count)
        else:
            for column, sums in enumerate(self.columns, -self.width):
                for row in rows:
                    sums[tuple(row[: -self.width])] += weight * int(row[column])
        self.tallies += 1
        self.seconds += seconds or 0.0
        self.machines[fields["machine"]] += int(fields["nodes"])
        self.engines.add(fields["engine"])

    def table(self) -> Tally:
        table = Tally(self.width)
        for place in self.columns[0]:
            table.rows[tuple(map(int, place))] = tuple(sums[place] for sums in self.columns)
        if self.counts:
            table.add(Tally.of_counts({int(length): count for length, count in self.counts.items()}))
        return table


@contextmanager
def stream(connection: sa.Connection, query: sa.Select[Any]) -> Iterator[Iterator[Any]]:
    """Rows one by one, without having them all in memory."""
    result = connection.execute(query, execution_options={"yield_per": ROWS_AT_ONCE})
    try:
        yield result
    finally:
        result.close()


def stored_in(table: sa.Table) -> sa.ColumnElement[bytes]:
    """The stored texts of a table, as bytes even where another hand has put letters."""
    return sa.cast(table.c.stored, sa.LargeBinary).label("stored")


def stored_text(row: Any, name: str) -> str:
    """The text of a stored record, whose checksum is computed again."""
    try:
        text = record.unpack(row.stored)
    except TrustError as error:
        raise TrustError(error.what, where=name) from None
    found = record.checksum(text)
    if found != row.checksum:
        raise TrustError(
            f"the stored record has been changed: its checksum is {found[:16]}..., "
            f"but {row.checksum[:16]}... was stored",
            where=name,
        )
    return text


def fields_of(text: str) -> dict[str, Any]:
    return record.fields(text, TallyRecord.NAME, TallyRecord.FORMAT)
