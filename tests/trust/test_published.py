"""Published values: how tables are read, matched to series and compared with counts."""

from __future__ import annotations

import json
import tomllib
from importlib.resources import files
from pathlib import Path

import pytest

from fleetcount.lattice import catalogue
from fleetcount.lattice.symmetry import all_alike
from fleetcount.series.defining import define
from fleetcount.series.definition import Series, from_canonical
from fleetcount.trust import published

DATA = files("fleetcount.trust").joinpath("data")

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


def series(lattice: str | Path, kind: str) -> Series:
    return define(catalogue.find(lattice), kind)


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
        if any(published.for_series(define(lattice, kind)) for kind in ("walk", "polygon")):
            assert all_alike(lattice), name


def test_a_file_of_the_users_own_is_recognised(tmp_path: Path) -> None:
    """The square lattice in the user's own file, under another name, is the square lattice."""
    path = tmp_path / "cubic.toml"
    path.write_text(OWN_SQUARE, encoding="utf-8")
    (found,) = published.for_series(series(path, "walk"))
    assert found.table.id == "walks-square"


def test_a_famous_name_alone_is_not_recognised(tmp_path: Path) -> None:
    """A file that calls itself square and is another lattice has no published values."""
    path = tmp_path / "square.toml"
    more = '[[edges]]\nfrom = "o"\nto = "o"\ncell = [1, 2]\n'
    path.write_text(OWN_SQUARE.replace("mine", "square") + more, encoding="utf-8")
    assert published.for_series(series(path, "walk")) == []


def test_a_series_from_a_ledger_is_recognised() -> None:
    """A series read back from its canonical form, without names, has the same published values."""
    square = series("square", "polygon")
    again = from_canonical(json.loads(square.text), {})
    assert [found.table.id for found in published.for_series(again)] == ["polygons-square"]


def test_no_published_values_for_a_lattice_nobody_tabulated() -> None:
    """Where nothing is published there is nothing to say."""
    assert published.compare(series("dice", "walk"), {0: 3, 1: 12}, 1) is None


def test_closed_walks_become_polygons() -> None:
    """bcc: 96 closed walks of 4 steps from a site (OEIS A001667) are 96/8 polygons a cell."""
    (found,) = published.for_series(series("bcc", "polygon"))
    assert found.terms[4] == 12


def test_both_senses_on_one_way_streets() -> None:
    """manhattan: one polygon of 4 steps in one sense (OEIS A006781) is two a cell."""
    (found,) = published.for_series(series("manhattan", "polygon"))
    assert found.terms[4] == 2


def test_agreement_names_reach_and_source() -> None:
    """Counts that agree are said to, up to the last final length, with sequence number and authors."""
    (found,) = published.for_series(series("square", "walk"))
    agreement = published.compare(series("square", "walk"), found.terms, 22)
    assert agreement is not None
    assert agreement.disagreement is None
    assert agreement.line() == "agrees with published values to n=22 (A001411: Sloane, Guttmann; Jensen 2013)"


def test_lengths_nobody_published_are_passed_over() -> None:
    """Lengths that the table leaves out, here the odd ones, do not count as agreement."""
    agreement = published.compare(series("square", "polygon"), {3: 0, 4: 1, 5: 0, 6: 2, 7: 0}, 7)
    assert agreement is not None
    assert agreement.line() == "agrees with published values to n=6 (A002931: Clisby, Jensen 2012)"


@pytest.mark.parametrize("wrong", [283, 285])
def test_the_first_disagreement_is_told_with_both_numbers(wrong: int) -> None:
    """A count off by one is told with length, both numbers and source, and agreement ends before it."""
    agreement = published.compare(series("square", "walk"), {3: 36, 4: 100, 5: wrong, 6: 1}, 6)
    assert agreement is not None
    assert agreement.disagreement == (
        f"square walk: the count of length 5 is {wrong}, "
        "published is 284 (A001411: Sloane, Guttmann; Jensen 2013)"
    )
    assert agreement.line() == agreement.disagreement
    assert agreement.reached == ((4, "A001411: Sloane, Guttmann; Jensen 2013"),)


def test_terms_that_are_not_final_are_left_out() -> None:
    """A partial sum beyond the final length is no disagreement."""
    agreement = published.compare(series("square", "walk"), {3: 36, 4: 7}, 3)
    assert agreement is not None
    assert agreement.disagreement is None
