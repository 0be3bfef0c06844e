"""Whatever bytes come, each reader ends with a result or our own message, within seconds, and leaves no half file."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.bad_files import workbook
from tests.catalogue import SCENARIO
from tests.fuzzing import ACCEPTED, READERS, REFUSED, DefectError, asked_sheet, feed, judged, seeds
from tests.scenario_texts import BOARD
from tolerance.errors import InputError

SLOWEST = 5_000  # milliseconds
FIRST_SEEDS = 5  # of a reader; the catalogue has the others

WORDS = st.sampled_from([
    "[", "]", "[[", "]]", "{", "}", "=", ".", ",", '"', "'", '"""', "'''", "#", "\n", "\r\n", "\r", "\\", "\0", "\t",
    " ", "format = 1", "title", "extends = ", "preset = ", "[[layers]]", "[[lines]]", "[[variations]]",
    "[[correlations]]",
    "[[offers]]", "[[sweep]]", "[test]", "[evaluation]", "[report]", "of = ", '"P*.dk"', '"L1.etch"', "name = ",
    "inf", "nan", "-0.0", "1e400", "0x", "9" * 40, "true", "1979-05-27T07:32:00Z", '"10 %"', '"5 um"', '"1 oz"',
    "\\u001b", "\N{BYTE ORDER MARK}", "\u202e", "\x1b[31m", "é", "厚", "a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a.a",
])
PIECES = st.lists(st.one_of(WORDS, st.text(max_size=8)), max_size=8).map("".join)
CELLS = st.one_of(
    st.sampled_from(["", " ", "98", "98,4", "98.4", "1.234,5", "1e5", "-3", "+-3", "nan", "inf", "1e400", "=A1",
                     "10 %", "98 um", "98um", "µm", '"', "n/a", "2026-01-01", "TRUE", "\x1b[2J", "9" * 400, "limits",
                     "Cpk 1.33", "3 sigma", "um", "P1 um", "L1.etch, L3.etch", "radio feed"]),
    st.text(max_size=10), st.floats().map(repr))
HEADINGS = st.sampled_from([["P1 um"], ["P1 um", "lot"], ["P1"], ["line", "value"], ["line", "value ohm", "lot"], [""]])


@st.composite
def tables(draw: st.DrawFn) -> bytes:
    """A table whose rows are mostly as wide as its headings, its cells mostly numbers or names."""
    headings, mark = draw(HEADINGS), draw(st.sampled_from([",", ";", "\t"]))
    plain = st.sampled_from(["98.4", "99", "50,2", "radio feed", "clock pair", "1e2", "-3", "98 um"])
    wide = st.lists(plain | CELLS, min_size=len(headings), max_size=len(headings))
    rows = draw(st.lists(wide | st.lists(CELLS, max_size=4), max_size=10))
    text = draw(st.sampled_from(["\n", "\n", "\r\n", "\r"])).join(mark.join(row) for row in [headings, *rows])
    return (draw(st.sampled_from(["", "", f"sep={mark}\n"])) + text).encode(
        draw(st.sampled_from(["utf-8", "utf-8", "utf-8-sig", "utf-16", "latin-1"])), "replace")


XML = st.lists(st.one_of(
    st.sampled_from(['<row r="2">', "</row>", "<row>", '<c r="A2">', '<c r="XFD9" t="s">', '<c t="b">', '<c t="e">',
                     "</c>", "<v>98</v>", "<v>1e999</v>", "<v>-1</v>", "<v/>", "<f>A1+1</f>", '<c t="d">',
                     '<c t="inlineStr"><is><t>x</t></is>',
                     "<v>2026-01-01</v>", "<!DOCTYPE a>", "&lt;", "&a;", "<![CDATA[98]]>", '<row r="-1">',
                     '<c r="1A">', '<c s="99">']),
    st.text(alphabet="<>/&;\"'=rcv019 A", max_size=10)), max_size=14).map("".join)


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("fuzz")


def bounded(examples: int) -> settings:
    """So many examples, none of them slower than is allowed."""
    return settings(max_examples=examples, deadline=SLOWEST, derandomize=True,
                    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow])


