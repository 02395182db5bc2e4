"""No published table goes unnoticed, and tables that must fit together do."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from fleetcount.lattice import catalogue
from fleetcount.series.defining import define
from fleetcount.trust import published
from fleetcount.trust.matching import for_series
from fleetcount.trust.published import PublishedTable
from tests.published import own_lattices
from tests.published.reach import CLOSING, NOT_REACHED, OWN_LATTICE, PLAIN, REFINED, SUMMED

Tables = Callable[[str], PublishedTable]


REPRODUCED = {*PLAIN, *(table for question in REFINED for table in question.tables)}


def test_every_table_is_reproduced_or_not_for_a_reason() -> None:
    """A published table is reproduced, or listed with the reason why it is not."""
    assert sorted({*REPRODUCED, *NOT_REACHED}) == sorted(table.id for table in published.tables())
    assert not REPRODUCED & NOT_REACHED.keys() and all(NOT_REACHED.values())
    assert own_lattices.OWN_FILES.keys() == OWN_LATTICE.keys() <= REPRODUCED


def test_the_tables_matched_to_series_are_those_reproduced() -> None:
    """Every table that the program compares counts with is reproduced by a test, and every one of them is matched."""
    assert {match["table"] for match in published.document("matching.toml")["match"]} == REPRODUCED


def test_the_tables_matched_to_plain_series_are_the_plain_ones() -> None:
    """The tables that plain counts on built-in lattices are compared with are those listed as such."""
    matched = {
        terms.table.id
        for name in catalogue.names()
        for kind in ("walk", "polygon")
        for terms in for_series(define(catalogue.find(name), kind))
    }
    assert matched == PLAIN.keys()


@pytest.mark.parametrize("table_id", SUMMED)
def test_tables_by_a_statistic_sum_to_plain_counts(table_id: str, published_table: Tables) -> None:
    """Summed over the statistic, a table by turns or contacts gives the published number of walks."""
    plain = published_table(SUMMED[table_id]).terms()
    sums = published_table(table_id).terms()
    assert len(sums) > 8
    assert sums == {n: plain[n] for n in sums}


@pytest.mark.parametrize("table_id", CLOSING)
def test_walks_ending_beside_their_start_close_to_polygons(table_id: str, published_table: Tables) -> None:
    """Each polygon of n steps is closed by one step in 2n ways: z e(n-1) = 2n p_n, with z neighbours alike.

    Common practice, no source: a polygon has n sites to start from and two senses.
    """
    polygon_table, neighbours = CLOSING[table_id]
    ends = published_table(table_id).terms()
    polygons = published_table(polygon_table).terms()
    common = [n for n in polygons if n - 1 in ends]
    assert len(common) > 7
    assert all(neighbours * ends[n - 1] == 2 * n * polygons[n] for n in common)
