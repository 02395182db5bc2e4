"""The program's counts against published values, term by term. The sources stand in the data files."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from fleetcount.lattice import catalogue
from fleetcount.series.defining import define
from fleetcount.trust import published
from fleetcount.trust.matching import PublishedTerms, for_series
from fleetcount.trust.published import PublishedTable
from tests.published import own_lattices
from tests.published.conftest import Answer, Count
from tests.published.reach import OWN_LATTICE, PLAIN, REFINED, Question

Speaking = dict[str, tuple[str, str, PublishedTerms]]
Tables = Callable[[str], PublishedTable]


@pytest.fixture(scope="module")
def series_of() -> Speaking:
    """For each table of plain counts the built-in lattice and object that it speaks about."""
    found = {}
    for name in catalogue.names():
        for kind in ("walk", "polygon"):
            for terms in for_series(define(catalogue.find(name), kind)):
                found[terms.table.id] = (name, kind, terms)
    return found


def _reproduce_plain(table_id: str, to: int, counted: Count, series_of: Speaking) -> None:
    lattice, kind, published_terms = series_of[table_id]
    expected = {n: value for (n,), value in published_terms.terms.items() if n <= to}
    counts = counted(lattice, kind, to=to)
    assert {n: counts[n] for n in expected} == expected


@pytest.mark.parametrize("table_id", PLAIN)
def test_plain_counts_are_the_published_ones(table_id: str, counted: Count, series_of: Speaking) -> None:
    """Counts on the built-in lattices equal every published term of their length."""
    _reproduce_plain(table_id, PLAIN[table_id][0], counted, series_of)


@pytest.mark.long
@pytest.mark.parametrize("table_id", PLAIN)
def test_plain_counts_are_the_published_ones_further(
    table_id: str, counted: Count, series_of: Speaking
) -> None:
    """The same for what about ten seconds a table reach."""
    _reproduce_plain(table_id, PLAIN[table_id][1], counted, series_of)


@pytest.mark.parametrize("table_id", OWN_LATTICE)
def test_counts_on_a_lattice_of_ones_own(
    table_id: str, counted: Count, tmp_path: Path, published_table: Tables
) -> None:
    """Walks from a named site of a strip, tube or slab in the user's own file equal every published term."""
    path, start = own_lattices.write(tmp_path, table_id)
    expected = published_table(table_id).terms()
    counts = counted(path, "walk", to=OWN_LATTICE[table_id], start=start)
    assert {n: counts[n] for n in expected} == expected


def _reproduce(question: Question, to: int, answered: Answer, published_table: Tables) -> None:
    agreement = published.compare(answered(question, to))
    assert agreement is not None
    assert agreement.disagreement is None
    reached = {(part.table, part.n) for part in agreement.reached}
    for table_id in question.tables:
        last = max(n for n in published_table(table_id).terms() if n <= to)
        assert (table_id, last) in reached


@pytest.mark.parametrize("question", REFINED, ids=Question.name)
def test_other_counts_are_the_published_ones(
    question: Question, answered: Answer, published_table: Tables
) -> None:
    """Objects, joint counts, moments, regions and ends equal every published term up to the length counted."""
    _reproduce(question, question.ordinary, answered, published_table)


@pytest.mark.long
@pytest.mark.parametrize("question", REFINED, ids=Question.name)
def test_other_counts_are_the_published_ones_further(
    question: Question, answered: Answer, published_table: Tables
) -> None:
    """The same for what about ten seconds a table reach."""
    _reproduce(question, question.long, answered, published_table)
