"""The texts of the chain: what is hashed, and how it is stored."""

from __future__ import annotations

import hashlib
import json
from dataclasses import replace

import hypothesis.strategies as st
import pytest
from hypothesis import given

from fleetcount.errors import TrustError
from fleetcount.ledger import record
from fleetcount.ledger.record import OpeningRecord, TallyRecord
from fleetcount.series.tally import Tally
from tests.ledger.builders import opening, tally

BIG = st.integers(-(10**60), 10**60)
KEYS = st.text(st.characters(exclude_categories=("Cs",)), max_size=8)
PARTS = st.dictionaries(KEYS, BIG.filter(bool), max_size=4).map(lambda parts: tuple(sorted(parts.items())))


@given(
    key=KEYS,
    factor=BIG,
    children=PARTS,
    nodes=st.integers(0, 10**18),
    width=st.integers(1, 3),
    data=st.data(),
)
def test_a_tally_comes_back(
    key: str, factor: int, children: tuple[record.Part, ...], nodes: int, width: int, data: st.DataObject
) -> None:
    """Any tally is what its text says, and its text is the only one that says it."""
    places = st.tuples(st.integers(0, 50), st.integers(-5, 5))
    sums = st.tuples(*[BIG] * width)
    rows = Tally(width, data.draw(st.dictionaries(places, sums, max_size=5)))
    made = replace(tally(opening([]), key, factor, {}, children, nodes=nodes), rows=rows)
    text = made.text()
    assert TallyRecord.parse(text) == made
    assert TallyRecord.parse(text).text() == text
    assert record.unpack(record.pack(text)) == text


@given(roots=PARTS, width=st.integers(1, 4))
def test_an_opening_comes_back(roots: tuple[record.Part, ...], width: int) -> None:
    """Any opening is what its text says."""
    made = opening(roots, width=width)
    assert OpeningRecord.parse(made.text()) == made


def test_the_text_is_canonical_json() -> None:
    """The text is JSON with sorted keys and no spaces, first its format, with exact integers as decimal text."""
    text = tally(opening([], reading="r" * 32), "0:", 8, {20: 897697164}, [("0:0", 2)]).text()
    found = json.loads(text)
    assert json.dumps(found, sort_keys=True, separators=(",", ":"), ensure_ascii=False) == text
    assert found[:2] == ["fleetcount tally", 1] and text.startswith('["fleetcount tally",1,{')
    assert found[2]["factor"] == "8" and found[2]["children"] == [["0:0", "2"]]
    assert found[2]["rows"] == [["20", "897697164"]] and found[2]["nodes"] == "7"


def test_checksum_and_link_are_sha_256() -> None:
    """Checksum and link are what any other program computes by the published rule of the chain."""
    text = opening([("0:", 1)]).text()
    assert record.checksum(text) == hashlib.sha256(text.encode()).hexdigest()
    assert record.link("a", "b", "c", 17) == hashlib.sha256(b'["a","b","c","17"]').hexdigest()
    with pytest.raises(TrustError):
        record.checksum("\ud800")


def test_long_texts_are_packed() -> None:
    """Texts above 4 KB are stored compressed, shorter ones as they are."""
    assert record.pack("[" + "x" * 4095) == b"[" + b"x" * 4095
    long = "[" + "x" * 4096
    assert len(record.pack(long)) < 100 and record.unpack(record.pack(long)) == long


@pytest.mark.parametrize(
    "text",
    ["", "{}", "[]", "null", "[1,2,3]", '["fleetcount tally",1,[]]', '["fleetcount tally",1,{}]',
     '["fleetcount tally",2,{}]', '["fleetcount opening",1,{}]', "[" * 100_000, '"\\ud800"'],
)  # fmt: skip
def test_rubbish_is_no_record(text: str) -> None:
    """Anything that is no record of the format is refused in one line."""
    for kind in (TallyRecord, OpeningRecord):
        with pytest.raises(TrustError, match="not a record of format") as caught:
            kind.parse(text)
        assert "\n" not in str(caught.value) and len(str(caught.value)) < 400


@pytest.mark.parametrize(
    ("name", "value"),
    [("key", 5), ("factor", 8), ("factor", "x"), ("factor", "9" * 5000), ("children", [["b", "1"], ["a", "1"]]),
     ("children", [["a", "1"], ["a", "1"]]), ("children", [["a", "0"]]), ("children", [["a"]]), ("children", 7),
     ("rows", [["1"]]), ("rows", [["x", "1"]]), ("rows", None), ("width", 0), ("width", True), ("versions", []),
     ("versions", {"python": 3}), ("method_version", -1), ("nodes", 7)],
)  # fmt: skip
def test_a_wrong_field(name: str, value: object) -> None:
    """A field of the wrong kind makes a text no record."""
    parts = json.loads(tally(opening([]), "0:", 1, {1: 1}).text())
    parts[2][name] = value
    with pytest.raises(TrustError):
        TallyRecord.parse(json.dumps(parts))
    del parts[2][name]
    with pytest.raises(TrustError):
        TallyRecord.parse(json.dumps(parts))
