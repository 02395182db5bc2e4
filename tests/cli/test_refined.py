"""Refined counts from end to end: options, series files, ledger, tables, and what the program says of them."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import replace
from itertools import product
from pathlib import Path

import pytest

import fleetcount as package
from fleetcount.errors import SeriesError, StoppedError, TrustError
from fleetcount.fleet.interrupt import StopFlag
from fleetcount.fleet.planning import open_reading
from fleetcount.fleet.work import HandBack, HandOut
from fleetcount.lattice.catalogue import find
from fleetcount.ledger import tables
from fleetcount.ledger.memory import MemoryStore
from fleetcount.ledger.record import TallyRecord, checksum
from fleetcount.ledger.store import Answer
from fleetcount.methods.face import Forecast
from fleetcount.methods.registry import get
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.tally import Place, Tally
from fleetcount.trust import published
from tests.cli.conftest import Fleetcount
from tests.cli.test_bad_input import refused
from tests.fleet.crews import Crew, held, set_to_work

CONTACTS = ("square", "walk", "--by", "contacts", "--moment", "end2")
HALF = ("square", "walk", "--region", "half", "--by", "contacts", "--by", "visits", "--moment", "end2")


def known(name: str) -> dict[Place, int]:
    """A table of the data files."""
    (found,) = (table for table in published.tables() if table.id == name)
    return dict(found.values)


def test_contacts_in_every_form(fleetcount: Fleetcount) -> None:
    """`count` and `table` give the walks by contacts (Bennett-Wood and others 1998) and their end2 in every form."""
    counted = fleetcount("count", *CONTACTS, "--to", "8", "--json", "--quiet")
    assert counted.status == 0, counted.err
    document = json.loads(counted.out)
    assert document["columns"] == ["n", "contacts", "count", "end2"] and document["denominator"] == "1"
    found = {(n, m): int(count) for n, m, count, _ in document["rows"]}
    assert found == {
        place: value for place, value in known("contacts-square-table").items() if value and place[0] <= 8
    }
    assert json.loads(fleetcount("table", *CONTACTS, "--json").out) == document
    text = fleetcount("table", *CONTACTS)
    assert "count: n down, contacts across" in text.out and "agrees with published values to n=8" in text.out
    lines = fleetcount("table", *CONTACTS, "--polynomials").out.splitlines()
    assert lines[:4] == ["# square walk by contacts with end2", "# c: contacts", "# count", "0: 1"]
    assert "4: 68 + 32*c" in lines  # 100 walks of four steps, in 32 of which the ends or a step apart meet
    assert fleetcount("table", *CONTACTS, "--csv").out.splitlines()[0] == "n,contacts,count,end2"
    plain = fleetcount("table", *CONTACTS, "--plain").out.splitlines()
    assert [line.split() for line in plain] == [[str(x) for x in row] for row in document["rows"]]


def test_a_longer_count_checks_the_shorter(fleetcount: Fleetcount) -> None:
    """A further reading of a refined series goes into the same series, and `progress` shows it by its title."""
    for to in ("6", "8"):
        assert fleetcount("count", *CONTACTS, "--to", to, "--quiet").status == 0
    assert fleetcount("count", *HALF, "--to", "5", "--quiet").status == 0
    shown = fleetcount("progress").out
    assert "square walk by contacts with end2  " in shown and "final to n=8" in shown
    assert "square walk from a where 0,1 >= 0 by contacts and visits with end2  " in shown
    one, two = json.loads(fleetcount("progress", "--json").out)["series"]
    assert len(one["readings"]) == 2 and len(two["readings"]) == 1
    assert two["by"] == ["contacts", "visits"] and two["region"] == ["0,1 >= 0"]
    assert fleetcount("table", one["digest"][:8], "--to", "4").out.startswith("square walk by contacts")


def test_a_series_file_is_its_command_line(fleetcount: Fleetcount, tmp_path: Path) -> None:
    """`--save` writes what the options said; running the file finds the same series, already counted."""
    first = fleetcount("count", *HALF, "--to", "6", "--json", "--save", "half.toml")
    assert first.status == 0 and "half.toml" in first.err
    for line in (("count", "half.toml"), ("table", "half.toml"), ("count", "half.toml", "--to", "6")):
        again = fleetcount(*line, "--json")
        assert again.status == 0 and json.loads(again.out) == json.loads(first.out), line
    shorter = json.loads(fleetcount("count", "half.toml", "--to", "4", "--json").out)
    assert shorter["final"] == 4 and shorter["series"]["digest"] == json.loads(first.out)["series"]["digest"]
    refused(fleetcount("count", *HALF, "--to", "5", "--save", "half.toml"), "half.toml", "left as it is")
    refused(fleetcount("count", "half.toml", "--by", "turns"), "half.toml", "--by")
    (tmp_path / "open.toml").write_text('lattice = "square"\nobject = "walk"\n')
    refused(fleetcount("count", "open.toml"), "open.toml", "to = N")


def test_the_python_interface(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """`count` takes statistics, moments, regions, ends, and a series file in place of lattice and object."""
    monkeypatch.chdir(tmp_path)
    table = package.count("square", "walk", to=6, by="contacts", moment=["end2"])
    assert table.columns == ("n", "contacts", "count", "end2")
    assert table.counts()[6] == 780 and table.moment("end2")[6] == known("r2-square")[(6,)]
    Path("s.toml").write_text(
        'lattice = "square"\nobject = "walk"\nby = "contacts"\nmoment = "end2"\nto = 6\n'
    )
    assert package.count("s.toml").rows() == table.rows() == package.count(Path("s.toml"), to=6).rows()
    half = package.count("square", "walk", to=5, by=["visits", "contacts"], moment="end2", region="half")
    assert half.columns == ("n", "contacts", "visits", "count", "end2")
    for wrong in ({"by": 3}, {"moment": ["end2", 3]}, {"end": (1, 0)}, {"region": 4}, {"to": "4"}):
        with pytest.raises(SeriesError, match=next(iter(wrong))):
            package.count("square", "walk", **{"to": 4, **wrong})  # type: ignore[arg-type]
    with pytest.raises(SeriesError, match="up to which length"):
        package.count("square", "walk")
    with pytest.raises(SeriesError, match="visits need a wall"):
        package.count("square", "walk", to=4, by="visits")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("square", "walk", "--by", "visits"), ["--by visits", "--region"]),
        (("square", "walk", "--by", "visits:3", "--region", "half"), ["--by visits:3", "walls"]),
        (("square", "walk", "--by", "contcats"), ["'contcats'", "did you mean contacts?"]),
        (
            ("square", "walk", "--by", "contacts", "--by", "turns", "--by", "height"),
            ["3 statistics", "at most 2"],
        ),
        (("square", "walk", "--by", "contacts:2"), ["contacts takes no argument"]),
        (("square", "walk", "--by", "steps"), ["--by steps", "1,0"]),
        (("square", "walk", "--by", "steps:0,0"), ["steps:0,0", "all zero"]),
        (("square", "walk", "--by", "span:1,0,0"), ["span:1,0,0", "3 numbers"]),
        (("square", "walk", "--by", "revisits"), ["passes no site twice"]),
        (("square", "walk", "--by", "area"), ["only polygons"]),
        (("cubic", "polygon", "--by", "area"), ["two dimensions"]),
        (("king", "polygon", "--by", "area"), ["cross"]),
        (("l-lattice", "walk", "--by", "turns"), ["every step turns"]),
        (("square", "polygon", "--by", "end"), ["polygon has no end"]),
        (("square", "polygon", "--moment", "end2"), ["--moment end2", "no end"]),
        (("square", "walk", "--moment", "end3"), ["'end3'", "end2"]),
        (("4.8.8", "walk", "--moment", "end2"), ["drawing"]),
        (("square", "polygon", "--end", "1,0"), ["--end", "count walks"]),
        (("square", "bridge", "--end", "0,3"), ["--end", "bridge"]),
        (("square", "walk", "--end", "0,0"), ["--end", "count polygons"]),
        (("square", "walk", "--end", "1,0,0"), ["--end", "2 whole numbers"]),
        (("square", "walk", "--end", f"{10**30},0"), ["--end", "no cell"]),
        (("honeycomb", "walk", "--end", "1,0"), ["which site", "1,0:SITE"]),
        (("honeycomb", "walk", "--end", "1,0:z"), ["'z'"]),
        (("square", "walk", "--end", "0,-1", "--region", "half"), ["does not hold the end"]),
        (("square", "walk", "--start", "0,-1", "--region", "half"), ["does not hold the start", "--start"]),
        (("square", "polygon", "--start", "a"), ["--start", "leave it out"]),
        (("dice", "walk", "--region", "half"), ["not all alike", "--start"]),
        (("square", "walk", "--region", "slap:3"), ["'slap:3'", "slab:W"]),
        (("square", "walk", "--region", "slab:-1"), ["slab:-1"]),
        (("square", "walk", "--region", "box:3"), ["box:3"]),
        (("square", "walk", "--region", "half:2"), ["half takes no number"]),
        (("square", "closed-trail", "--region", "half"), ["half-space"]),
        (("square", "wlak", "--by", "contacts"), ["'wlak'"]),
    ],
)
def test_what_contradicts_itself(
    arguments: tuple[str, ...], words: Sequence[str], fleetcount: Fleetcount, tmp_path: Path
) -> None:
    """Contradictory options, regions without the start, statistics without a wall: one line, before any file."""
    refused(fleetcount("count", *arguments, "--to", "4", "--save", "s.toml"), *words)
    assert list(tmp_path.iterdir()) == []


def test_forms_exclude_each_other(fleetcount: Fleetcount) -> None:
    """Polynomials go with no other form and with no partial sums."""
    for other in ("--json", "--csv", "--plain"):
        refused(fleetcount("table", *CONTACTS, "--polynomials", other), "--polynomials", "exclude")
    refused(fleetcount("table", *CONTACTS, "--polynomials", "--so-far"), "--so-far")


def test_help_says_what_can_be_counted(fleetcount: Fleetcount) -> None:
    """The help of `count` and `table` names every object, statistic and moment with its convention."""
    for command in ("count", "table"):
        said = " ".join(fleetcount(command, "--help").out.split())
        for word in ("neighbour-avoiding:", "closed-trail:", "contacts:", "visits:K", "gyration2:", "slab:W"):
            assert word in said, word
        assert "W+1 layers" in said and "squared distance 3 on bcc" in said


class Leaving(Crew):
    """Is told to stop after some answers."""

    def __init__(self, stop: StopFlag, answers: int) -> None:
        super().__init__()
        self.flag, self.left = stop, answers

    def answer(self, hand_out: HandOut) -> Sequence[tuple[str, HandBack | Exception]]:
        self.left -= 1
        self.flag.up = self.left <= 0
        return super().answer(hand_out)


@pytest.mark.parametrize(
    "series",
    [
        define(find("square"), "walk", by=["end"]),
        define(find("square"), "walk", by=["contacts"], moment=["end2"]),
    ],
    ids=Series.title,
)
def test_partial_sums_are_lower_bounds(series: Series) -> None:
    """Of an unfinished refined reading each cell is at most its final value; the finished one equals the whole."""
    store, stop = MemoryStore(), StopFlag()
    lease = held(store, series)
    task = open_reading(store, lease, series, "direct", 7)
    with pytest.raises(StoppedError):
        set_to_work(store, lease, Leaving(stop, 4), task=task, stop=stop)
    seen = tables.view(store, series, so_far=True).table
    assert seen.final is None and seen.so_far is not None
    set_to_work(store, lease, Crew(), task=task)
    whole = tables.view(store, series).table
    assert whole.counts() == dict(enumerate((1, 4, 12, 36, 100, 284, 780, 2172)))
    final = dict(whole.cells())
    bounds = seen.partial_cells()
    assert bounds and any(values != final[place] for place, values in bounds)
    for place, values in bounds:
        assert all(least <= value for least, value in zip(values, final[place], strict=True)), place


def test_partial_sums_need_not_divide() -> None:
    """Half an orbit of ends, and a number of closed walks that is no whole number of polygons, are rounded down."""
    method = get("direct")
    ends = define(find("square"), "walk", by=["end"])
    half = Tally(1, {(1, -1, 0, 0): (3,), (2, -2, 0, 0): (5,)})
    with pytest.raises(TrustError):
        method.assemble(ends, half)
    shares = method.assemble(ends, half, partial=True)
    assert {place for place, values in shares.rows.items() if any(values)} == {
        (2, *end, 0) for end in product((-2, 0, 2), repeat=2) if sum(map(abs, end)) == 2
    }
    polygons = define(find("square"), "polygon", by=["area"], moment=["gyration2"])
    assert method.assemble(polygons, Tally(2, {(4, 1): (15, 33)}), partial=True).rows == {(4, 1): (1, 4)}


class Forging(Crew):
    """Adds to one sum of one cell of the first tally that has it."""

    def __init__(self, place: Place, column: int) -> None:
        super().__init__()
        self.place, self.column, self.done = place, column, False

    def count(self, hand_out: HandOut) -> HandBack:
        back = super().count(hand_out)
        back.answers = [self._forged(answer) for answer in back.answers]
        return back

    def _forged(self, answer: Answer) -> Answer:
        record = TallyRecord.parse(answer.text)
        if self.done or self.place not in record.rows.rows:
            return answer
        self.done = True
        more = [0] * record.rows.width
        more[self.column] = 1
        record.rows.add(Tally(record.rows.width, {self.place: tuple(more)}))
        text = record.text()
        return replace(answer, text=text, checksum=checksum(text))


@pytest.mark.parametrize("column", [0, 1])
def test_readings_are_compared_cell_by_cell(column: int) -> None:
    """One walk, or one unit of a moment, too many in one cell of one reading: no table, and the cell is named."""
    series = define(find("square"), "walk", by=["contacts"], moment=["end2"])
    store = MemoryStore()
    lease = held(store, series)
    for top, crew in ((5, Forging((4, 1), column)), (6, Crew())):
        task = open_reading(store, lease, series, "direct", top)
        set_to_work(store, lease, crew, task=task, forecast=Forecast(1e9, 1.0, 1.0, ()))  # nothing is divided
    with pytest.raises(TrustError, match="disagree at length 4, contacts 1: 32 96 and "):
        tables.view(store, series)
