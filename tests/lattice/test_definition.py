"""Definition files: what is accepted, and that everything else gets one clear line."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fleetcount.errors import InputError, LatticeError
from fleetcount.lattice import checks, definition, files
from fleetcount.lattice.model import Arc

GOOD = """
name = "brick"
dimension = 2
metric = [["1", "0"], ["0", "4"]]

[[sites]]
name = "b"
at = ["1/2", "1/2"]

[[sites]]
name = "a"
at = [0, 0]

[[edges]]
from = "a"
to = "b"
cell = [0, 0]

[[edges]]
from = "a"
to = "b"
cell = [-1, 0]

[[edges]]
from = "a"
to = "b"
cell = [0, -1]
"""
SITE = '[[sites]]\nname = "{}"\nat = {}\n'
EDGE = '[[{}]]\nfrom = "{}"\nto = "{}"\ncell = {}\n'


def test_canonical_form() -> None:
    """Sites come sorted by position and an edge is two arcs, whatever the order in the file."""
    lattice = definition.parse(GOOD, "brick.toml")
    assert [site.name for site in lattice.sites] == ["a", "b"]
    assert lattice.sites[1].at == (Fraction(1, 2), Fraction(1, 2))
    assert lattice.arcs == (
        Arc(0, 1, (-1, 0)),
        Arc(0, 1, (0, -1)),
        Arc(0, 1, (0, 0)),
        Arc(1, 0, (0, 0)),
        Arc(1, 0, (0, 1)),
        Arc(1, 0, (1, 0)),
    )
    assert (lattice.periods, lattice.up, lattice.one_way, lattice.metric_is) == (2, (0, 1), False, "exact")
    assert lattice.title == "brick" and lattice.source == "brick.toml" and lattice.warnings == ()


def test_order_and_names_do_not_matter() -> None:
    """Another order of sites and edges, other names and a title give the same canonical value."""
    head, *entries = GOOD.replace('"a"', '"z"').split("\n\n")
    other = definition.parse("\n\n".join([head + '\ntitle = "bricks"', *reversed(entries)]), "other.toml")
    assert other.canonical() == definition.parse(GOOD, "brick.toml").canonical()


def test_opposite_arcs_are_legal() -> None:
    """Two opposite arcs join like an edge, but the lattice is one-way."""
    text = GOOD.replace(EDGE.format("edges", "a", "b", "[0, -1]"), "")
    text += EDGE.format("arcs", "a", "b", "[0, -1]") + EDGE.format("arcs", "b", "a", "[0, 1]")
    lattice = definition.parse(text, "brick.toml")
    assert lattice.arcs == definition.parse(GOOD, "brick.toml").arcs
    assert lattice.one_way


def test_a_cell_that_is_not_primitive_is_accepted_with_a_warning() -> None:
    """A doubled cell of the square lattice loads, and says which shift makes it too large."""
    text = 'name = "two"\ndimension = 2\nmetric = [[4, 0], [0, 1]]\n'
    text += SITE.format("a", "[0, 0]") + SITE.format("b", '["1/2", 0]')
    for joint in (("a", "b", "[0, 0]"), ("b", "a", "[1, 0]"), ("a", "a", "[0, 1]"), ("b", "b", "[0, 1]")):
        text += EDGE.format("edges", *joint)
    (warning,) = definition.parse(text, "two.toml").warnings
    assert "not primitive" in warning and "(1/2, 0)" in warning


def changed(old: str, new: str) -> str:
    assert old in GOOD
    return GOOD.replace(old, new, 1)


NO_EDGES = GOOD[: GOOD.index("[[edges]]")]


def edge(*entry: str) -> str:
    return GOOD + EDGE.format("edges", *entry)


BAD = {
    "broken TOML": (changed("dimension = 2", "dimension = = 2"), "line 3", "broken TOML"),
    "broken at the end": (GOOD + 'title = "x', "line 28", "broken TOML"),
    "too deep": ("a = " + "[" * 5000, "bad.toml", "too deeply"),
    "a number too long": ("a = " + "9" * 5000, "bad.toml", "too long"),
    "unknown key": (changed("dimension", "dimensions"), "bad.toml", "did you mean 'dimension'?"),
    "unknown key of a site": (GOOD + SITE.format("c", "[0, 0]") + "colour = 1\n", "[[sites]] 3", "'colour'"),
    "unknown key of an edge": (GOOD + 'shift = "x"\n', "[[edges]] 3", "unknown key 'shift'"),
    "no dimension": (changed("dimension = 2\n", ""), "bad.toml", "no 'dimension'"),
    "dimension of the wrong type": (changed("dimension = 2", "dimension = true"), "dimension", "True is not"),
    "dimension 0": (changed("dimension = 2", "dimension = 0"), "dimension", "from 1 to 5"),
    "dimension 6": (changed("dimension = 2", "dimension = 6"), "dimension", "from 1 to 5"),
    "huge dimension": (changed("dimension = 2", f"dimension = {10**30}"), "dimension", "from 1 to 5"),
    "periods 0": (changed("dimension = 2", "dimension = 2\nperiods = 0"), "periods", "from 1 to 2"),
    "periods above dimension": (changed("dimension = 2", "dimension = 2\nperiods = 3"), "periods", "1 to 2"),
    "no name": (changed('name = "brick"', ""), "bad.toml", "no 'name'"),
    "name not simple": (changed('name = "brick"', 'name = "a b"'), "name", "not a simple name"),
    "name a number": (changed('name = "brick"', "name = 3"), "name", "not a simple name"),
    "title of two lines": (changed("dimension", 'title = "a\\nb"\ndimension'), "title", "printable"),
    "metric_is unknown": (changed("dimension", 'metric_is = "odd"\ndimension'), "metric_is", '"drawing"'),
    "metric_is no text": (changed("dimension", "metric_is = [1]\ndimension"), "metric_is", '"drawing"'),
    "metric of one row": (changed(', ["0", "4"]]', "]"), "metric", "a list of 2 expected"),
    "metric row too long": (changed('["0", "4"]', '["0", "4", "1"]'), "metric[2]", "found 3 entries"),
    "metric no list": (changed('[["1", "0"], ["0", "4"]]', "1"), "metric", "a list of 2 expected, found 1"),
    "metric with a float": (changed('"4"', "4.0"), "metric[2][2]", "4.0 is a float"),
    "metric with words": (changed('"4"', '"four"'), "metric[2][2]", "not an exact rational"),
    "metric with a decimal": (changed('"4"', '"4.5"'), "metric[2][2]", "not an exact rational"),
    "metric dividing by zero": (changed('"4"', '"4/0"'), "metric[2][2]", "divides by zero"),
    "metric with a long number": (changed('"4"', f'"{10**30}"'), "metric[2][2]", "not an exact rational"),
    "metric not symmetric": (changed('"0"]', '"1/2"]'), "metric", "not symmetric"),
    "metric indefinite": (changed('"4"', '"-4"'), "metric", "not positive definite"),
    "metric singular": (changed('"4"', '"0"'), "metric", "not positive definite"),
    "metric too large": (changed('"4"', '"100000000"'), "metric", "64 bits"),
    "positions too fine": (changed('["1/2", "1/2"]', '["1/2", "50001/100003"]'), "metric", "64 bits"),
    "up of the wrong length": (changed("dimension", "up = [1]\ndimension"), "up", "a list of 2 expected"),
    "up all zero": (changed("dimension", "up = [0, 0]\ndimension"), "up", "all zero"),
    "up no integers": (changed("dimension", "up = [0, 0.5]\ndimension"), "up[2]", "not an integer"),
    "no sites": ('name = "x"\ndimension = 1\nmetric = [[1]]', "sites", "0 sites"),
    "sites no tables": ('name = "x"\ndimension = 1\nmetric = [[1]]\nsites = 3', "sites", "[[sites]]"),
    "site without a place": (changed("at = [0, 0]\n", ""), "[[sites]] 2", "no 'at'"),
    "site with a short place": (changed("at = [0, 0]", "at = [0]"), "[[sites]] 2, at", "a list of 2"),
    "site with a float": (changed("at = [0, 0]", "at = [0, 0.0]"), "[[sites]] 2, at[2]", "is a float"),
    "site outside the cell": (changed('"1/2"]', '"5/2"]'), "[[sites]] 1, at", "write 1/2 and move the cells"),
    "two sites of one name": (changed('name = "a"', 'name = "b"'), "[[sites]] 2", "a second site called 'b'"),
    "two sites at one place": (changed("[0, 0]", '["1/2", "2/4"]'), "[[sites]] 2, at", "same place"),
    "no edges": (NO_EDGES, "edges", "neither [[edges]] nor [[arcs]]"),
    "unknown site": (changed('to = "b"', 'to = "q"'), "[[edges]] 1, to", "no site called 'q'; the sites are"),
    "site number in place of name": (changed('to = "b"', "to = 1"), "[[edges]] 1, to", "no site called 1"),
    "cell missing": (changed("cell = [0, -1]\n", ""), "[[edges]] 3", "no 'cell'"),
    "cell too short": (changed("cell = [0, -1]", "cell = [0]"), "[[edges]] 3, cell", "a list of 2"),
    "cell no integer": (changed("[0, -1]", '[0, "1"]'), "[[edges]] 3, cell[2]", "not an integer"),
    "cell far away": (changed("cell = [0, -1]", "cell = [0, 65]"), "[[edges]] 3, cell[2]", "from -64 to 64"),
    "self-loop": (edge("a", "a", "[0, 0]"), "[[edges]] 4", "to itself"),
    "edge twice": (edge("a", "b", "[0, 0]"), "[[edges]] 4", "same connection as [[edges]] 1"),
    "edge twice the other way": (edge("b", "a", "[1, 0]"), "[[edges]] 4", "[[edges]] 2"),
    "arc that repeats an edge": (GOOD + EDGE.format("arcs", "b", "a", "[0, 0]"), "[[arcs]] 1", "[[edges]] 1"),
    "arc twice": (GOOD + 2 * EDGE.format("arcs", "a", "b", "[1, 1]"), "[[arcs]] 2", "[[arcs]] 1"),
    "edge to itself and back": (
        edge("a", "a", "[1, 0]") + EDGE.format("edges", "a", "a", "[-1, 0]"),
        "[[edges]] 5",
        "[[edges]] 4",
    ),
    "not joined": (edge("c", "c", "[1, 0]") + SITE.format("c", '["1/4", 0]'), "edges", "not joined to c"),
    "nothing along one period": (changed("[0, -1]", "[1, 0]"), "edges", "nothing runs along 1 direction"),
    "pieces that never meet": (changed("cell = [0, -1]", "cell = [1, -2]"), "edges", "2 pieces"),
    "no way out": (NO_EDGES + EDGE.format("arcs", "a", "b", "[0, 0]"), "arcs", "'b' has no way out"),
    "dimension not filled": (
        changed("dimension = 2", "dimension = 2\nperiods = 1")
        .replace('"1/2"]', "0]")
        .replace("cell = [0, 0]", "cell = [0]")
        .replace("[-1, 0]", "[-1]")
        .replace("[0, -1]", "[1]"),
        "dimension",
        "do not fill 2 dimensions",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", BAD)
def test_bad_files(case: str) -> None:
    """A bad file gives one line with the file, the entry, and what to do."""
    text, entry, message = BAD[case]
    with pytest.raises(LatticeError) as caught:
        definition.parse(text, "bad.toml")
    line = str(caught.value)
    assert "\n" not in line
    assert line.startswith("bad.toml")
    assert entry in caught.value.where
    assert message in line
    assert caught.value.mend


def test_too_many_arms() -> None:
    """A site with more arms than the limit is refused by its name, one with as many as the limit is not."""
    text = 'name = "star"\ndimension = 1\nmetric = [[1]]\n' + SITE.format("a", "[0]")
    text += "".join(EDGE.format("edges", "a", "a", f"[{k}]") for k in range(1, checks.GREATEST_ARMS // 2 + 1))
    assert len(definition.parse(text, "star.toml").arms[0]) == checks.GREATEST_ARMS
    with pytest.raises(LatticeError, match="site 'a' has 66 arms"):
        definition.parse(text + EDGE.format("edges", "a", "a", "[40]"), "star.toml")


def test_too_many_sites() -> None:
    """A cell with more sites than the limit is refused before anything is computed."""
    text = 'name = "dust"\ndimension = 1\nmetric = [[1]]\n'
    text += "".join(SITE.format(f"s{k}", f'["{k}/2000"]') for k in range(checks.GREATEST_SITES + 1))
    with pytest.raises(LatticeError, match="1025 sites in a cell"):
        definition.parse(text, "dust.toml")


def test_step_bound() -> None:
    """The bound on scalar products is that of the definition, worked out by hand for the brick lattice."""
    # Coordinates in halves are at most 1 in size, the metric is diag(1, 4).
    assert checks.step_bound(definition.parse(GOOD, "brick.toml")) == 1 + 4


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    """A missing file, a folder, binary rubbish and a huge file each give one line with the path."""
    rubbish, huge = tmp_path / "rubbish.toml", tmp_path / "huge.toml"
    rubbish.write_bytes(b"\xff\xfe\x00\x01")
    with huge.open("wb") as file:
        file.truncate(files.GREATEST_FILE + 1)
    for path in (tmp_path / "none.toml", tmp_path, rubbish, huge, tmp_path / ("x" * 300), Path("a\0b.toml")):
        with pytest.raises(InputError) as caught:
            definition.load(path)
        assert caught.value.where and caught.value.mend and "\n" not in str(caught.value)


def test_load_reads_the_file(tmp_path: Path) -> None:
    """A good file loads, also with a byte order of lines as Windows writes them."""
    path = tmp_path / "brick.toml"
    path.write_bytes(GOOD.replace("\n", "\r\n").encode())
    assert definition.load(path) == definition.parse(GOOD, "elsewhere")


VALUES = [
    "1",
    "-1",
    "0.5",
    "nan",
    '""',
    '"1/2"',
    "true",
    "[]",
    "[[]]",
    "{}",
    "[{}]",
    "1979-05-27",
    "9" * 18,
    '"\\u0000"',
]


@settings(max_examples=200, deadline=None)
@given(st.integers(0, GOOD.count(" = ") - 1), st.sampled_from(VALUES), st.sampled_from(["", *VALUES]))
def test_any_value_anywhere(place: int, value: str, more: str) -> None:
    """Whatever value stands in whatever place, the file is read or refused with one clear line."""
    lines = GOOD.splitlines()
    number = [n for n, line in enumerate(lines) if " = " in line][place]
    lines[number] = f"{lines[number].partition(' = ')[0]} = {f'[{value}, {more}]' if more else value}"
    try:
        definition.parse("\n".join(lines), "bad.toml")
    except LatticeError as error:
        assert error.mend and str(error).startswith("bad.toml") and "\n" not in str(error)


@settings(max_examples=200, deadline=None)
@given(st.text())
def test_any_text(text: str) -> None:
    """Any text at all is refused with one clear line."""
    with pytest.raises(LatticeError) as caught:
        definition.parse(text, "bad.toml")
    assert caught.value.mend and "\n" not in str(caught.value)
