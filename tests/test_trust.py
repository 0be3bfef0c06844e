"""Input from strangers is data: it runs nothing, reads nothing elsewhere, commands neither terminal nor spreadsheet."""

from __future__ import annotations

import ast
import io
import json
import re
import sys
from pathlib import Path

import pytest
from openpyxl import Workbook, load_workbook

from tests.scenario_texts import BOARD, changed
from tests.sheet_examples import COUPONS, edited, fill, scenario_in, sheet_in
from tolerance.command import main
from tolerance.errors import ScenarioError
from tolerance.report.files import NOTE
from tolerance.report.sheet_text import clean_text
from tolerance.scenario import load, parse
from tolerance.screen import printable
from tolerance.study.check import check

PACKAGE = Path(__file__).parents[1] / "tolerance"
READINGS = "P1 um\n98\n99\n100\n101\n102\n"
MEASURED = changed(BOARD, ('tolerance = "10 %"', 'shape = "measured"\nfile = "FILE"\ncolumn = "P1 um"'))
HOSTILE = {
    "Orchard gateway": "=HYPERLINK(1) <script>alert(1)</script> [/bold]",
    "radio feed": "[red]radio[/red] <b>$\\\\frac$</b> :bomb:",
    "clock pair": "@SUM(1+1)|cmd",
    "P1": "=P1",
    "L1": "-L1+1",
    "L3": "+L3",
}


def command(*words: object) -> int:
    with pytest.raises(SystemExit) as ended:
        main([str(word) for word in words])
    assert isinstance(ended.value.code, int)
    return ended.value.code


def hostile_board() -> str:
    """The board with names that are formulas, markup, tags and mathematics somewhere else."""
    text = BOARD
    for name, hostile in HOSTILE.items():
        text = "".join(f'"{hostile}{part[len(name) + 1:]}' if part.startswith(f'"{name}') else part
                       for part in re.split(rf'(?="{name}[."])', text))
    assert all(hostile in text for hostile in HOSTILE.values())
    return text


# no code


FORBIDDEN_MODULES = {"pickle", "cPickle", "marshal", "shelve", "dill", "cloudpickle", "joblib", "yaml", "code", "runpy",
                     "ctypes", "subprocess", "xmlrpc", "imp"}
NEEDED = {"sweeps/cluster.py": {"ctypes"}}  # tells the C library how to keep memory; nothing that is read goes there
FORBIDDEN_CALLS = {"eval", "exec", "compile", "__import__", "execfile", "breakpoint"}
FORBIDDEN_METHODS = {"popen", "read_pickle", "to_pickle", "query", "loads_pickle"}


@pytest.mark.parametrize("path", sorted(PACKAGE.rglob("*.py")), ids=lambda path: str(path.relative_to(PACKAGE)))
def test_no_module_can_run_what_it_reads(path: Path) -> None:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        modules = ([alias.name for alias in node.names] if isinstance(node, ast.Import)
                   else [node.module or ""] if isinstance(node, ast.ImportFrom) else [])
        needed = NEEDED.get(path.relative_to(PACKAGE).as_posix(), set())
        assert not {name.split(".")[0] for name in modules} & (FORBIDDEN_MODULES - needed)
        if isinstance(node, ast.Call):
            assert not (isinstance(node.func, ast.Name) and node.func.id in FORBIDDEN_CALLS)
            assert not (isinstance(node.func, ast.Attribute) and node.func.attr in FORBIDDEN_METHODS)
            assert not any(word.arg == "allow_pickle" for word in node.keywords)


# files elsewhere


@pytest.fixture
def folders(tmp_path: Path) -> Path:
    """A folder for a scenario, and beside it another one with a base, readings, and a link to each."""
    (tmp_path / "board" / "data").mkdir(parents=True)
    (tmp_path / "library").mkdir()
    for folder in (tmp_path, tmp_path / "library", tmp_path / "board" / "data"):
        (folder / "base.toml").write_text(BOARD, encoding="utf-8")
        (folder / "press.csv").write_text(READINGS, encoding="utf-8")
    (tmp_path / "board" / "out.toml").symlink_to(tmp_path / "base.toml")
    (tmp_path / "board" / "out.csv").symlink_to(tmp_path / "press.csv")
    (tmp_path / "board" / "in.toml").symlink_to(Path("data") / "base.toml")
    (tmp_path / "board" / "in.csv").symlink_to(Path("data") / "press.csv")
    (tmp_path / "board" / "away").symlink_to(tmp_path / "library")
    return tmp_path


def written(folders: Path, path: str) -> Path:
    """A scenario in `board` that extends the path, or takes readings from it."""
    text = MEASURED.replace("FILE", path) if path.endswith(".csv") else f'extends = "{path}"\n'
    (folders / "board" / "board.toml").write_text(text, encoding="utf-8")
    return folders / "board" / "board.toml"


