"""Files into models: all faults at once, each with place, cause and the nearest valid word."""

import pytest

from drivers.bench import Bench
from drivers.text.binding import bind
from drivers.text.document import compose
from drivers.text.faults import Faults
from sequencer.engine.inputs import FOLDERS
from sequencer.model.pack import Pack

GOOD = (FOLDERS["bench"] / "virtual-mains.yaml").read_text("utf-8")


def _faults(text: str, model: type = Bench, kind: str = "bench") -> list[str]:
    faults = Faults()
    bind(model, compose(text.encode(), "b.yaml"), kind, faults)
    return [str(fault) for fault in faults.found]


def test_a_sound_file_has_none() -> None:
    assert _faults(GOOD) == []


def test_all_faults_at_once() -> None:
    text = (
        GOOD.replace("ballast: 100", "balast: 100")
        .replace("node: 26 V", "node: 26 A")
        .replace("name: virtual, mains the only contact\n", "")
    )
    said = "\n".join(_faults(text))
    assert "unknown key 'balast'; did you mean 'ballast'?" in said
    assert "'ballast' is missing" in said
    assert '"26 A" is a current; expected a voltage such as "4.2 V"' in said
    assert "'name' is missing" in said
    assert all(line.startswith("b.yaml:") for line in said.splitlines())


def test_line_and_column_of_the_value() -> None:
    lines = GOOD.replace("node: 26 V", "node: 26 A").splitlines()
    line = next(number for number, text in enumerate(lines, 1) if "26 A" in text)
    column = lines[line - 1].index("node:") + 1
    assert f"b.yaml:{line}:{column}: node:" in _faults("\n".join(lines))[0]


def test_kind_and_version() -> None:
    assert "must open with 'packmime: bench 1'" in _faults("name: x\n")[0]
    assert "is a pack file; a bench file was expected" in _faults("packmime: pack 1\n")[0]
    assert "is bench version 2; this packmime reads up to 1" in _faults("packmime: bench 2\n")[0]
    assert "version 0 never existed" in _faults("packmime: bench 0\n")[0]
    assert "a mapping was expected" in _faults("- 1\n")[0]


def test_flags_read_true_and_false_only() -> None:
    from sequencer.model.specification import Specification

    spec = (FOLDERS["specification"] / "sprayer.yaml").read_text("utf-8")
    assert _faults(spec, Specification, "specification") == []
    said = _faults(spec.replace("ends: true", "ends: yes"), Specification, "specification")
    assert 'ends: "yes": expected true or false' in said[0]


def test_limits() -> None:
    from sequencer.model.specification import Specification

    spec = (FOLDERS["specification"] / "sprayer.yaml").read_text("utf-8")
    for wrong, words in (
        ("[4.22 V, 4.18 V]", 'low limit "4.22 V" lies above high limit "4.18 V"'),
        ("{above: 4.3 V, below: 4.2 V}", "nothing can meet it"),
        ("{bellow: 4.2 V}", "did you mean 'below'"),
        ("{rule: simple}", "needs 'within', 'below' or 'above'"),
        ("{within: 4.2 V ± 5 mV, below: 5 V}", "stands for both sides"),
        ("{below: 4.2 V, rule: lenient}", "expected 'simple' or 'guarded'"),
        ("4.2 V", "has no tolerance"),
    ):
        said = _faults(spec.replace("4.20 V ± 25 mV", wrong), Specification, "specification")
        assert words in said[0], wrong


def test_an_ocv_table_that_falls_is_refused() -> None:
    pack = (FOLDERS["pack"] / "sprayer.yaml").read_text("utf-8")
    assert "must rise" in _faults(pack.replace("[40 %, 3.67 V]", "[40 %, 3.50 V]"), Pack, "pack")[0]
    assert "from 0 % to 100 %" in _faults(pack.replace("[100 %, 4.20 V]", "[99 %, 4.20 V]"), Pack, "pack")[0]


@pytest.mark.parametrize(
    ("entry", "told"),
    [
        ("{node: 26 V, current: 3,0 A, charge: 5 Ah}", 'current: a comma parts the entries of a mapping, so "3,0 A"'),
        ("{node: 26,5 V, current: 3 A, charge: 5 Ah}", "write 26.5 V"),
    ],
)
def test_a_decimal_comma_is_named(entry: str, told: str) -> None:
    text = (FOLDERS["bench"] / "virtual.yaml").read_text("utf-8")
    assert any(told in fault for fault in _faults(text.replace("{node: 26 V, current: 12 A, charge: 5 Ah}", entry)))


def test_a_key_that_is_only_misspelt_is_no_decimal_comma() -> None:
    text = (FOLDERS["bench"] / "virtual.yaml").read_text("utf-8")
    told = _faults(text.replace("charge: 5 Ah}", "charge: 5 Ah, 2nd: 3 A}"))
    assert len(told) == 1
    assert "comma" not in told[0]
