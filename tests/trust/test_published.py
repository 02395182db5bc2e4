"""Published values: how tables are read, matched to series and compared with counts."""

from __future__ import annotations

import json
import tomllib
from collections.abc import Iterable, Mapping
from importlib.resources import files
from pathlib import Path
from typing import Any

import pytest

from fleetcount.lattice import catalogue
from fleetcount.lattice.symmetry import all_alike
from fleetcount.series.defining import define
from fleetcount.series.definition import Series, from_canonical
from fleetcount.series.region import wall
from fleetcount.series.table import CoefficientTable
from fleetcount.series.tally import Place, Tally
from fleetcount.trust import published
from fleetcount.trust.matching import PublishedTerms, for_series

DATA = files("fleetcount.trust").joinpath("data")

BEGINNING = {0: 1, 1: 4, 2: 12, 3: 36, 4: 100}
"""Walks on the square lattice (OEIS A001411)."""

OWN_SQUARE = """
name = "mine"
title = "my own drawing of it"
dimension = 2
metric = [[1, 0], [0, 1]]
[[sites]]
name = "o"
at = [0, 0]
[[edges]]
from = "o"
to = "o"
cell = [0, 1]
[[edges]]
from = "o"
to = "o"
cell = [-1, 0]
"""


def series(lattice: str | Path, kind: str, **options: Any) -> Series:
    return define(catalogue.find(lattice), kind, **options)


def compared(
    asked: Series, rows: Mapping[Place, tuple[int, ...]], final: int | None
) -> published.Agreement | None:
    """What published values say of a table with these rows."""
    sums = Tally(asked.width, dict(rows))
    return published.compare(CoefficientTable(asked, final, sums, asked.divisor, True, "0" * 64))


def plain(counts: Mapping[int, int]) -> dict[Place, tuple[int, ...]]:
    """Counts by length as rows."""
    return {(n,): (count,) for n, count in counts.items()}


def ids(found: Iterable[PublishedTerms]) -> list[str]:
    return [terms.table.id for terms in found]


@pytest.mark.parametrize("name", [*published.TABLE_FILES, "constants", "records", "matching"])
def test_data_files_are_toml_of_known_format(name: str) -> None:
    """Each data file is TOML of format 1."""
    assert tomllib.loads(DATA.joinpath(f"{name}.toml").read_text(encoding="utf-8"))["format"] == 1


@pytest.mark.parametrize("name", [*published.TABLE_FILES, "constants", "records"])
def test_every_number_names_its_source(name: str) -> None:
    """Every table, constant and record says where it comes from and how it was got."""
    document = tomllib.loads(DATA.joinpath(f"{name}.toml").read_text(encoding="utf-8"))
    entries = [entry for value in document.values() if isinstance(value, list) for entry in value]
    assert entries
    assert all(entry["source"] and entry["retrieved"] for entry in entries)


def test_the_licence_of_sequence_values_stands_beside_them() -> None:
    """The licence note names the sequence encyclopedia, its foundation and the licence."""
    note = DATA.joinpath("LICENCE-NOTE.txt").read_text(encoding="utf-8")
    assert all(
        words in note for words in ("On-Line Encyclopedia of Integer", "OEIS Foundation", "CC BY-SA 4.0")
    )


def test_tables_have_unique_ids_and_exact_values() -> None:
    """Tables are told apart by id and hold integers only, however large."""
    tables = published.tables()
    assert len({table.id for table in tables}) == len(tables)
    assert all(type(value) is int for table in tables for value in table.values.values())
    by_id = {table.id: table for table in tables}
    # OEIS A001411, its term of index 52, which is beyond 64 bits.
    assert by_id["walks-square"].terms()[52] == 37325046962536847970116


def test_published_fractions_are_multiplied_out() -> None:
    """A table of one eighth of the walks gives the full number: 8 trapped walks of 7 steps (OEIS A077482)."""
    (trapped,) = (table for table in published.tables() if table.id == "walks-square-trapped")
    assert trapped.terms()[7] == 8


def test_matched_lattices_have_sites_alike() -> None:
    """A published number of walks is from any site, so a matched lattice must have all sites alike."""
    for name in catalogue.names():
        lattice = catalogue.find(name)
        if any(for_series(define(lattice, kind)) for kind in ("walk", "polygon")):
            assert all_alike(lattice), name


def test_a_file_of_the_users_own_is_recognised(tmp_path: Path) -> None:
    """The square lattice in the user's own file, under another name, is the square lattice."""
    path = tmp_path / "cubic.toml"
    path.write_text(OWN_SQUARE, encoding="utf-8")
    (found,) = for_series(series(path, "walk"))
    assert found.table.id == "walks-square"