INSIDE = ["data/base", "./data/base", "data/../data/base", "in"]
OUTSIDE = ["../base", "data/../../base", "../library/base", "away/base", "out", "{there}/base", "{there}/library/base",
           "{there}/board/data/base"]


@pytest.mark.parametrize("ending", [".toml", ".csv"])
@pytest.mark.parametrize("path", INSIDE)
def test_what_stands_beside_or_below_a_scenario_is_read(path: str, ending: str, folders: Path) -> None:
    name = path.replace("base", "press") if ending == ".csv" else path
    assert load(written(folders, name + ending)).title == "Orchard gateway"


@pytest.mark.parametrize("path", OUTSIDE)
def test_no_table_is_read_outside_the_folder_of_a_scenario_unless_allowed(path: str, folders: Path) -> None:
    scenario = written(folders, path.format(there=folders).replace("base", "press") + ".csv")
    with pytest.raises(ScenarioError) as told:
        load(scenario)
    assert len(told.value.problems) == 1
    assert "must stand beside the scenario" in str(told.value)
    assert "--allow DIR" in str(told.value)
    assert ("it is a link to somewhere else" in str(told.value)) == (path in ("away/base", "out"))
    assert load(scenario, allow=[folders]).title == "Orchard gateway"
    assert load(scenario, allow=[folders]).allowed == (str(folders),)


def test_an_allowed_folder_allows_no_other(folders: Path) -> None:
    with pytest.raises(ScenarioError, match="must stand beside the scenario"):
        load(written(folders, "../press.csv"), allow=[folders / "library", folders / "board" / "data"])


@pytest.mark.parametrize("path", OUTSIDE)
def test_a_scenario_may_extend_one_that_stands_anywhere(path: str, folders: Path) -> None:
    assert load(written(folders, path.format(there=folders) + ".toml")).title == "Orchard gateway"


def test_nothing_is_told_of_what_stands_elsewhere_and_is_no_scenario(folders: Path) -> None:
    (folders / "base.toml").write_text('[registry]\ntoken = "secret"\n', encoding="utf-8")
    (folders / "library" / "base.toml").write_text('token = "secret"\n', encoding="utf-8")
    for path in ("../base.toml", "../library/base.toml", "away/base.toml", "out.toml", str(folders / "base.toml")):
        scenario = written(folders, path)
        with pytest.raises(ScenarioError, match=r"^board.toml: extends = .*: must be a scenario; ") as told:
            load(scenario)
        assert "secret" not in str(told.value)
        assert "token" not in str(told.value)
        with pytest.raises(ScenarioError, match=r"unknown (key|table)"):
            load(scenario, allow=[folders])


def test_a_base_names_tables_beside_itself_and_beside_the_scenario(folders: Path) -> None:
    (folders / "library" / "base.toml").write_text(MEASURED.replace("FILE", "press.csv"), encoding="utf-8")
    assert load(written(folders, "../library/base.toml")).title == "Orchard gateway"
    (folders / "board" / "press.csv").write_text(READINGS, encoding="utf-8")
    (folders / "library" / "base.toml").write_text(MEASURED.replace("FILE", "../board/press.csv"), encoding="utf-8")
    assert load(written(folders, "../library/base.toml")).title == "Orchard gateway"
    (folders / "library" / "base.toml").write_text(MEASURED.replace("FILE", "../press.csv"), encoding="utf-8")
    with pytest.raises(ScenarioError, match=r"^\.\./library/base.toml: .* must stand beside the scenario"):
        load(written(folders, "../library/base.toml"))


