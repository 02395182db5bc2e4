"""The coefficient table in the forms that people and machines read."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace

import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st
from sympy.parsing.sympy_parser import parse_expr

from fleetcount.errors import InputError
from fleetcount.lattice import catalogue
from fleetcount.series.defining import define
from fleetcount.series.definition import Series
from fleetcount.series.polynomials import variables
from fleetcount.series.table import CoefficientTable
from fleetcount.series.tally import Place, Tally
from fleetcount.trust import published

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


def joint(
    rows: dict[Place, tuple[int, ...]], final: int | None, *, lattice: str = "square", **more: object
) -> CoefficientTable:
    """A table of a refined series with these cells."""
    series = define(catalogue.find(lattice), str(more.pop("object", "walk")), **more)  # type: ignore[arg-type]
    return CoefficientTable(series, final, Tally(series.width, dict(rows)), series.divisor, True, CHAIN)


CONTACTS = {(2, 0): (12, 32), (3, 0): (28, 156), (3, 1): (8, 8), (4, 0): (68, 608), (4, 1): (32, 96)}


def by_contacts(**more: object) -> CoefficientTable:
    return joint(CONTACTS, 4, by=["contacts"], moment=["end2"], **more)


def test_a_joint_table_has_one_row_a_cell() -> None:
    """Joint tables give length, statistics, count and moments in each row, and no row for a cell of zeros."""
    made = by_contacts()
    made.sums.rows[(4, 2)] = (0, 0)
    assert made.columns == ("n", "contacts", "count", "end2")
    assert made.rows() == [[n, c, str(a), str(b)] for (n, c), (a, b) in CONTACTS.items()]
    document = json.loads(made.json())
    assert document["columns"] == list(made.columns)
    assert document["rows"] == made.rows()
    assert document["denominator"] == "1"
    assert list(csv.reader(io.StringIO(made.csv()))) == [
        list(made.columns),
        *([str(x) for x in row] for row in made.rows()),
    ]
    assert made.plain().splitlines()[1] == "3 0 28 156"


def test_sums_of_a_joint_table() -> None:
    """Counts and moments of a length sum up its cells; a moment that is not there is refused by name."""
    made = by_contacts()
    assert made.counts() == {0: 0, 1: 0, 2: 12, 3: 36, 4: 100}
    assert made.moment("end2") == {0: 0, 1: 0, 2: 32, 3: 164, 4: 704}
    assert made[4] == 100
    assert made.cut(3).rows() == made.rows()[:3]
    with pytest.raises(InputError, match="no moment 'gyration2' in this table; it has end2"):
        made.moment("gyration2")


def test_moments_alone_keep_a_row_for_every_length() -> None:
    """Without statistics each length has a row, zeros included, and the denominator is stated."""
    made = joint({(3,): (2, 6)}, 4, lattice="kagome", object="polygon", moment=["gyration2"])
    assert made.rows() == [[3, "2", "6"], [4, "0", "0"]]
    thirds = joint({(0,): (1, 0), (1,): (4, 3)}, 1, lattice="triangular", moment=["height2"])
    assert thirds.document()["denominator"] == str(thirds.denominator)
    assert thirds.denominator == 4  # layers of the triangular lattice are sqrt(3)/2 apart: handbook geometry
    assert "height2 to be divided by 4" in thirds.text()
    assert "denominator" not in table(square(), SQUARE, 4).document()


def test_areas_name_their_unit() -> None:
    """A table by area says in which part of the cell's area it counts, where that is not the cell itself."""
    made = joint({(3, 1): (2,)}, 3, lattice="triangular", object="polygon", by=["area"])
    assert made.document()["area_denominator"] == "2"
    assert "area in units of 1/2 of the cell's" in made.text()
    assert "units" not in joint({(4, 1): (1,)}, 4, object="polygon", by=["area"]).text()


def test_one_statistic_is_laid_out_across() -> None:
    """Lengths stand down, the statistic across, aligned; each moment is a further block with its heading."""
    lines = by_contacts().text().splitlines()
    assert lines[0] == "square walk by contacts with end2"
    count = lines.index("count: n down, contacts across")
    assert [line.split() for line in lines[count + 1 : count + 5]] == [
        ["n", "0", "1"],
        ["2", "12", "."],
        ["3", "28", "8"],
        ["4", "68", "32"],
    ]
    assert len({len(line) for line in lines[count + 1 : count + 5]}) == 1
    end2 = lines.index("end2: n down, contacts across")
    assert [line.split() for line in lines[end2 + 2 :]] == [
        ["2", "32", "."],
        ["3", "156", "8"],
        ["4", "608", "96"],
    ]


def test_two_statistics_have_a_block_for_each_length() -> None:
    """Two statistics: one block a length, the first down and the second across."""
    rows = {(1, 0, 0): (1,), (1, 0, 1): (2,), (2, 0, 0): (3,), (2, 1, 5): (4,)}
    made = joint(rows, 2, by=["visits", "contacts"], region_name="half")
    assert made.columns == ("n", "contacts", "visits", "count")
    blocks = made.text().split("\n\n")[1:]
    assert [block.splitlines()[0] for block in blocks] == [
        f"count, n={n}: contacts down, visits across" for n in (1, 2)
    ]
    assert [line.split() for line in blocks[1].splitlines()[1:]] == [
        ["0", "5"],
        ["0", "3", "."],
        ["1", ".", "4"],
    ]


