"""YAML as text with its place."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.text.document import Scalar, compose, find, plain, read, scalars, substitute
from drivers.text.faults import BadInput, Place


def _fault(text: str) -> str:
    with pytest.raises(BadInput) as caught:
        compose(text.encode(), "f.yaml")
    return str(caught.value)


def test_scalars_stay_what_was_written() -> None:
    # YAML 1.2 readers turn 010 into 10 and dates into dates; ours must not (YAML 1.2.2, 10.3.2 core schema).
    root = compose(b"a: 010\nb: 2026-01-01\nc: no\nd: 1e3\ne: '4.2 V'\nf:\ng: ~\n", "f.yaml").root
    assert plain(root) == {"a": "010", "b": "2026-01-01", "c": "no", "d": "1e3", "e": "4.2 V", "f": None, "g": None}


def test_places_count_from_one() -> None:
    root = compose(b"a: 1\nb:\n  - x\n  - {c: 2}\n", "f.yaml").root
    assert find(root, ("b", 1, "c"))[1] == Place("f.yaml", 4, 6)
    assert find(root, ("b", 9))[1] == Place("f.yaml", 2, 1)  # as far as the file goes


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("a: [1\n", "f.yaml:2:1: is not YAML"),
        ("a: 1\na: 2\n", "f.yaml:2:1"),
        ("", "is empty"),
        ("a: &x 1\nb: *x\n", "anchor '&x'"),
        ("? [1]\n: 2\n", "a key must be a word"),
    ],
)
def test_says_where_it_is_wrong(text: str, said: str) -> None:
    assert said in _fault(text)


def test_bad_files(tmp_path: Path) -> None:
    for path, said in ((tmp_path / "none.yaml", "cannot be read"), (tmp_path, "is a folder")):
        with pytest.raises(BadInput, match=said):
            read(path)
    latin = tmp_path / "latin.yaml"
    latin.write_bytes(b"a: 1\nb: 25 \xb0C\n")
    with pytest.raises(BadInput, match=r"latin\.yaml:2:1: is not UTF-8"):
        read(latin)
    big = tmp_path / "big.yaml"
    big.write_bytes(b"#" * 2_000_001)
    with pytest.raises(BadInput, match="at most"):
        read(big)


def test_byte_order_mark_is_no_key() -> None:
    assert plain(compose("\ufeffa: 1\n".encode(), "f.yaml").root) == {"a": "1"}


def test_parameters_take_the_place_of_their_names() -> None:
    root = compose(b"a: $x\nb: [$x, $y]\n", "f.yaml").root
    filled = substitute(root, {"x": Scalar(Place("set"), "4 V")})
    assert plain(filled) == {"a": "4 V", "b": ["4 V", "$y"]}
    assert [scalar.place.line for scalar in scalars(filled)] == [1, 2, 2]


@given(st.binary(max_size=200))
def test_any_bytes_are_a_document_or_a_fault(content: bytes) -> None:
    try:
        plain(compose(content, "f.yaml").root)
    except BadInput as bad:
        assert all(fault.place.file == "f.yaml" for fault in bad.faults)