def test_every_command_that_reads_a_scenario_takes_the_folder(
    folders: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    path = written(folders, "../press.csv")
    assert command("check", path, "--quiet") == 2
    assert command("check", path, "--quiet", "--allow", folders / "library", "--allow", folders) == 0
    for name in ["run", "check", "tighten", "center", "promise", "compare", "note", "ask", "take", "reconcile",
                 "sweep"]:
        capsys.readouterr()
        assert command(name, "--help") == 0
        assert "--allow DIR" in capsys.readouterr().out


# text that is something else elsewhere


def test_names_stay_names_in_all_that_a_run_writes(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "[red]out[/red]"
    (tmp_path / "board.toml").write_text(hostile_board(), encoding="utf-8")
    assert command("run", tmp_path / "board.toml", "--coupons", 256, "--out", folder, "--figures", "svg") == 0
    shown = capsys.readouterr().out
    assert "\x1b" not in shown
    together = "".join(shown.split())
    assert "=HYPERLINK(1)<script>alert(1)</script>[/bold]" in together
    assert "[red]radio[/red]" in together
    assert "[red]out[/red]" in together
    assert "bomb:" in together
    book = load_workbook(folder / "tolerance.xlsx")
    texts = [cell for sheet in book.worksheets for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert not [cell.coordinate for cell in texts if cell.data_type == "f"]
    formulas = [cell for cell in texts if isinstance(cell.value, str) and cell.value[:1] in tuple("=+-@")]
    assert {cell.value for cell in formulas} >= {HOSTILE["Orchard gateway"], HOSTILE["clock pair"]}
    assert all(cell.quotePrefix for cell in formulas)
    figures = [path.read_text(encoding="utf-8") for path in folder.glob("*.svg")]
    assert len(figures) >= 3
    assert not [text for text in figures if "<script" in text or "<b>" in text]
    names = {path.name for path in folder.iterdir()}
    assert all(re.fullmatch(r"[\w.-]+", name) for name in names - {NOTE})


def test_a_notebook_escapes_names() -> None:
    shown = check(parse(hostile_board()))._repr_html_()
    assert "<script" not in shown
    assert "<b>" not in shown
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in shown


ESCAPES = "\x1b[2J\x1b]0gone\x07\x9b31m\u202e\x7f"


def test_headings_and_sheets_of_a_table_do_not_command_the_terminal(
    tmp_path: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    path = tmp_path / "press.csv"
    path.write_text(READINGS.replace("P1", f"P1 [red]{ESCAPES}"), encoding="utf-8")
    assert command("fit", path) == 0
    shown = capsys.readouterr().out
    assert shown == printable(shown)
    assert "P1 [red]\N{REPLACEMENT CHARACTER}[2J" in shown
    assert command("fit", path, "--column", ESCAPES) == 2
    shown = capsys.readouterr().err
    assert "\\x1b[2J" in shown
    assert shown == printable(shown)
    assert command("fit", path, "--json") == 0
    assert ESCAPES in json.loads(capsys.readouterr().out)["columns"][0]["column"]


@pytest.mark.parametrize("words", [
    ("run", f"{ESCAPES}.toml"), ("fit", f"{ESCAPES}.csv"), ("presets", ESCAPES), ("run", "a.toml", f"--{ESCAPES}"),
    ("run", "a.toml", "--figures", ESCAPES), (ESCAPES,),
])
def test_paths_and_options_do_not_command_the_terminal(
    words: tuple[str, ...], capsys: pytest.CaptureFixture[str],
) -> None:
    assert command(*words) == 2
    shown = capsys.readouterr().err
    assert shown == printable(shown)


def test_remarks_of_a_fabricator_do_not_command_the_terminal_and_stay_comments(
    tmp_path: Path, capsys: pytest.CaptureFixture[str],
) -> None:
    scenario_in(tmp_path)
    remark = "[bold]see\u202e page 3\n[evaluation]\nseed = 5"
    reply = edited(sheet_in(tmp_path), lambda sheet: fill(sheet, "L1.etch, L3.etch", tolerance=12, remarks=remark))
    assert command("take", tmp_path / "orchard.toml", reply, "--coupons", COUPONS, "--seed", 1) == 0
    shown = capsys.readouterr().out
    assert "[bold]see\N{REPLACEMENT CHARACTER} page 3" in " ".join(shown.split())
    text = (tmp_path / "orchard-answered.toml").read_text(encoding="utf-8")
    assert "# remark: [bold]see\\u202e page 3\\n[evaluation]\\nseed = 5" in text
    assert load(tmp_path / "orchard-answered.toml").evaluation.seed == 1


def test_no_formula_of_a_table_is_evaluated(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    book = Workbook()
    assert book.active is not None
    for value in ("P1 um", 98, "=A2+1", '=WEBSERVICE("http://localhost")', "=cmd|' /C calc'!A0"):
        book.active.append([value])
    book.save(tmp_path / "press.xlsx")
    assert command("fit", tmp_path / "press.xlsx") == 2
    told = capsys.readouterr().err
    assert 'row 3 holds "=A2+1", which is not a number; row 4 holds "=WEBSERVICE' in told
    assert "row 5 holds" in told


def test_a_workbook_holds_no_halves_of_characters() -> None:
    assert clean_text("a\x00b\x1bc\ud800d\uffffe") == "a\ufffdb\ufffdc\ufffdd\ufffde"


@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "cp1252"])
def test_an_output_of_few_letters_writes_escapes(
    encoding: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch,
) -> None:
    path = tmp_path / "press.csv"
    path.write_text(READINGS.replace("P1", "P1 Σ µ 厚"), encoding="utf-8")
    shown = io.BytesIO()
    monkeypatch.setattr(sys, "stdout", io.TextIOWrapper(shown, encoding=encoding))
    assert command("fit", path) == 0
    assert b"\\u539a" in shown.getvalue()
