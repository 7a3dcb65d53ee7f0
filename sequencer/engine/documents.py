"""JSON as records hold it: UTF-8, keys in the order given, and null where a number has no value."""

import json
import math
from collections.abc import Mapping
from pathlib import Path, PurePath
from typing import Any

from sequencer.engine.durable import write_new


def to_plain(value: Any) -> Any:
    """`value` in JSON's own types: NaN and infinities become null, arrays lists, paths text with slashes.

    Raises TypeError for what has no such form; a str of its memory address would be no record.
    """
    if value is None or isinstance(value, bool | str):
        return value
    if isinstance(value, int):
        return int(value)
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): to_plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [to_plain(item) for item in value]
    if isinstance(value, PurePath):
        return value.as_posix()
    if hasattr(value, "tolist"):  # arrays and scalars of numpy, without importing it here
        return to_plain(value.tolist())
    raise TypeError(f"a {type(value).__name__} cannot stand in a JSON document: {value!r}")


def to_json(value: Any, *, indent: int | None = 2) -> bytes:
    """One JSON document as UTF-8 bytes with a newline at its end; `indent=None` puts it on one line.

    Half a surrogate pair, which a hostile file name can carry, has no UTF-8 form and becomes "?".
    """
    text = json.dumps(to_plain(value), ensure_ascii=False, indent=indent, allow_nan=False)
    return text.encode("utf-8", errors="replace") + b"\n"


def write_json(path: Path, value: Any) -> None:
    """Write a new JSON document, whole or not at all.

    Raises RecordError if the file exists, TypeError for a value without a JSON form, OSError if the disk refuses.
    """
    write_new(path, to_json(value))
