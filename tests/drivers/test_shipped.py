"""Finding a file by its path or by the bare name of one that ships."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.bench_file import DIALECTS
from drivers.shipped import is_bare, locate
from drivers.text.faults import Faults, Place

PLACE = Place("bench.yaml", 3, 5)


@pytest.mark.parametrize("text", ["scpi-meter", "a b", "virtual", "x.txt"])
def test_bare(text: str) -> None:
    assert is_bare(text)


@pytest.mark.parametrize("text", ["./scpi-meter", "a/b", "a\\b", "a.yaml", "a.yml"])
def test_paths(text: str) -> None:
    assert not is_bare(text)


def found(text: str, beside: Path | None = None) -> tuple[Path | None, list[str]]:
    faults = Faults()
    path = locate(text, DIALECTS, "dialect", PLACE, faults, beside=beside)
    assert (path is None) is bool(faults.found)
    return path, [str(fault) for fault in faults.found]


def test_a_bare_name_is_shipped() -> None:
    assert found("scpi-meter")[0] == DIALECTS / "scpi-meter.yaml"


def test_an_unknown_name_gets_the_nearest_and_the_place() -> None:
    _, (told,) = found("scpi-metre")
    assert "scpi-meter" in told
    assert told.startswith("bench.yaml:3:5")


def test_a_path_is_seen_from_beside_first(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    near, here = tmp_path / "near", tmp_path / "here"
    for folder in (near, here):
        folder.mkdir()
        (folder / "own.yaml").write_text("x")
    monkeypatch.chdir(here)
    assert found("own.yaml", near)[0] == near / "own.yaml"
    (near / "own.yaml").unlink()
    assert found("own.yaml", near)[0] == Path("own.yaml")
    assert found(str(here / "own.yaml"))[0] == here / "own.yaml"


@pytest.mark.parametrize("text", ["", "no/such.yaml", "x" * 5000, "x" * 5000 + ".yaml", "a\0b", "a\0b.yaml", ".", "./"])
def test_what_no_file_can_be_called_is_a_fault_and_no_crash(text: str) -> None:
    assert found(text)[0] is None


def test_a_folder_is_no_file(tmp_path: Path) -> None:
    (tmp_path / "folder.yaml").mkdir()
    assert found(str(tmp_path / "folder.yaml"))[0] is None


@given(st.text(max_size=40))
def test_any_text_is_a_file_or_a_fault(text: str) -> None:
    found(text)
