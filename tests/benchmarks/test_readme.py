"""The README is true: its tour can be walked as it stands, and its picture is of the report that it names.

`PACKMIME_GOLDEN=1` takes the picture anew; it needs Chromium and Pillow (which matplotlib brings).
"""

from __future__ import annotations

import hashlib
import json
import os
import re
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from PIL import Image, PngImagePlugin

import procedures

pytestmark = pytest.mark.benchmark
ROOT = Path(procedures.__file__).resolve().parents[1]
README, PICTURE = ROOT / "README.md", ROOT / ".pictures" / "report.png"
SHOWN = "packmime run acceptance --spec lantern --out runs/lantern"
PACKMIME = (sys.executable, "-P", "-c", "from sequencer.cli import main; main()")
SIZE = (1180, 1500)


def readme() -> str:
    if not README.is_file():
        pytest.skip("the README is not beside the packages: they are installed from a wheel")
    return README.read_text("utf-8")


def tour() -> Iterator[tuple[str, str]]:
    """Files to write (name, text) and commands to give (command, "") in the tour, in its order."""
    text = readme().partition("## A tour of ten minutes")[2].partition("\n## ")[0]
    for language, block in re.findall(r"```(\w+)\n(.*?)```", text, re.DOTALL):
        if language == "yaml":
            name = re.search(r"^# (\S+\.yaml)", block, re.MULTILINE)
            assert name is not None, block
            yield name[1], block
        if language == "console":
            yield from ((line.removeprefix("$ "), "") for line in block.splitlines() if line.startswith("$ packmime"))


def status_of(command: str) -> int:
    """What a comment behind the command says of its exit status; 0 where it says nothing."""
    said = re.search(r"# exit (\d+)", command)
    return int(said[1]) if said else 0


def give(command: str, folder: Path) -> subprocess.CompletedProcess[str]:
    import shlex

    words = shlex.split(command, comments=True)
    assert words[0] == "packmime"
    return subprocess.run([*PACKMIME, *words[1:]], cwd=folder, capture_output=True, text=True, check=False)


def test_the_tour_can_be_walked_as_it_stands(tmp_path: Path) -> None:
    commands = 0
    for what, text in tour():
        if text:
            (tmp_path / what).write_text(text, "utf-8")
            continue
        done = give(what, tmp_path)
        assert done.returncode == status_of(what), f"{what}\n{done.stdout}{done.stderr}"
        commands += 1
    assert commands >= 6


def test_the_picture_is_of_the_report_that_it_names(tmp_path: Path) -> None:
    chromium = shutil.which("chromium")
    assert f"$ {SHOWN}" in readme()
    done = give(SHOWN, tmp_path)
    assert done.returncode == 0, done.stdout + done.stderr
    shown = digest(tmp_path / "runs" / "lantern")
    if "PACKMIME_GOLDEN" in os.environ and chromium:
        photograph(chromium, tmp_path / "runs" / "lantern" / "report.html", tmp_path, shown)
    with Image.open(PICTURE) as picture:
        assert picture.size == SIZE
        assert picture.text["verdicts"] == shown  # type: ignore[attr-defined]


def digest(record: Path) -> str:
    """Of what the page shows: limits, values to four digits, verdicts."""
    found = json.loads((record / "verdicts.json").read_text("utf-8"))
    rows = [(one["limit"], one["verdict"], _short(one["value"])) for one in found["verdicts"]]
    return hashlib.sha256(json.dumps([found["overall"], *rows]).encode()).hexdigest()


def _short(value: object) -> object:
    return f"{value:.4g}" if isinstance(value, float) else value


def photograph(chromium: str, page: Path, folder: Path, shown: str) -> None:
    raw = folder / "raw.png"
    options = ["--headless", "--no-sandbox", "--disable-gpu", "--hide-scrollbars", f"--user-data-dir={folder / 'chr'}"]
    size = f"--window-size={SIZE[0]},{SIZE[1]}"
    subprocess.run([chromium, *options, size, f"--screenshot={raw}", page.as_uri()], capture_output=True, check=True)
    told = PngImagePlugin.PngInfo()
    told.add_text("verdicts", shown)
    PICTURE.parent.mkdir(exist_ok=True)
    with Image.open(raw) as picture:
        few = picture.convert("RGB").quantize(64)
        few.crop((0, 0, *SIZE)).save(PICTURE, optimize=True, pnginfo=told)