@bounded(150)
@given(start=st.integers(0, 2**16 - 1), gone=st.integers(0, 60), put=PIECES)
def test_scenarios(folder: Path, start: int, gone: int, put: str) -> None:
    feed("spliced", start.to_bytes(2, "big") + bytes([gone]) + put.encode("utf-8", "surrogatepass"), folder)


@bounded(30)
@given(content=st.one_of(st.binary(max_size=80), PIECES.map(lambda text: text.encode("utf-8", "surrogatepass"))))
@pytest.mark.parametrize("reader", ["scenario", "table", "coupons"])
def test_any_bytes(folder: Path, reader: str, content: bytes) -> None:
    feed(reader, content, folder)


@bounded(60)
@given(content=tables())
@pytest.mark.parametrize("reader", ["table", "coupons"])
def test_tables(folder: Path, reader: str, content: bytes) -> None:
    feed(reader, content, folder)


@bounded(30)
@given(content=XML.map(str.encode))
def test_sheets(folder: Path, content: bytes) -> None:
    feed("cells", content, folder)


@bounded(30)
@given(content=st.binary(max_size=60), which=st.integers(0, 3))
def test_parts_of_workbooks(folder: Path, content: bytes, which: int) -> None:
    feed("part", bytes([which]) + content, folder)


@bounded(30)
@given(start=st.integers(0, 4_000), put=st.binary(max_size=20), reader=st.sampled_from(["workbook", "reply"]))
def test_damaged_workbooks(folder: Path, start: int, put: bytes, reader: str) -> None:
    sound = workbook() if reader == "workbook" else asked_sheet(folder)
    feed(reader, sound[:start] + put + sound[start + len(put):], folder)


@bounded(15)
@given(cells=st.lists(CELLS, max_size=40))
def test_answers_of_a_fabricator(folder: Path, cells: list[str]) -> None:
    feed("answers", "|".join(cells).encode("utf-8", "surrogatepass"), folder)


ARGUMENTS = st.lists(st.one_of(
    st.sampled_from(["note", "fit", "presets", "schema", "new", "--help", "--json", "--quiet", "--out", "--seed", "-1",
                     "--coupons", "1e4", "--lower", "nan", "--upper", "5 um", "--column", "P1 um", "--width-change",
                     "10 %", "--allow", ".", "--sheet", "--", "-", "", "board.toml", "press.csv", "nowhere",
                     "/dev/null"]),
    st.text(st.characters(exclude_characters="\0", exclude_categories=["Cs"]), max_size=6)), max_size=5)


@bounded(60)
@given(arguments=ARGUMENTS, start=st.sampled_from(["note", "fit", "presets", "check", "compare", "ask", "take"]))
def test_arguments(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, arguments: list[str], start: str) -> None:
    """No command gets so far as to compute: there is no scenario that it could take."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / SCENARIO).write_text(BOARD.replace("format = 1", "format = 2"), encoding="utf-8")
    judged([start, *arguments], tmp_path)


@pytest.mark.parametrize("reader", READERS)
def test_every_reader_takes_its_sound_seeds(reader: str, tmp_path: Path) -> None:
    own = [content for kind, content in seeds(tmp_path) if kind == reader]
    outcomes = {feed(reader, content, tmp_path) for content in own[:FIRST_SEEDS]}
    assert outcomes <= {ACCEPTED, REFUSED}
    assert ACCEPTED in outcomes or reader in ("part", "cells")


def test_a_defect_is_noticed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A traceback, a file left behind, and a message that says nothing are defects."""
    def fails(_: object) -> int:
        raise KeyError("P1")

    def leaves(_: object) -> int:
        (tmp_path / "half").touch()
        raise InputError("said")

    (tmp_path / SCENARIO).write_text(BOARD, encoding="utf-8")
    for command, error in ((fails, KeyError), (leaves, DefectError)):
        monkeypatch.setattr("tolerance.command._presets", command)
        with pytest.raises(error):
            judged(["presets"], tmp_path)
