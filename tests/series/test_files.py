"""Series files: what they say is the series that the options say, and what is no series file is refused in one line."""

from __future__ import annotations

from pathlib import Path

import pytest

from fleetcount.errors import InputError, SeriesError
from fleetcount.series import files
from fleetcount.series.files import WrittenSeries, WrittenWall, asked, load, save

WHOLE = """
lattice = "square"
object = "walk"
to = 12
by = ["visits", "contacts"]
moment = "end2"
start = "0,1"
end = "3,2:a"
method = "direct"

[[walls]]
form = [0, 2]
least = 1

[[walls]]
form = [-1, 0]
least = -7
"""

LATTICE = """
name = "mine"
dimension = 2
metric = [["1", "0"], ["0", "1"]]
sites = [{ name = "a", at = ["0", "0"] }]
edges = [{ from = "a", to = "a", cell = [1, 0] }, { from = "a", to = "a", cell = [0, 1] }]
"""


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty current folder."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


def write(path: Path, text: str) -> Path:
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")
    return path


def test_a_file_with_every_key(here: Path) -> None:
    """Each key is read; a single name may stand without a list."""
    written = load(write(here / "whole.toml", WHOLE))
    assert written == WrittenSeries(
        "square",
        "walk",
        12,
        ("visits", "contacts"),
        ("end2",),
        None,
        (WrittenWall((0, 2), 1), WrittenWall((-1, 0), -7)),
        "0,1",
        "3,2:a",
        "direct",
        str(here / "whole.toml"),
    )
    series = written.series()
    assert series.columns == ("n", "contacts", "visits", "count", "end2")
    assert [w.text() for w in series.walls] == [
        "0,1 >= 0",
        "-1,0 >= -7",
    ]  # 2y >= 1 is y >= 1, where the start is


OPTIONS = [
    {"by": ["contacts"], "moment": ["end2", "gyration2"]},
    {"by": ["visits", "contacts"], "region": "half", "moment": ["end2"]},
    {"start": "0,1", "region": "slab:4", "by": ["visits:2"]},
    {"end": "2,1"},
    {"by": ["end"]},
    {},
]


@pytest.mark.parametrize("given", OPTIONS)
def test_file_and_options_are_one_series(given: dict[str, object], here: Path) -> None:
    """What is saved from options reads back as the same words and has the same digest."""
    definition = asked("square", "walk", 9, **given)  # type: ignore[arg-type]
    save(definition, "series.toml")
    read = asked("series.toml", None, None)
    assert read.to == 9
    assert read.series().digest == definition.series().digest
    assert asked("series.toml", None, 4).to == 4


def test_walls_are_their_shorthand(here: Path) -> None:
    """A region by name and the same walls as inequalities are one series."""
    walls = "[[walls]]\nform = [0, 1]\nleast = 0\n[[walls]]\nform = [0, -1]\nleast = -3\n"
    by_walls = load(write(here / "walls.toml", f'lattice = "square"\nobject = "walk"\n{walls}')).series()
    assert by_walls.digest == asked("square", "walk", None, region="slab:3").series().digest