@pytest.mark.parametrize("width", [24, 40, 79, 200])
def test_wide_tables_are_cut_into_blocks(width: int) -> None:
    """No line is longer than the terminal, and every number is there exactly once, whatever the width."""
    rows = {(20, k): (10**6 + k, 10**9 + k) for k in range(30)}
    text = joint(rows, 20, by=["contacts"], moment=["end2"]).text(width)
    body = [line for line in text.splitlines() if "down" not in line][2:]
    assert max(map(len, body)) <= width
    words = text.split()
    for numbers in rows.values():
        assert [words.count(str(number)) for number in numbers] == [1, 1]


def test_ends_are_listed() -> None:
    """The distribution of ends is a list: one line an end, its coordinates, its site and the count."""
    made = joint({(1, -1, 0, 0): (1,), (1, 1, 0, 0): (1,)}, 1, by=["end"])
    assert made.columns == ("n", "x1", "x2", "site", "count")
    assert [line.split() for line in made.text().splitlines()[2:]] == [
        ["n", "x1", "x2", "site", "count"],
        ["1", "-1", "0", "0", "1"],
        ["1", "1", "0", "0", "1"],
    ]


def test_partial_sums_of_a_joint_table_are_marked() -> None:
    """Cells of lengths that are not final stand apart, in blocks that say so, and in no final form."""
    so_far = Tally(2, {(4, 1): (1, 1), (5, 2): (777, 888)})
    made = replace(by_contacts(), so_far=so_far, complete=False)
    assert made.partial_rows() == [[5, 2, "777", "888"]] == made.document()["so_far"]
    head, _, tail = made.text().partition("so far, count: n down, contacts across")
    assert "777" in tail and "so far, end2" in tail and "777" not in head
    assert "777" not in made.csv() + made.plain() + made.polynomial_text()
    assert replace(made, final=None, sums=Tally(2)).partial_rows()[0] == [4, 1, "1", "1"]


def test_an_empty_joint_table() -> None:
    """Where nothing of the object exists, or no term is final, the table says which."""
    assert "none of length 3 to 3" in joint({}, 3, object="polygon", by=["contacts"]).text()
    assert "no final term yet" in joint({}, None, by=["contacts"]).text()


def test_polynomials_of_contacts() -> None:
    """Each length is a polynomial in c, with the known numbers of walks by contacts as coefficients."""
    (known,) = (t for t in published.tables() if t.id == "contacts-square-table")
    rows = {place: (value,) for place, value in known.values.items() if value and place[0] <= 6}
    made = joint(rows, 6, by=["contacts"])
    for n, text in made.polynomials().items():
        terms = sympy.Poly(parse_expr(text), sympy.Symbol("c")).as_dict()
        assert terms == {(m,): value for (k, m), (value,) in rows.items() if k == n}
    lines = made.polynomial_text().splitlines()
    assert lines[:3] == ["# square walk by contacts", "# c: contacts", "# count"]
    assert lines[3] == "0: 1"


CELLS = st.dictionaries(
    st.tuples(st.integers(0, 4), st.integers(-3, 9), st.integers(0, 9)), st.integers(1, 10**30), max_size=30
)


@given(CELLS)
def test_polynomials_say_what_the_table_says(cells: dict[Place, int]) -> None:
    """Parsed by SymPy, the polynomials in two variables have exactly the cells as their terms, negative powers too."""
    cells = {(n, m, h): value for (n, h, m), value in cells.items()}
    made = joint({place: (value,) for place, value in cells.items()}, 4, by=["contacts", "height"])
    c, h = map(sympy.Symbol, variables(made.series))
    assert [str(c), str(h)] == ["c", "h"]
    found = {n: parse_expr(text) for n, text in made.polynomials().items()}
    for n, polynomial in found.items():
        terms = sympy.Poly(sympy.expand(polynomial * h**3), c, h).as_dict()
        expected = {(m, k + 3): value for (length, m, k), value in cells.items() if length == n}
        assert terms == expected


@pytest.mark.parametrize(
    ("by", "names"),
    [
        (["visits", "visits:2"], ("v", "v2")),
        (["visits:any"], ("v0",)),
        (["steps:1,0", "steps:0,1"], ("s1", "s2")),
        (["steps:1,0", "span:1,0"], ("w", "s")),
        (["end"], ("x1", "x2", "site")),
        (["turns", "contacts"], ("c", "t")),
    ],
)
def test_variables_are_different_and_free(by: list[str], names: tuple[str, ...]) -> None:
    """Each statistic has its own variable, a name that SymPy takes for a plain symbol."""
    made = joint({}, 0, by=by, region_name="quarter")
    assert variables(made.series) == names
    assert [parse_expr(name) for name in names] == [sympy.Symbol(name) for name in names]