def test_a_famous_name_alone_is_not_recognised(tmp_path: Path) -> None:
    """A file that calls itself square and is another lattice has no published values."""
    path = tmp_path / "square.toml"
    more = '[[edges]]\nfrom = "o"\nto = "o"\ncell = [1, 2]\n'
    path.write_text(OWN_SQUARE.replace("mine", "square") + more, encoding="utf-8")
    assert for_series(series(path, "walk")) == []


def test_a_series_from_a_ledger_is_recognised() -> None:
    """A series read back from its canonical form, without names, has the same published values."""
    square = series("square", "polygon")
    again = from_canonical(json.loads(square.text), {})
    assert [found.table.id for found in for_series(again)] == ["polygons-square"]


def test_no_published_values_for_a_lattice_nobody_tabulated() -> None:
    """Where nothing is published there is nothing to say."""
    assert compared(series("dice", "walk"), plain({0: 3, 1: 12}), 1) is None


def test_closed_walks_become_polygons() -> None:
    """bcc: 96 closed walks of 4 steps from a site (OEIS A001667) are 96/8 polygons a cell."""
    (found,) = for_series(series("bcc", "polygon"))
    assert found.terms[4,] == 12


def test_both_senses_on_one_way_streets() -> None:
    """manhattan: one polygon of 4 steps in one sense (OEIS A006781) is two a cell."""
    (found,) = for_series(series("manhattan", "polygon"))
    assert found.terms[4,] == 2


def test_agreement_names_reach_and_source() -> None:
    """Counts that agree are said to, up to the last final length, with sequence number and authors."""
    (found,) = for_series(series("square", "walk"))
    rows = {place: (value,) for place, value in found.terms.items()}
    agreement = compared(series("square", "walk"), rows, 22)
    assert agreement is not None
    assert agreement.disagreement is None
    assert agreement.line() == "agrees with published values to n=22 (A001411: Sloane, Guttmann; Jensen 2013)"


def test_lengths_nobody_published_are_passed_over() -> None:
    """Lengths that the table leaves out, here the odd ones, do not count as agreement."""
    agreement = compared(series("square", "polygon"), plain({4: 1, 6: 2}), 7)
    assert agreement is not None
    assert agreement.line() == "agrees with published values to n=6 (A002931: Clisby, Jensen 2012)"


@pytest.mark.parametrize("wrong", [283, 285])
def test_the_first_disagreement_is_told_with_both_numbers(wrong: int) -> None:
    """A count off by one is told with length, both numbers and source, and agreement ends before it."""
    agreement = compared(series("square", "walk"), plain({**BEGINNING, 5: wrong, 6: 1}), 6)
    assert agreement is not None
    assert agreement.disagreement == (
        f"square walk: the count of length 5 is {wrong}, "
        "published is 284 (A001411: Sloane, Guttmann; Jensen 2013)"
    )
    assert agreement.line() == agreement.disagreement
    assert agreement.reached == ((4, "walks-square", "A001411: Sloane, Guttmann; Jensen 2013", True),)


def test_terms_that_are_not_final_are_left_out() -> None:
    """A partial sum beyond the final length is no disagreement."""
    agreement = compared(series("square", "walk"), plain({**BEGINNING, 4: 7}), 3)
    assert agreement is not None
    assert agreement.disagreement is None


def test_where_nothing_is_final_nothing_is_said() -> None:
    """A table without a final term is not compared."""
    assert compared(series("square", "walk"), {}, None) is None


def test_a_missing_term_is_a_disagreement() -> None:
    """A final length without a row counts as zero, which is told where another value is published."""
    agreement = compared(series("square", "walk"), plain({0: 1, 1: 4, 3: 36}), 3)
    assert agreement is not None
    assert (agreement.disagreement or "").startswith(
        "square walk: the count of length 2 is 0, published is 12"
    )


CONTACTS = {(0, 0): (1, 0), (1, 0): (4, 4), (2, 0): (12, 32), (3, 0): (28, 156), (3, 1): (8, 8)}
"""Square walks by contacts with end2: the eight walks of three steps around a face end beside their start
(count and end2 of all: OEIS A001411, A336448)."""


def test_joint_counts_and_moments_are_compared() -> None:
    """A table by contacts with end2 is held against joint counts, its columns, its totals, its sums and the moment."""
    agreement = compared(series("square", "walk", by=["contacts"], moment=["end2"]), CONTACTS, 3)
    assert agreement is not None
    assert {part.table for part in agreement.reached} == {
        "walks-square",
        "r2-square",
        "contacts-square-table",
        *(f"contacts-square-{name}" for name in ("0", "1", "2", "total")),
    }
    assert {part.n for part in agreement.reached} == {3}
    assert agreement.line().startswith("agrees with published values to n=3 (A001411: ")
    assert agreement.line().endswith("; and with tables enumerated for this program to n=3 (by contacts)")


