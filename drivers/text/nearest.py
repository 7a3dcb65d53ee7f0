"""The nearest valid word for one that is not."""

from __future__ import annotations

from collections.abc import Iterable
from difflib import get_close_matches


def nearest(word: str, valid: Iterable[str]) -> str | None:
    """The valid word closest to `word`, or None where none is near."""
    matches = get_close_matches(word, list(valid), n=1, cutoff=0.5)
    return matches[0] if matches else None


def unknown(word: str, valid: Iterable[str], what: str = "key") -> str:
    """The sentence for a word that is none of the valid ones."""
    names = sorted(valid)
    near = nearest(word, names)
    if near is not None:
        return f"unknown {what} '{word}'; did you mean '{near}'?"
    return f"unknown {what} '{word}'; valid here: {', '.join(names) if names else 'none'}"
