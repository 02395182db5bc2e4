"""`count`, `table` and `progress`: what they print, in each form, and of which series."""

from __future__ import annotations

import csv
import io
import json
from datetime import datetime
from pathlib import Path
from typing import Any

import pytest

from fleetcount.fleet import counting
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.lattice.catalogue import find
from fleetcount.ledger.access import open_store
from fleetcount.series.defining import define
from tests.cli.conftest import Answer, Fleetcount
from tests.fleet.crews import SQUARE_WALKS, Crew, held, set_to_work

COUNT = ("count", "square", "walk", "--to")
TABLE = ("table", "square", "walk")
DIGEST = define(find("square"), "walk", None).digest


def ok(got: Answer) -> str:
    """What was printed, of a command that went well."""
    assert got.status == 0, got.err
    return got.out


def document(got: Answer) -> dict[str, Any]:
    """Standard output as the one JSON document that it must be."""
    found = json.loads(ok(got))
    assert isinstance(found, dict) and got.out.count("\n") == 1 and got.out.endswith("}\n")
    return found


def counts(got: Answer) -> list[int]:
    """The counts of a JSON document."""
    return [int(row[1]) for row in document(got)["rows"]]


def test_the_json_document(fleetcount: Fleetcount) -> None:
    """`count --json` and `table --json` print the same document: exact integers as decimal strings, the digest of the
    series, the head of the chain, and nothing else on standard output."""
    counted = document(fleetcount(*COUNT, "8", "--json"))
    assert counted == document(fleetcount(*TABLE, "--json"))
    series, chain = counted.pop("series"), counted.pop("chain")
    assert counted == {
        "format": 1,
        "final": 8,
        "columns": ["n", "count"],
        "rows": [[n, str(count)] for n, count in enumerate(SQUARE_WALKS[:9])],
        "divisor": "1",
        "complete": True,
    }
    assert series["digest"] == DIGEST and series["lattice"] == "square" and series["object"] == "walk"
    assert len(chain) == 64 and set(chain) <= set("0123456789abcdef") and chain != DIGEST


def test_the_head_of_the_chain_tells_ledgers_apart(fleetcount: Fleetcount) -> None:
    """The head is that of this ledger's records: going on changes it, another ledger has another one."""
    heads = [document(fleetcount(*COUNT, to, "--json", "--ledger", name))["chain"] for to, name in
             (("6", "a.sqlite"), ("7", "a.sqlite"), ("6", "b.sqlite"))]  # fmt: skip
    assert len(set(heads)) == 3


def test_the_text(fleetcount: Fleetcount) -> None:
    """A title, a heading, aligned columns, and who has published the same terms."""
    lines = ok(fleetcount(*COUNT, "8")).splitlines()
    assert lines[0] == "square walk" and lines[1].split() == ["n", "count"]
    assert [tuple(map(int, row.split())) for row in lines[2:11]] == list(enumerate(SQUARE_WALKS[:9]))
    assert len({len(row) for row in lines[1:11]}) == 1
    assert lines[11].startswith("agrees with published values to n=8 (A001411")
    assert ok(fleetcount(*TABLE)).splitlines() == lines


def test_csv_and_plain(fleetcount: Fleetcount) -> None:
    """`--csv` has a heading, `--plain` has two columns and nothing else; what is published goes to standard error."""
    got = fleetcount(*COUNT, "5", "--csv")
    rows = [[str(n), str(count)] for n, count in enumerate(SQUARE_WALKS[:6])]
    assert list(csv.reader(io.StringIO(ok(got)))) == [["n", "count"], *rows]
    assert "agrees with published values" in got.err
    assert ok(fleetcount(*TABLE, "--csv")) == got.out
    plain = ok(fleetcount(*COUNT, "5", "--plain"))
    assert (
        plain
        == "".join(f"{n} {c}\n" for n, c in enumerate(SQUARE_WALKS[:6]))
        == ok(fleetcount(*TABLE, "--plain"))
    )


def test_quiet(fleetcount: Fleetcount) -> None:
    """`--quiet` leaves nothing but the table."""
    got = fleetcount(*COUNT, "5", "--quiet")
    assert got.err == "" and got.out.startswith("square walk\n")


