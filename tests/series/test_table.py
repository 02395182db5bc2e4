"""The coefficient table in the forms that people and machines read."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace

import pytest

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.table import CoefficientTable
from fleetcount.series.tally import Tally

SQUARE = {0: 1, 1: 4, 2: 12, 3: 36, 4: 100}
CHAIN = "5f" * 32


def square() -> Series:
    return define(catalogue.find("square"), "walk")


def table(series: Series, counts: dict[int, int], final: int | None, **more: object) -> CoefficientTable:
    made = CoefficientTable(series, final, Tally.of_counts(counts), series.divisor, True, CHAIN)
    return replace(made, **more)  # type: ignore[arg-type]


def test_the_document() -> None:
    """The JSON document has the promised entries, exact integers as decimal strings, and no others."""
    big = {**SQUARE, 5: 10**40}
    document = json.loads(table(square(), big, 5).json())
    series = document.pop("series")
    assert document == {
        "format": 1,
        "final": 5,
        "columns": ["n", "count"],
        "rows": [[0, "1"], [1, "4"], [2, "12"], [3, "36"], [4, "100"], [5, "1" + "0" * 40]],
        "divisor": "1",
        "complete": True,
        "chain": CHAIN,
    }
    assert series["digest"] == square().digest
    assert series["definition"] == json.loads(square().text)
    assert (series["lattice"], series["object"]) == ("square", "walk")


def test_comma_separated_values() -> None:
    """CSV has a heading and reads back as the same rows."""
    rows = list(csv.reader(io.StringIO(table(square(), SQUARE, 4).csv())))
    assert rows == [["n", "count"], *([str(n), str(count)] for n, count in SQUARE.items())]


def test_plain_columns() -> None:
    """Plain output is length and term, one a line, and nothing else."""
    assert table(square(), SQUARE, 4).plain() == "0 1\n1 4\n2 12\n3 36\n4 100\n"


def test_the_table_for_people() -> None:
    """Text has a title and aligned columns."""
    lines = table(square(), SQUARE, 4).text().splitlines()
    assert lines[0] == "square walk"
    assert lines[1].split() == ["n", "count"]
    assert [tuple(map(int, line.split())) for line in lines[2:]] == list(SQUARE.items())
    assert len({len(line) for line in lines[1:]}) == 1
    assert str(table(square(), SQUARE, 4)) == table(square(), SQUARE, 4).text()


def test_zeros_are_terms() -> None:
    """Lengths without a polygon are printed as zero, from the least length that a polygon can have."""
    polygons = define(catalogue.find("square"), "polygon")
    made = table(polygons, {4: 1, 6: 2}, 7)
    assert made.counts() == {3: 0, 4: 1, 5: 0, 6: 2, 7: 0}
    assert made[5] == 0 and made[0] == 0
    one_way = table(define(catalogue.find("manhattan"), "polygon"), {4: 2}, 4)
    assert list(one_way.counts()) == [2, 3, 4]


def test_terms_by_length() -> None:
    """`table[n]` is the final term, and beyond the reach an error that says how far it goes."""
    made = table(square(), SQUARE, 4)
    assert [made[n] for n in range(5)] == [1, 4, 12, 36, 100]
    for n in (-1, 5, 10**9):
        with pytest.raises(InputError, match="lengths 0 to 4"):
            made[n]


def test_cutting() -> None:
    """A cut leaves the lengths asked for; beyond the reach it is an error that says how far it goes."""
    made = table(square(), SQUARE, 4)
    assert made.cut(2).counts() == {0: 1, 1: 4, 2: 12}
    assert made.cut(2).final == 2
    assert made.cut(4).document() == made.document()
    with pytest.raises(
        InputError, match=r"square walk: the term of length 5 is not final; .* lengths 0 to 4"
    ):
        made.cut(5)
    with pytest.raises(InputError, match="negative"):
        made.cut(-1)
    with pytest.raises(InputError, match="final so far: nothing"):
        table(square(), {}, None).cut(0)


def test_numbers_per_site() -> None:
    """Per site the numbers stay exact and the divisor says what to divide by."""
    kagome = table(define(catalogue.find("kagome"), "polygon"), {3: 2, 6: 1}, 6)
    assert (kagome.divisor, kagome.per_site().divisor) == (1, 3)
    assert kagome.per_site().counts() == kagome.counts()
    assert json.loads(kagome.per_site().json())["divisor"] == "3"
    dice = table(define(catalogue.find("dice"), "walk"), {0: 3, 1: 12}, 1)
    assert (dice.divisor, dice.per_site().divisor) == (3, 3)
    assert "divide by 3" in dice.text().splitlines()[0]
    assert table(square(), SQUARE, 4).per_site().divisor == 1


def test_partial_sums_are_marked() -> None:
    """Sums of lengths that are not final are given apart, marked, and never as terms."""
    so_far = Tally.of_counts({4: 100, 5: 280, 6: 7})
    made = table(square(), SQUARE, 4, so_far=so_far, complete=False)
    assert made.partial_rows() == [[5, "280"], [6, "7"]]
    assert made.document()["so_far"] == [[5, "280"], [6, "7"]]
    marked = [line for line in made.text().splitlines() if line.endswith(" so far")]
    assert [line.split()[:2] for line in marked] == [["5", "280"], ["6", "7"]]
    for form in (made.csv(), made.plain(), str(made.rows())):
        assert "280" not in form
    with pytest.raises(InputError):
        made[5]


def test_no_term_yet() -> None:
    """Without a final term the table says so in every form."""
    empty = table(square(), {}, None, complete=False)
    assert (empty.counts(), empty.rows(), empty.csv(), empty.plain()) == ({}, [], "n,count\n", "")
    assert "no final term yet" in empty.text()
    assert empty.document()["final"] is None
    with pytest.raises(InputError, match="nothing"):
        empty[0]
