"""The words of a report: verdicts, stages, rules, cautions; and outside text made fit for a page or a terminal."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from typing import NamedTuple

from drivers.text.si import clock_time, interval, pm, si


class Word(NamedTuple):
    """One verdict word and the class of style that draws it."""

    text: str
    style: str


# Worst first: the four words of ILAC-G8:09/2019, 4.2.3, in its order; what could not be judged lies between them.
VERDICTS: Mapping[str, Word] = {
    word: Word(word, word.replace(" ", "-"))
    for word in ("fail", "conditional fail", "inconclusive", "not run", "conditional pass", "pass", "not applicable")
}

STAGES: Mapping[str, str] = {
    "precharge": "precharge",
    "cc": "constant current",
    "cv": "constant voltage",
    "constant-power": "constant power",
    "taper": "taper",
    "pulse": "pulses",
    "rest": "rest",
    "float": "float",
    "top-up": "top-up",
}

RULES: Mapping[str, str] = {
    "guarded": (
        "guarded: with a guard band w next to each limit (w = U, the expanded uncertainty, unless a row says otherwise)"
        " a value inside the limits by at least w is a pass, inside by less a conditional pass,"
        " outside by up to w a conditional fail, outside by more a fail"
        " (non-binary statement with guard band, ILAC-G8:09/2019, 4.2.3; terms of JCGM 106:2012)."
        " With w = U a pass is wrong in less than 2.5 % of cases."
    ),
    "simple": (
        "simple: a value inside the limits or on them is a pass, any other a fail, whatever its uncertainty"
        " (simple acceptance, ILAC-G8:09/2019, 4.2.1; JCGM 106:2012)."
        " Close to a limit up to 50 % of such verdicts are wrong; p is the probability that the charger conforms."
    ),
}

CAUTIONS = (
    "Safe means de-energised, not isolated: unplug before touching.",
    "The results concern only the sample that was tested, as it was, when it was tested.",
)

NOT_COVERED = (
    "touch current",
    "dielectric strength",
    "earth bond",
    "EMC",
    "digital data contacts",
    "the absence of balancing (a screening may look for it)",
)

BY_RULE = "set by rule, not calibrated"

NOTHING = "–"

# What XML 1.0 (clause 2.2) and HTML forbid in text, and lone surrogates, which no encoding of a page can hold.
_UNPRINTABLE = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\ud800-\udfff\ufffe\uffff]")


def clean(text: object) -> str:
    """Any value of a record as text that a page can hold: None is a dash, control characters are U+FFFD."""
    if text is None:
        return NOTHING
    if isinstance(text, bool):
        return "yes" if text else "no"
    return _UNPRINTABLE.sub("\ufffd", str(text))


def stage_words(kind: object) -> str:
    """A stage's kind in words."""
    return STAGES.get(str(kind), clean(kind))


def sentence(text: object) -> str:
    """The same on one line, for a terminal and for JUnit."""
    return " ".join(clean(text).split())


def verdict_word(word: object) -> Word:
    """Style and text of one of the seven verdict words; ValueError for anything else."""
    if word not in VERDICTS:
        raise ValueError(f"{word!r} is no verdict; the seven are {', '.join(VERDICTS)}")
    return VERDICTS[str(word)]


def tally(words: Sequence[str]) -> str:
    """How many of each verdict, worst first: "1 fail, 8 pass"."""
    counted = [f"{words.count(word)} {word}" for word in VERDICTS if word in words]
    return ", ".join(counted) or "nothing was judged"


def measured(value: object, uncertainty: float | None, unit: str) -> str:
    """A value with its expanded uncertainty, each in SI prefixes; a class or state as it is."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return clean(value)
    if uncertainty is None or uncertainty <= 0:
        return si(value, unit)
    return pm(value, uncertainty, unit)


def bracket(low: float, high: float, uncertainty: float | None, unit: str) -> str:
    """The interval in which a finding lies, and the expanded uncertainty of its ends: "3.98 kΩ to 4.02 kΩ, U 4.2 Ω"."""
    from sequencer.analysis.wording import quantity, resolution_of

    width = max(high - low, uncertainty or 0.0)
    # A hair more, for a difference may fall short of a round step: 4.25 - 4.24 is 0.0099999...
    step = resolution_of(width * (1.0 + 1e-9)) if 0.0 < width < 1e300 else 0.0
    ends = f"{quantity(low, unit, step=step)} to {quantity(high, unit, step=step)}"
    return f"{ends}, U {si(uncertainty, unit, 2)}" if uncertainty else ends


def celsius(low: float, high: float) -> str:
    """A span of temperatures as people read it."""
    decimals = 1 if high - low >= 1 else 2
    return f"{low:.{decimals}f} °C to {high:.{decimals}f} °C"


def limits(low: float | None, high: float | None, expected: object, unit: str, declared: object = None) -> str:
    """What was demanded, in words; beside it how the specification writes it, where that is another quantity."""
    if low is None and high is None:
        return NOTHING if expected is None else clean(expected)
    if declared is not None:
        return f"{clean(declared)}, that is {interval(low, high, unit, 4)}"
    return interval(low, high, unit)


def probability(p: float | None) -> str:
    """A probability in percent, never rounded to a certainty."""
    if p is None:
        return NOTHING
    if p > 0.999:
        return "> 99.9 %"
    return "< 0.1 %" if p < 0.001 else f"{100 * p:.1f} %"


def since_start(time_s: float) -> str:
    """A moment on the clock of the run: "4:05.2" or "1:04:05"."""
    tenths = round(time_s * 10)
    if tenths < 36_000:
        return f"{tenths // 600}:{tenths % 600 // 10:02d}.{tenths % 10}"
    whole = round(time_s)
    return f"{whole // 3600}:{whole % 3600 // 60:02d}:{whole % 60:02d}"


def utc(stamp: object) -> str:
    """An ISO 8601 time of UTC as people read it, to the second; anything else as it is."""
    found = re.fullmatch(r"(\d{4}-\d\d-\d\d)T(\d\d:\d\d:\d\d)(?:\.\d+)?(?:Z|\+00:00)?", str(stamp))
    return f"{found[1]} {found[2]} UTC" if found else clean(stamp)


__all__ = [
    "BY_RULE",
    "CAUTIONS",
    "NOTHING",
    "NOT_COVERED",
    "RULES",
    "STAGES",
    "VERDICTS",
    "Word",
    "bracket",
    "celsius",
    "clean",
    "clock_time",
    "limits",
]
__all__ += ["measured", "probability", "sentence", "si", "since_start", "stage_words", "tally", "utc", "verdict_word"]