@pytest.mark.parametrize(
    ("place", "row", "told"),
    [
        ((3, 1), (8, 7), "the end2 of length 3 is 163, published is 164 (A336448"),
        ((3, 0), (27, 156), "the count of length 3 is 35, published is 36 (A001411"),
        ((3, 3), (0, 1), "the end2 of length 3 is 165, published is 164"),
    ],
)
def test_a_wrong_cell_is_told(place: Place, row: tuple[int, ...], told: str) -> None:
    """One wrong count or moment in a joint table is told with what, where, both numbers and the source."""
    asked = series("square", "walk", by=["contacts"], moment=["end2"])
    agreement = compared(asked, {**CONTACTS, place: row}, 3)
    assert agreement is not None
    assert told in (agreement.disagreement or "")


def test_a_wrong_cell_that_sums_hide_is_told() -> None:
    """Two wrong cells whose sum is right are told with the value of the statistic."""
    asked = series("square", "walk", by=["contacts"], moment=["end2"])
    agreement = compared(asked, {**CONTACTS, (3, 0): (29, 156), (3, 1): (7, 8)}, 3)
    assert agreement is not None
    assert "the count of length 3 and contacts 0 is 29, published is 28 (A173380" in (
        agreement.disagreement or ""
    )


def test_two_statistics_are_summed_out_one_by_one() -> None:
    """A table by contacts and turns speaks to the tables of either, and to the plain ones."""
    found = ids(for_series(series("square", "walk", by=["turns", "contacts"])))
    assert {"walks-square", "walks-square-by-turns", "contacts-square-table"} <= set(found)


def test_the_same_region_in_another_place_is_recognised() -> None:
    """A well open to the side, walls in any order, start elsewhere: symmetries and shifts do not change the answer."""
    square = catalogue.find("square")
    walls = [wall(square, (0, -1), -6), wall(square, (-1, 0), -3), wall(square, (0, 1), 4)]
    assert ids(for_series(define(square, "walk", "3,5", walls=walls))) == ["well2-square"]
    assert ids(for_series(define(square, "walk", "3,4", walls=walls))) == []
    assert ids(for_series(define(square, "walk", "2,5", walls=walls))) == []


def test_directions_turn_with_the_walls() -> None:
    """In a slab, the published joint table is by steps across it, whichever way it lies; along it is another matter."""
    cubic = catalogue.find("cubic")
    walls = [wall(cubic, (1, 0, 0), 0), wall(cubic, (-1, 0, 0), -1)]
    across = define(cubic, "walk", walls=walls, by=["steps:1,0,0"])
    along = define(cubic, "walk", walls=walls, by=["steps:0,0,1"])
    assert ids(for_series(across)) == ["two-layer-slab-cubic"]
    assert ids(for_series(along)) == []


def test_visits_count_only_on_the_wall_that_is_meant() -> None:
    """In a half-space visits to its wall and to any are the same; in a quarter-space nothing is known of them."""
    for name in ("visits", "visits:any"):
        found = ids(for_series(series("cubic", "walk", by=[name], region_name="half")))
        assert found == ["halfspace-cubic", "halfspace-cubic-visits"]
    quarter = series("cubic", "walk", by=["visits"], region_name="quarter")
    assert ids(for_series(quarter)) == ["quarterspace-cubic"]


@pytest.mark.parametrize("end", ["1,0", "0,1", "-1,0", "0,-1"])
def test_any_neighbour_is_as_good_an_end_as_another(end: str) -> None:
    """Walks to each of the four neighbours are the published walks to one of them."""
    assert ids(for_series(series("square", "walk", end=end))) == ["end-square-1-0"]


def test_a_bridge_is_one_whichever_way_is_up(tmp_path: Path) -> None:
    """Bridges along the first coordinate and along the last are equally many on the square lattice."""
    path = tmp_path / "mine.toml"
    path.write_text(OWN_SQUARE.replace("[[sites]]", "up = [1, 0]\n[[sites]]"), encoding="utf-8")
    assert ids(for_series(series(path, "bridge"))) == ["bridges-square"]
    assert ids(for_series(series("square", "bridge"))) == ["bridges-square"]
    path.write_text(OWN_SQUARE.replace("[[sites]]", "up = [1, 1]\n[[sites]]"), encoding="utf-8")
    assert ids(for_series(series(path, "bridge"))) == []


def test_polygons_through_a_corner() -> None:
    """Polygons in a quadrant pass through its corner: the published ones do so too."""
    assert ids(for_series(series("square", "polygon", region_name="orthant"))) == ["quadrant-polygons-square"]
    assert ids(for_series(series("square", "polygon", region_name="half"))) == []