def test_lattices_are_found_from_the_file(here: Path) -> None:
    """A lattice file is named as seen from the series file, wherever the program runs; saving keeps that."""
    write(here / "lattices" / "mine.toml", LATTICE)
    write(here / "lattices" / "s.toml", 'lattice = "mine.toml"\nobject = "walk"\n')
    read = load(Path("lattices/s.toml"))
    assert read.series().digest == asked("square", "walk", None).series().digest
    (here / "deep" / "er").mkdir(parents=True)
    save(read, "deep/er/t.toml")
    assert 'lattice = "../../lattices/mine.toml"' in (here / "deep" / "er" / "t.toml").read_text()
    assert load("deep/er/t.toml").series().digest == read.series().digest
    save(asked(here / "lattices" / "mine.toml", "walk", 3), "lattices/u.toml")
    assert load("lattices/u.toml").series().lattice.name == "mine"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('object = "walk"\n', ["'lattice'", "add a line"]),
        ('lattice = "square"\n', ["'object'", "add a line"]),
        ('lattice = "square"\nobject = "walk"\nbye = "turns"\n', ["'bye'", "did you mean 'by'?"]),
        ('lattice = "square"\nobject = "walk"\nto = "12"\n', ["to", "not an integer"]),
        ('lattice = "square"\nobject = "walk"\nto = -1\n', ["to", "not an integer from 0"]),
        ('lattice = "square"\nobject = "walk"\nto = 12.0\n', ["to", "12.0"]),
        ('lattice = "square"\nobject = "walk"\nto = true\n', ["to", "True"]),
        ('lattice = 4\nobject = "walk"\n', ["lattice", "quotes"]),
        ('lattice = "square"\nobject = ["walk"]\n', ["object", "quotes"]),
        ('lattice = "square"\nobject = "walk"\nby = 3\n', ["by", "list of names"]),
        ('lattice = "square"\nobject = "walk"\nby = ["turns", 3]\n', ["by[2]", "quotes"]),
        ('lattice = "square"\nobject = "walk"\nstart = ""\n', ["start", "quotes"]),
        ('lattice = "square"\nobject = "walk"\nmethod = "magic"\n', ["method", '"direct"']),
        ('lattice = "square"\nobject = "walk"\nwalls = [1]\n', ["walls", "[[walls]]"]),
        ('lattice = "square"\nobject = "walk"\n[[walls]]\nform = [0, 1]\n', ["[[walls]] 1", "'least'"]),
        ('lattice = "square"\nobject = "walk"\n[[walls]]\nform = 1\nleast = 0\n', ["[[walls]] 1, form"]),
        ('lattice = "square"\nobject = "walk"\n[[walls]]\nform = [0, 0.5]\nleast = 0\n', ["form[2]", "0.5"]),
        ('lattice = "square"\nobject = "walk"\n[[walls]]\nform = [0, 1]\nleast = 0\nmost = 2\n', ["'most'"]),
        ('lattice = "square"\nobject = "walk"\nregion = "half', ["line 3", "broken TOML"]),
        (LATTICE, ["a lattice, not a series", "OBJECT"]),
        ("\xff", ["UTF-8"]),
    ],
)
def test_what_is_no_series_file(text: str, words: list[str], here: Path) -> None:
    """Unknown keys and wrong types are refused with file, entry and mend."""
    (here / "bad.toml").write_bytes(text.encode("latin-1"))
    with pytest.raises(SeriesError) as caught:
        load("bad.toml")
    for word in ["bad.toml", *words]:
        assert word in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ('by = "visits"\n', ["--by visits", "need a wall"]),
        ('region = "half"\nstart = "0,-1"\n', ["does not hold the start"]),
        ("[[walls]]\nform = [0, 1, 0]\nleast = 0\n", ["[[walls]] 1, form", "3 numbers"]),
        ("[[walls]]\nform = [0, 0]\nleast = 0\n", ["[[walls]] 1, form", "all zero"]),
        ('object = "wlak"\n', ["'wlak'", "did you mean walk?"]),
    ],
)
def test_what_makes_no_sense(more: str, words: list[str], here: Path) -> None:
    """A definition that makes no sense is refused with the file beside the reason."""
    head = 'lattice = "square"\n' + ("" if "object" in more else 'object = "walk"\n')
    written = load(write(here / "odd.toml", head + more))
    with pytest.raises(SeriesError) as caught:
        written.series()
    for word in ["odd.toml", *words]:
        assert word in str(caught.value)


def test_saving_leaves_other_files_alone(here: Path) -> None:
    """The same definition may be saved twice; another file is never written over."""
    definition = asked("square", "walk", 9, by=["contacts"])
    save(definition, "s.toml")
    before = (here / "s.toml").read_bytes()
    save(definition, "s.toml")
    for other in (asked("square", "walk", 10, by=["contacts"]), asked("cubic", "walk", 9, by=["contacts"])):
        with pytest.raises(InputError, match=r"s\.toml: another file stands there"):
            save(other, "s.toml")
    assert (here / "s.toml").read_bytes() == before
    write(here / "mine.toml", LATTICE)
    with pytest.raises(InputError, match="another file"):
        save(definition, "mine.toml")
    for place, words in (("s.txt", r"ends in \.toml"), ("no/such/s.toml", "cannot be written")):
        with pytest.raises(InputError, match=words):
            save(definition, place)


def test_file_and_options_contradict(here: Path) -> None:
    """Options beside a series file are refused by name, and so is a lattice without an object."""
    save(asked("square", "walk", 9), "s.toml")
    with pytest.raises(InputError, match="--end and --by beside a series file"):
        asked("s.toml", None, None, by=["turns"], end="1,0")
    with pytest.raises(InputError, match="give an OBJECT: walk, polygon"):
        asked("square", None, 4)
    with pytest.raises(InputError, match="no such series file"):
        asked("none.toml", None, 4)


def test_methods_are_those_that_exist() -> None:
    """The methods that a file may name are those of the program."""
    from fleetcount.methods import registry

    assert files.METHODS == registry.METHODS
