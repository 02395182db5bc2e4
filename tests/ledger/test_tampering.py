"""A ledger that was changed by another hand gives no table, and the unit is named."""

from __future__ import annotations

import shutil
import zlib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import sqlalchemy as sa

from fleetcount.errors import TrustError
from fleetcount.ledger import record
from fleetcount.ledger.access import open_store
from fleetcount.ledger.sql.schema import metadata
from fleetcount.ledger.sql.store import SqlStore
from tests.conftest import database
from tests.ledger.builders import DIGEST, begin, open_reading, settle, story, unit


class Scene:
    """A ledger with two readings of one series, and a hand that changes it behind the program's back."""

    def __init__(self, store: SqlStore) -> None:
        self.store = store
        self.one, self.two = store.readings(DIGEST)

    def sql(self, text: str, **values: Any) -> Any:
        """Run a statement where nothing but the columns' own rules holds it back."""
        with self.store.database.engine.connect() as connection:
            result = connection.execute(sa.text(text), values)
            rows = result.all() if result.returns_rows else None
            connection.commit()
        return rows

    def id(self, reading: Any, key: str) -> int:
        (row,) = self.sql(
            "SELECT units.id FROM units JOIN readings ON readings.id = units.reading "
            "WHERE readings.reading = :reading AND units.key = :key",
            reading=reading.reading,
            key=key,
        )
        return int(row[0])

    def swap(self, column: str, a: int, b: int) -> None:
        """Swap a column of two tallies, by way of values that no other row has."""
        ((first,),) = self.sql(f"SELECT {column} FROM tallies WHERE unit = :u", u=a)
        ((second,),) = self.sql(f"SELECT {column} FROM tallies WHERE unit = :u", u=b)
        if column == "number":
            self.sql("UPDATE tallies SET number = -1 WHERE unit = :u", u=a)
        self.sql(f"UPDATE tallies SET {column} = :v WHERE unit = :u", v=first, u=b)
        self.sql(f"UPDATE tallies SET {column} = :v WHERE unit = :u", v=second, u=a)


def _build(where: str) -> None:
    """A new ledger with the scene, whose tables refuse nothing that a careless or clever hand could do."""
    with open_store(where, create=True) as store:
        story(store, begin(store))
        assert isinstance(store, SqlStore)
        if store.database.engine.dialect.name == "postgresql":
            with store.database.engine.begin() as connection:
                for table in metadata.tables.values():
                    for key in sa.inspect(connection).get_foreign_keys(table.name):
                        connection.execute(sa.text(f"ALTER TABLE {table.name} DROP CONSTRAINT {key['name']}"))


def _open(where: str) -> SqlStore:
    store = open_store(where)
    assert isinstance(store, SqlStore)
    engine = store.database.engine
    if engine.dialect.name == "sqlite":
        sa.event.listen(
            engine, "connect", lambda connection, _: connection.execute("PRAGMA foreign_keys = OFF")
        )
        engine.dispose()
    return store


