"""A run re-made from its record: the same bits, or a clear word on what differs; and records from strangers."""

from __future__ import annotations

import base64
import json
import tracemalloc
import zlib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from tests.sweep_examples import VANE, write
from tests.test_command import command
from tolerance.errors import InputError
from tolerance.records.again import again
from tolerance.records.reading import lay_out, read_record
from tolerance.records.record import NAME
from tolerance.scenario.entered import entered_files
from tolerance.study.versions import machine, program_digest

Changed = Callable[..., Path]


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A run of a scenario that extends another one in the folder above, and names a table of readings."""
    root = tmp_path_factory.mktemp("again")
    write(root, VANE, "base.toml")
    folder = root / "boards"
    folder.mkdir()
    readings = "\n".join(f"{100 + 0.5 * (number % 7)} um" for number in range(20))
    (folder / "press.csv").write_text(f"P1 thickness\n{readings}\n", encoding="utf-8")
    write(folder, 'format = 1\nextends = "../base.toml"\n[[variations]]\nof = "P1.thickness"\nshape = "measured"\n'
                  'file = "press.csv"\ncolumn = "P1 thickness"\n', "vane.toml")
    assert command("run", folder / "vane.toml", "--allow", root, "--out", root / "out", "--seed", 5, "--coupons", 512,
                   "--direct", 3, "--quiet") == 0
    return root


@pytest.fixture
def changed(made: Path, tmp_path: Path) -> Changed:
    """A copy of the record with something in it changed."""
    def change(**keys: object) -> Path:
        content = json.loads((made / "out" / NAME).read_text(encoding="utf-8"))
        for key, value in keys.items():
            content[key] = value(content[key]) if callable(value) else value
        (tmp_path / NAME).write_text(json.dumps(content), encoding="utf-8")
        return tmp_path
    return change


def test_what_entered_is_in_the_record(made: Path) -> None:
    found = entered_files(made / "boards" / "vane.toml", allow=[made])
    assert [one.name for one in found] == ["vane.toml", "../base.toml", "press.csv"]
    record = read_record(made / "out")
    assert [one.name for one in record.files] == ["vane.toml", "../base.toml", "press.csv"]
    assert (record.seed, record.coupons, record.direct) == (5, 512, 3)
    assert set(machine()) < set(record.made_with)


def test_the_same_bits_from_the_record_alone(made: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert command("run", made / "boards" / "vane.toml", "--seed", 5, "--coupons", 512, "--direct", 3, "--json",
                   "--allow", made) == 0
    expected = capsys.readouterr().out
    (tmp_path / NAME).write_bytes((made / "out" / NAME).read_bytes())
    assert command("again", tmp_path, "--json") == 0
    assert capsys.readouterr().out == expected
    assert command("again", tmp_path / NAME) == 0
    shown = capsys.readouterr()
    assert "The same result, to the last bit." in shown.out
    assert "Not as it was" not in shown.out
    assert [path.name for path in tmp_path.iterdir()] == [NAME]


def test_a_table_that_has_changed_is_told_and_the_copy_used(made: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = made / "boards" / "press.csv"
    before = table.read_bytes()
    table.write_bytes(before.replace(b"101.5 um", b"103.5 um"))
    try:
        assert command("again", made / "out") == 0
    finally:
        table.write_bytes(before)
    shown = capsys.readouterr().out
    assert "press.csv has changed since; the copy in the record was used." in shown
    assert "The same result, to the last bit." in shown


def test_another_version_and_another_result_are_told(changed: Changed, capsys: pytest.CaptureFixture[str]) -> None:
    def older(made_with: dict[str, str]) -> dict[str, str]:
        return {**made_with, "numpy": "2.0.1"}

    def other(result: dict[str, Any]) -> dict[str, Any]:
        result["yield"]["value"] -= 0.25
        result["lines"][0]["mean_ohm"] = "none"
        return result

    folder = changed(made_with=older, result=other, result_digest="0" * 64)
    assert command("again", folder) == 3
    shown = " ".join(capsys.readouterr().out.split())
    assert "Not as it was: numpy: 2.0.1 then" in shown
    assert "NOT the same to the last bit." in shown
    assert "yield of all lines together" in shown
    assert "(by 2.5e-01)" in shown
    assert "please report" not in shown


def test_another_result_with_nothing_that_explains_it_is_told(
    changed: Changed, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("again", changed(result_digest="0" * 64)) == 3
    shown = " ".join(capsys.readouterr().out.split())
    assert "nothing that is recorded differs: please report it." in shown
    assert "what differs is in the other figures" in shown


def test_lots_and_common_seeds_come_back(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write(tmp_path, VANE.replace('tolerance = "10 %"', 'tolerance = "10 %"\nlevel = "lot"'))
    assert command("run", path, "--out", tmp_path / "out", "--coupons", 300, "--quiet") == 0
    assert command("again", tmp_path / "out", "--quiet") == 0
    assert capsys.readouterr().out == ""


def packed(content: bytes) -> dict[str, Any]:
    import hashlib

    return {"name": "vane.toml", "path": "vane.toml", "bytes": len(content),
            "sha256": hashlib.sha256(content).hexdigest(),
            "zlib_base64": base64.b64encode(zlib.compress(content)).decode()}


def named(name: str) -> Callable[[list[dict[str, Any]]], list[dict[str, Any]]]:
    return lambda files: [files[0], {**files[1], "name": name}, files[2]]


@pytest.mark.parametrize(("keys", "told"), [
    ({"record": 2}, "is record 2, of a later version of this program; this one reads 1"),
    ({"record": 0}, "record must be 1"), ({"record": True}, "is no run record"), ({"seed": -1}, "seed"),
    ({"coupons": 2**40}, "coupons"), ({"files": []}, "files"), ({"files": 3}, "files"),
    ({"made_with": {"a": 1}}, "made"),
    ({"fingerprint": "0" * 64}, "is not the one that was run"), ({"fingerprint": "x"}, "fingerprint"),
    ({"more": 1}, "more"), ({"title": "x" * 3000}, "title"),
    ({"files": named("/etc/base.toml")}, "names a file in a way that none is written"),
    ({"files": named("a/../../base.toml")}, "names a file in a way"),
    ({"files": named("C:/base.toml")}, "names a file in a way"), ({"files": named("..")}, "names a file in a way"),
    ({"files": named("../" * 30 + "base.toml")}, "names a file in a way"),
    ({"files": named("x\0y")}, "names a file in a way"), ({"files": named("..\\base.toml")}, "names a file in a way"),
    ({"files": named("base.toml")}, "cannot be read by this version"),
    ({"files": lambda files: [{**files[0], "sha256": "0" * 64}, *files[1:]]}, "is damaged: vane.toml"),
    ({"files": lambda files: [{**files[0], "zlib_base64": "%%"}, *files[1:]]}, "is damaged: vane.toml"),
    ({"files": lambda files: [{**files[0], "bytes": 9}, *files[1:]]}, "is damaged: vane.toml"),
    ({"files": lambda files: [{**files[0], "bytes": 25_000_000}] * 150}, "larger than 100 MB together"),
    ({"files": lambda files: [{**files[0], "zlib_base64": None, "path": "/dev/zero"}, *files[1:]]},
     "was too large for the run record and is not at /dev/zero as it was"),
    ({"files": [packed(b"no scenario")]}, "cannot be read by this version"),
])
def test_a_record_from_a_stranger_is_data(
    changed: Changed, keys: dict[str, object], told: str, capsys: pytest.CaptureFixture[str],
) -> None:
    assert command("again", changed(**keys)) == 2
    shown = capsys.readouterr()
    assert told in shown.err
    assert "Traceback" not in shown.err
    assert shown.out == ""


@pytest.mark.parametrize("content", [b"", b"{", b"[1]", b"null", b"\xff\xfe", b"[" * 100_000, b'{"record": NaN}'])
def test_what_is_no_record(tmp_path: Path, content: bytes) -> None:
    (tmp_path / NAME).write_bytes(content)
    with pytest.raises(InputError, match="is no run record"):
        read_record(tmp_path)


def test_a_folder_without_a_record(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"holds no run-record\.json"):
        again(tmp_path)
    with pytest.raises(InputError, match=r"holds no run-record\.json"):
        again(tmp_path / "none")


def test_a_packed_bomb_is_not_unpacked(changed: Changed, tmp_path: Path) -> None:
    bomb = base64.b64encode(zlib.compress(bytes(200_000_000))).decode()
    record = read_record(changed(files=lambda files: [{**files[0], "zlib_base64": bomb}, *files[1:]]))
    tracemalloc.start()
    with pytest.raises(InputError, match="is damaged"):
        lay_out(record, tmp_path / "laid")
    assert tracemalloc.get_traced_memory()[1] < 20_000_000
    tracemalloc.stop()


def test_files_land_under_the_folder_only(made: Path, tmp_path: Path) -> None:
    place = lay_out(read_record(made / "out"), tmp_path / "laid")
    assert place.read_bytes() == (made / "boards" / "vane.toml").read_bytes()
    assert sorted(str(path.relative_to(tmp_path)) for path in tmp_path.rglob("*") if path.is_file()) == [
        "laid/above/press.csv", "laid/above/vane.toml", "laid/base.toml"]


def test_a_large_table_is_taken_from_its_place(changed: Changed, made: Path) -> None:
    folder = changed(files=lambda files: [*files[:2], {**files[2], "zlib_base64": None}])
    assert again(folder).same
    assert (made / "boards" / "press.csv").exists()


def test_the_program_has_one_digest() -> None:
    assert program_digest() == program_digest()
    assert len(program_digest()) == 64
