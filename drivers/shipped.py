"""Finding a file by its path, or by the bare name of one that ships."""

from __future__ import annotations

from pathlib import Path

from drivers.text.faults import Faults, Place
from drivers.text.nearest import unknown


def is_bare(text: str) -> bool:
    """Whether `text` names something shipped rather than a path."""
    return not ("/" in text or "\\" in text or text.endswith((".yaml", ".yml")))


def _is_file(path: Path) -> bool:
    """Whether there is such a file; a name that no file can have (too long, no access) names none."""
    try:
        return path.is_file()
    except OSError:
        return False


def locate(
    text: str, folder: Path, what: str, place: Place, faults: Faults, *, beside: Path | None = None
) -> Path | None:
    """The file that `text` means: a path (relative ones also seen from `beside`), or a name that ships in `folder`.

    Adds a fault at `place` and returns None where there is no such file.
    """
    if is_bare(text):
        path = folder / f"{text}.yaml"
        if _is_file(path):
            return path
        faults.add(place, unknown(text, (found.stem for found in folder.glob("*.yaml")), what))
        return None
    candidates = [Path(text)] if beside is None else [beside / text, Path(text)]
    found_path = next((path for path in candidates if _is_file(path)), None)
    if found_path is None:
        faults.add(place, f"there is no {what} file '{text}'")
    return found_path