@pytest.fixture(scope="module")
def sqlite_scene(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("scene") / "scene.sqlite"
    _build(str(path))
    return path


@pytest.fixture(scope="module")
def postgres_scene(postgres_server: str) -> Iterator[str]:
    with database(postgres_server) as url:
        _build(url)
        yield url


@pytest.fixture(params=["sqlite", "postgresql"])
def scene(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[Scene]:
    """A copy of the scene, to be spoilt."""
    if request.param == "sqlite":
        where = str(shutil.copy(request.getfixturevalue("sqlite_scene"), tmp_path))
        with _open(where) as store:
            yield Scene(store)
    else:
        original = request.getfixturevalue("postgres_scene")
        with database(original, copy=True) as url, _open(url) as store:
            yield Scene(store)


def test_an_untouched_ledger_is_believed(scene: Scene) -> None:
    """The scene by itself contradicts nothing: what the tests below find, their changes made."""
    assert scene.store.merge(DIGEST, scene.one.reading).complete
    assert not scene.store.merge(DIGEST, scene.two.reading).complete


def _expect(scene: Scene, *words: str) -> None:
    """Both readings refuse a table, also the one that was not touched, and name what they found."""
    for reading in (scene.one, scene.two):
        with pytest.raises(TrustError) as caught:
            scene.store.merge(DIGEST, reading.reading)
        message = str(caught.value)
        assert "\n" not in message and all(word in message for word in words), message
        assert caught.value.exit_status == 1


def test_every_flipped_byte_of_a_tally(tmp_path: Path) -> None:
    """Whichever byte of a stored tally is changed, in plain text or compressed: the unit is named."""
    with open_store(str(tmp_path / "x.sqlite"), create=True) as store:
        assert isinstance(store, SqlStore)
        lease = begin(store)
        one = open_reading(store, lease, [("0:", 1), ("1:", 1)])
        settle(store, lease, one, unit(store, one, "0:"), {0: 1})
        settle(store, lease, one, unit(store, one, "1:"), {n: 3**n for n in range(1, 200)})
        engine = store.database.engine
        for key in ("0:", "1:"):
            with engine.begin() as connection:
                (number, stored) = connection.execute(
                    sa.text("SELECT unit, stored FROM tallies JOIN units ON id = unit WHERE key = :k"),
                    {"k": key},
                ).one()
            assert (stored[:1] == b"[") == (key == "0:")
            step = 1 if key == "0:" else 7
            for place in [*range(0, len(stored) - 5, step), *range(len(stored) - 4, len(stored))]:
                flipped = bytes(b ^ (0x01 if i == place else 0) for i, b in enumerate(stored))
                _store(engine, number, flipped)
                with pytest.raises(TrustError, match=f"unit {key} of reading {one.reading[:12]}"):
                    store.merge(DIGEST, one.reading)
            _store(engine, number, stored)
        assert store.merge(DIGEST, one.reading).complete


def _store(engine: sa.Engine, number: int, stored: bytes) -> None:
    with engine.begin() as connection:
        connection.execute(
            sa.text("UPDATE tallies SET stored = :s WHERE unit = :u"), {"s": stored, "u": number}
        )


def test_a_flipped_byte(scene: Scene) -> None:
    """A changed byte in a tally of either reading: both refuse, naming its unit."""
    number = scene.id(scene.one, "0:0")
    ((stored,),) = scene.sql("SELECT stored FROM tallies WHERE unit = :u", u=number)
    scene.sql(
        "UPDATE tallies SET stored = :s WHERE unit = :u",
        s=bytes(stored).replace(b'["1","1"]', b'["1","2"]'),
        u=number,
    )
    _expect(scene, "unit 0:0 of", scene.one.reading[:12], "changed")


def test_a_changed_tally_with_its_checksum(scene: Scene) -> None:
    """A changed tally whose checksum was made to fit does not fit the chain."""
    number = scene.id(scene.one, "0:0")
    ((stored,),) = scene.sql("SELECT stored FROM tallies WHERE unit = :u", u=number)
    text = record.unpack(bytes(stored)).replace('["1","1"]', '["1","2"]')
    scene.sql(
        "UPDATE tallies SET stored = :s, checksum = :c WHERE unit = :u",
        s=record.pack(text),
        c=record.checksum(text),
        u=number,
    )
    _expect(scene, "unit 0:0 of", scene.one.reading[:12], "chain")


def test_a_packed_bomb_or_rubbish(scene: Scene) -> None:
    """Bytes that are no text at all are refused like a flipped one."""
    number = scene.id(scene.two, "0:0")
    for rubbish in (b"", b"\x78\x9c", b"[\xff]", zlib.compress(b"\xff\xfe")):
        scene.sql("UPDATE tallies SET stored = :s WHERE unit = :u", s=rubbish, u=number)
        _expect(scene, "unit 0:0 of", scene.two.reading[:12])


@pytest.mark.parametrize("key", ["0:0.1", "0:0.0"])
def test_a_deleted_unit(scene: Scene, key: str) -> None:
    """A unit that was deleted, waiting or counted, is missed by name."""
    reading = scene.two if key == "0:0.1" else scene.one
    scene.sql("DELETE FROM units WHERE id = :u", u=scene.id(reading, key))
    _expect(scene, f"unit {key} of", reading.reading[:12], "missing")


def test_a_deleted_unit_with_its_tally(scene: Scene) -> None:
    """A unit that was deleted with its tally is missed by name."""
    number = scene.id(scene.one, "0:0.0")
    scene.sql("DELETE FROM tallies WHERE unit = :u", u=number)
    scene.sql("DELETE FROM units WHERE id = :u", u=number)
    _expect(scene, "unit 0:0.0 of", scene.one.reading[:12], "missing")


@pytest.mark.parametrize("state", ["waiting", "counted"])
def test_a_unit_added_by_hand(scene: Scene, state: str) -> None:
    """A unit that no record names is not believed, whatever state it claims."""
    scene.sql(
        "INSERT INTO units (id, reading, key, parent, factor, weight, expected, state, verdict, attempts, "
        "failed_on) SELECT 999, reading, '0:9', '0:', '1', '1', 1.0, :s, 'unchecked', 0, '[]' FROM units WHERE id = :u",
        u=scene.id(scene.one, "0:"),
        s=state,
    )
    _expect(scene, "unit 0:9 of", scene.one.reading[:12])


def test_a_tally_added_by_hand(scene: Scene) -> None:
    """A second helping of a tally, on a unit made for it, is not believed."""
    scene.sql(
        "INSERT INTO units SELECT 999, reading, '0:9', parent, factor, weight, expected, state, verdict, "
        "attempts, failed_on, last_error, token, nodes, seconds FROM units WHERE id = :u",
        u=scene.id(scene.one, "0:0"),
    )
    scene.sql(
        "INSERT INTO tallies (unit, series, number, machine, engine, versions, started, finished, checksum, "
        "link, token, accepted, stored) "
        "SELECT 999, series, 10, machine, engine, versions, started, finished, checksum, link, token, "
        "accepted, stored FROM tallies WHERE unit = :u",
        u=scene.id(scene.one, "0:0"),
    )
    _expect(scene, "unit 0:9 of", scene.one.reading[:12])


@pytest.mark.parametrize("columns", [("unit",), ("number",), ("stored",), ("stored", "checksum")])
@pytest.mark.parametrize("between", [False, True])
def test_two_swapped_tallies(scene: Scene, columns: tuple[str, ...], between: bool) -> None:
    """Two tallies that changed places, within a reading or between two, are found by name."""
    a = scene.id(scene.one, "0:0.0")
    b = scene.id(scene.two, "0:0.0") if between else scene.id(scene.one, "0:0.1.0")
    for column in columns:
        if column == "unit":
            scene.sql("UPDATE tallies SET unit = -1 WHERE unit = :u", u=a)
            scene.sql("UPDATE tallies SET unit = :a WHERE unit = :b", a=a, b=b)
            scene.sql("UPDATE tallies SET unit = :b WHERE unit = -1", b=b)
        else:
            scene.swap(column, a, b)
    _expect(scene, "unit 0:0")


def test_a_deleted_tally(scene: Scene) -> None:
    """A unit whose tally was deleted is named, whether or not its state was put back."""
    number = scene.id(scene.one, "0:0.0")
    scene.sql("DELETE FROM tallies WHERE unit = :u", u=number)
    _expect(scene, "unit 0:0.0 of", scene.one.reading[:12], "missing")
    scene.sql("UPDATE units SET state = 'waiting' WHERE id = :u", u=number)
    _expect(scene, "chain", "unit")


def test_a_cut_chain(scene: Scene) -> None:
    """A chain that was cut off is missed, though the unit waits again, as its head was written elsewhere."""
    number = scene.id(scene.one, "0:0.1.0")
    scene.sql("DELETE FROM tallies WHERE unit = :u", u=number)
    scene.sql("UPDATE units SET state = 'waiting', nodes = NULL, seconds = NULL WHERE id = :u", u=number)
    _expect(scene, "the end is missing")


def test_a_chain_cut_with_all_its_traces(scene: Scene) -> None:
    """What cannot be seen inside the ledger: an end cut off with all its traces. An older head tells it."""
    before = scene.store.merge(DIGEST, scene.one.reading)
    number = scene.id(scene.one, "0:0.1.0")
    scene.sql("DELETE FROM tallies WHERE unit = :u", u=number)
    scene.sql("UPDATE units SET state = 'waiting', nodes = NULL, seconds = NULL WHERE id = :u", u=number)
    ((link,),) = scene.sql("SELECT link FROM tallies WHERE number = 8")
    scene.sql("UPDATE series SET records = 8, head = :link", link=link)
    after = scene.store.merge(DIGEST, scene.one.reading)
    assert not after.complete and after.head != before.head


@pytest.mark.parametrize(
    ("column", "value"),
    [
        ("weight", "'5'"),
        ("factor", "'5'"),
        ("parent", "'0:7'"),
        ("parent", "NULL"),
        ("state", "'waiting'"),
        ("state", "'divided'"),
        ("state", "'barred'"),
        ("state", "'nonsense'"),
        ("key", "'0:0.7'"),
        ("nodes", "8"),
    ],
)
def test_a_changed_column_of_a_counted_unit(scene: Scene, column: str, value: str) -> None:
    """Nothing about a counted unit that follows from the records can be changed."""
    scene.sql(f"UPDATE units SET {column} = {value} WHERE id = :u", u=scene.id(scene.one, "0:0.0"))
    _expect(scene, "unit 0:0", scene.one.reading[:12])


@pytest.mark.parametrize(
    ("column", "value"),
    [
        ("weight", "'5'"),
        ("factor", "'2'"),
        ("parent", "'0:7'"),
        ("state", "'counted'"),
        ("state", "'nonsense'"),
        ("key", "'0:7'"),
    ],
)
def test_a_changed_column_of_a_waiting_unit(scene: Scene, column: str, value: str) -> None:
    """Nothing about a waiting unit that follows from the records can be changed."""
    scene.sql(f"UPDATE units SET {column} = {value} WHERE id = :u", u=scene.id(scene.two, "0:1"))
    _expect(scene, "unit 0:", scene.two.reading[:12])


@pytest.mark.parametrize(
    "change",
    [
        "machine = 'cedar'",
        "engine = 'f'",
        "versions = '{}'",
        "versions = 'rubbish'",
        "started = 1",
        "finished = 2",
        "checksum = 'f'",
        "link = 'f'",
        "token = 'f'",
        "accepted = 5",
        "number = 77",
        "series = 2",
    ],
)
def test_a_changed_column_of_a_tally(scene: Scene, change: str) -> None:
    """The columns beside a tally, and its place in the chain, cannot be changed."""
    scene.sql(f"UPDATE tallies SET {change} WHERE unit = :u", u=scene.id(scene.one, "0:0.1"))
    _expect(scene, "unit 0:0")


@pytest.mark.parametrize(
    "change",
    ["purpose = 'x'", "method = 'x'", "method_version = 9", "lengths = '0-99'", "width = 2",
     "opened = 7", "stored = stored || stored", "checksum = 'x'", "link = 'x'", "token = 'x'", "accepted = 7",
     "number = 0"],
)  # fmt: skip
def test_a_changed_opening(scene: Scene, change: str) -> None:
    """What a reading was opened with cannot be changed."""
    scene.sql(f"UPDATE readings SET {change} WHERE reading = :r", r=scene.two.reading)
    _expect(scene)


def test_a_reading_that_is_gone(scene: Scene) -> None:
    """The other readings of a series do not count on when one was deleted, with or without its units."""
    ((number,),) = scene.sql("SELECT id FROM readings WHERE reading = :r", r=scene.two.reading)
    scene.sql("DELETE FROM readings WHERE id = :n", n=number)
    with pytest.raises(TrustError, match="unit 0:0"):
        scene.store.merge(DIGEST, scene.one.reading)
    scene.sql("DELETE FROM tallies WHERE unit IN (SELECT id FROM units WHERE reading = :n)", n=number)
    scene.sql("DELETE FROM units WHERE reading = :n", n=number)
    with pytest.raises(TrustError, match=r"unit 0:.* chain"):
        scene.store.merge(DIGEST, scene.one.reading)


def test_a_changed_definition(scene: Scene) -> None:
    """A series whose definition was changed under its digest gives no table."""
    scene.sql("""UPDATE series SET canonical = '{"lattice":"cubic"}'""")
    _expect(scene, "definition", DIGEST[:12])
