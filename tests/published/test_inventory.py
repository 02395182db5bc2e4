"""No published table goes unnoticed, and tables that must fit together do."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from fleetcount.lattice import catalogue
from fleetcount.series.defining import define
from fleetcount.trust import published
from fleetcount.trust.published import PublishedTable
from tests.published import own_lattices
from tests.published.reach import CLOSING, OWN_LATTICE, PLAIN, SUMMED, WAITING

Tables = Callable[[str], PublishedTable]


def test_every_table_is_used_or_waits_for_a_reason() -> None:
    """A published table is reproduced, fitted to another, or listed with what is missing."""
    listed = [*PLAIN, *OWN_LATTICE, *SUMMED, *CLOSING, *WAITING]
    assert sorted(listed) == sorted(table.id for table in published.tables())
    assert all(WAITING.values())
    assert own_lattices.OWN_FILES.keys() == OWN_LATTICE.keys()


def test_the_tables_matched_to_series_are_the_plain_ones() -> None:
    """The tables that the program compares counts with are those that are reproduced on built-in lattices."""
    matched = {
        terms.table.id
        for name in catalogue.names()
        for kind in ("walk", "polygon")
        for terms in published.for_series(define(catalogue.find(name), kind))
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