def test_cutting(fleetcount: Fleetcount) -> None:
    """`--to` cuts; beyond the reach it is an error that says how far the table goes."""
    ok(fleetcount(*COUNT, "8"))
    assert ok(fleetcount(*TABLE, "--to", "3", "--plain")).splitlines() == ["0 1", "1 4", "2 12", "3 36"]
    assert ok(fleetcount(*TABLE, "--to", "0", "--plain")) == "0 1\n"
    beyond = fleetcount(*TABLE, "--to", "9")
    assert (beyond.status, beyond.out) == (2, "") and "lengths 0 to 8" in beyond.err
    assert fleetcount(*TABLE, "--to", str(10**30)).status == 2


def test_a_longer_count_is_a_further_reading(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """`--to 8` after `--to 6` opens a further reading of the same series, which checks the first one."""
    for to in ("6", "8"):
        ok(fleetcount(*COUNT, to))
    with open_store(str(tmp_path / "fleetcount.sqlite"), read_only=True) as store:
        assert [row.digest for row in store.series()] == [DIGEST]
        assert [row.lengths for row in store.readings(DIGEST)] == ["0-6", "0-8"]
    (series,) = document(fleetcount("progress", "--json"))["series"]
    assert series["final"] == 8 and len(series["readings"]) == 2


def test_a_shorter_count_is_printed_at_once(fleetcount: Fleetcount, monkeypatch: pytest.MonkeyPatch) -> None:
    """What is finished already is printed without counting, and without changing the ledger."""
    before = document(fleetcount(*COUNT, "8", "--json"))
    monkeypatch.setattr(counting, "_count", None)
    for to in range(9):
        after = document(fleetcount(*COUNT, str(to), "--json"))
        assert after["rows"] == before["rows"][: to + 1] and after["final"] == to
        assert after["chain"] == before["chain"]


def test_an_abandoned_reading_does_not_spoil_the_table(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """A table is complete when its widest reading is, even if a shorter one was left unfinished."""
    with open_store(str(tmp_path / "fleetcount.sqlite"), create=True) as store:
        lease = held(store)
        leave_open(store, lease, 7)
        store.release(lease)
    assert document(fleetcount(*COUNT, "8", "--json"))["complete"] is True
    assert "open reading to n=7" in fleetcount(*TABLE).err
    assert document(fleetcount(*COUNT, "7", "--json"))["final"] == 7


class Lazy(Crew):
    """Counts some bundles and then raises the coordinator's stop flag."""

    def __init__(self, stop: StopFlag, rounds: int) -> None:
        super().__init__()
        self.flag, self.rounds = stop, rounds

    def collect(self, timeout: float) -> Any:
        self.rounds -= 1
        self.flag.up = self.rounds <= 0
        return super().collect(timeout)


def leave_open(store: Any, lease: Any, top: int, rounds: int = 4) -> None:
    """A reading that somebody stopped."""
    from fleetcount.errors import StoppedError

    stop = StopFlag()
    with pytest.raises(StoppedError):
        set_to_work(store, lease, Lazy(stop, rounds), top, stop=stop)


def test_partial_sums(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """`--so-far` adds the sums of the open reading, each marked and none greater than its term; without it only final
    terms are printed, and the open reading in a line of its own."""
    ok(fleetcount(*COUNT, "5"))
    with open_store(str(tmp_path / "fleetcount.sqlite")) as store:
        lease = held(store)
        leave_open(store, lease, 8)
        store.release(lease)
    got = fleetcount(*TABLE)
    assert ok(got).count("so far") == 0 and "open reading to n=8: " in got.err and "% done" in got.err
    so_far = fleetcount(*TABLE, "--so-far")
    marked = [row.split() for row in ok(so_far).splitlines() if row.endswith(" so far")]
    assert marked and all(0 < int(count) <= SQUARE_WALKS[int(n)] for n, count, *_ in marked)
    assert {int(n) for n, *_ in marked} <= {6, 7, 8}
    assert sum(int(count) for _, count, *_ in marked) < sum(SQUARE_WALKS[6:9])
    found = document(fleetcount(*TABLE, "--so-far", "--json"))
    assert found["final"] == 5 and found["complete"] is False and len(found["rows"]) == 6
    assert [[str(n), count] for n, count in found["so_far"]] == [row[:2] for row in marked]
    assert "so_far" not in document(fleetcount(*TABLE, "--json"))
    assert ok(fleetcount(*COUNT, "8", "--plain")).endswith(f"8 {SQUARE_WALKS[8]}\n")


def test_nothing_final_yet(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """A series whose only reading is open has no term, and says so."""
    with open_store(str(tmp_path / "fleetcount.sqlite"), create=True) as store:
        leave_open(store, held(store), 8)
    got = fleetcount(*TABLE)
    assert "no final term yet" in ok(got) and "open reading to n=8" in got.err
    found = document(fleetcount(*TABLE, "--json"))
    assert found["final"] is None and found["rows"] == [] and found["complete"] is False
    refused = fleetcount(*TABLE, "--to", "2")
    assert refused.status == 2 and "nothing" in refused.err


def test_by_the_beginning_of_a_digest(
    fleetcount: Fleetcount, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A unique beginning is enough, in either case of letters; none, or several, or no digest at all are refused."""
    expected = ok(fleetcount(*COUNT, "4", "--plain"))
    for beginning in (DIGEST, DIGEST[:4], DIGEST[:10].upper()):
        assert ok(fleetcount("table", beginning, "--plain")) == expected
    for beginning, words in (
        ("0123456789", "no series with a digest"),
        (DIGEST[:3], "at least four digits"),
        ("square", "give lattice and object"),
        ("", "alone is no series"),
        (DIGEST + "0", "no series"),
    ):
        refused = fleetcount("table", beginning)
        assert (refused.status, refused.out) == (2, "") and words in refused.err
    ok(fleetcount("count", "square", "polygon", "--to", "6"))
    monkeypatch.setattr("fleetcount.ledger.tables.LEAST_BEGINNING", 0)
    several = fleetcount("table", "")
    assert several.status == 2 and "2 series begin with" in several.err and DIGEST[:12] in several.err


def test_several_series_in_one_ledger(fleetcount: Fleetcount) -> None:
    """Series do not get into each other's way; `progress` lists them in their order."""
    # OEIS A001334 (triangular), A001411 (square), A002931 (polygons on the square lattice)
    triangular = ok(fleetcount("count", "triangular", "walk", "--to", "5", "--plain"))
    square = ok(fleetcount(*COUNT, "6", "--plain"))
    polygons = ok(fleetcount("count", "square", "polygon", "--to", "10", "--plain"))
    assert triangular.split()[1::2] == ["1", "6", "30", "138", "618", "2730"]
    assert polygons.split()[1::2] == ["0", "1", "0", "2", "0", "7", "0", "28"]
    assert ok(fleetcount(*TABLE, "--plain")) == square
    assert ok(fleetcount("table", "square", "polygon", "--plain")) == polygons
    shown = document(fleetcount("progress", "--json"))
    assert [(s["lattice"], s["object"], s["final"]) for s in shown["series"]] == [
        ("triangular", "walk", 5),
        ("square", "walk", 6),
        ("square", "polygon", 10),
    ]
    missing = fleetcount("table", "cubic", "walk")
    assert missing.status == 2 and "cubic walk is not in this ledger" in missing.err


def test_the_ledger_from_the_environment(
    fleetcount: Fleetcount, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """FLEETCOUNT_LEDGER names the ledger of every command; `--ledger` comes before it."""
    monkeypatch.setenv("FLEETCOUNT_LEDGER", "mine.sqlite")
    ok(fleetcount(*COUNT, "4"))
    ok(fleetcount(*COUNT, "5", "--ledger", "other.sqlite"))
    assert document(fleetcount(*TABLE, "--json"))["final"] == 4
    assert document(fleetcount("progress", "--json"))["series"][0]["final"] == 4
    assert sorted(path.name for path in tmp_path.iterdir()) == ["mine.sqlite", "other.sqlite"]


def test_numbers_per_site(fleetcount: Fleetcount) -> None:
    """`--per-site` states the divisor that turns polygons per cell into polygons per site: two on the honeycomb."""
    ok(fleetcount("count", "honeycomb", "polygon", "--to", "12"))
    cell = document(fleetcount("table", "honeycomb", "polygon", "--json"))
    site = document(fleetcount("table", "honeycomb", "polygon", "--per-site", "--json"))
    assert (cell["divisor"], site["divisor"]) == ("1", "2") and cell["rows"] == site["rows"]
    assert [6, "1"] in cell["rows"], "one hexagon a cell"
    assert "divide by 2" in ok(fleetcount("table", "honeycomb", "polygon", "--per-site"))
    counted = document(fleetcount("count", "honeycomb", "polygon", "--to", "12", "--per-site", "--json"))
    assert counted == site


def test_a_start_site(fleetcount: Fleetcount) -> None:
    """On dice the sum over a cell is one hub and two rims, with the divisor printed; each start is a series of its
    own."""
    count = ("count", "dice", "walk", "--to", "6", "--json")
    first = {start: counts(fleetcount(*count, "--start", start)) for start in ("hub", "rim1", "rim2")}
    whole = document(fleetcount(*count))
    assert first["hub"][:2] == [1, 6] and first["rim1"][:2] == [1, 3] and first["rim1"] == first["rim2"]
    sums = [sum(three) for three in zip(*first.values(), strict=True)]
    assert counts(fleetcount(*count)) == sums and whole["divisor"] == "3"
    assert "sums over the 3 sites of a cell; divide by 3" in ok(fleetcount("table", "dice", "walk"))
    assert document(fleetcount("table", "dice", "walk", "--start", "hub", "--json"))["divisor"] == "1"
    assert len({s["digest"] for s in document(fleetcount("progress", "--json"))["series"]}) == 4


LATTICE = """
name = "my-lattice"
dimension = 2
metric = [["1", "0"], ["0", "1"]]

[[sites]]
name = "a"
at = ["0", "0"]

[[edges]]
from = "a"
to = "a"
cell = [0, 1]

[[edges]]
from = "a"
to = "a"
cell = [1, 0]
"""


def test_a_lattice_file(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """A user's file works wherever a name does; the same definition under another name is the same series."""
    (tmp_path / "my-lattice.toml").write_text(LATTICE)
    mine = document(fleetcount("count", "./my-lattice.toml", "walk", "--to", "6", "--json"))
    assert [int(row[1]) for row in mine["rows"]] == SQUARE_WALKS[:7]
    assert document(fleetcount("table", "my-lattice.toml", "walk", "--json")) == mine
    assert mine["series"]["digest"] == DIGEST
    assert document(fleetcount(*TABLE, "--json"))["rows"] == mine["rows"]


def test_a_ledger_in_memory(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """`--ledger :memory:` counts and keeps nothing."""
    assert ok(fleetcount(*COUNT, "5", "--plain", "--ledger", ":memory:")).endswith("5 284\n")
    assert list(tmp_path.iterdir()) == []


def test_progress(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """Readings, units by state, share done, machines: as text, and as one JSON document."""
    ok(fleetcount(*COUNT, "5"))
    with open_store(str(tmp_path / "fleetcount.sqlite")) as store:
        lease = held(store)
        leave_open(store, lease, 8)
        store.release(lease)
    text = ok(fleetcount("progress"))
    assert "square walk" in text and DIGEST[:12] in text and "final to n=5" in text
    assert "of 0-5: finished" in text and "of 0-8: " in text and "% done" in text
    assert " waiting" in text and " counted" in text and "machines" in text
    shown = document(fleetcount("progress", "--json"))
    assert shown["format"] == 1 and shown["ledger"] == "fleetcount.sqlite"
    (series,) = shown["series"]
    assert (series["digest"], series["final"], series["held_by"]) == (DIGEST, 5, None)
    done, still = series["readings"]
    assert done["share_done"] == 1.0 and done["finished"] > done["opened"]
    assert set(done["units"]) == {"waiting", "out", "counted", "divided", "barred"}
    assert still["finished"] is None and 0 < still["share_done"] < 1 and still["units"]["waiting"] > 0
    assert int(still["nodes"]) > 0 and still["units"]["out"] == 0
    (machine,) = shown["machines"]
    assert machine["state"] == "counting" and machine["last_seen"] >= machine["first_seen"]
    assert abs(machine["last_seen"] / 1e6 - datetime.now().timestamp()) < 3600


def test_progress_of_an_empty_ledger(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """A ledger without a series is shown as one."""
    open_store(str(tmp_path / "fleetcount.sqlite"), create=True).close()
    assert "no series yet" in ok(fleetcount("progress"))
    assert document(fleetcount("progress", "--json"))["series"] == []
