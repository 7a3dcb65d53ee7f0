"""JSON as records hold it."""

import json
import math
from pathlib import PurePosixPath

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sequencer.engine.channels import SampleFlag
from sequencer.engine.documents import to_json, to_plain, write_json
from sequencer.engine.durable import RecordError

_texts = st.text()  # without half surrogates, which are text in Python and nowhere else
_values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False, allow_infinity=False) | _texts,
    lambda inner: st.lists(inner) | st.dictionaries(_texts, inner),
    max_leaves=12,
)


@given(_values)
def test_what_is_written_is_what_is_read(value):
    assert json.loads(to_json(value)) == value
    assert to_json(value, indent=None).count(b"\n") == 1


def test_keys_stay_in_the_order_given_and_text_stays_readable():
    assert to_json({"b": "Größe Ω <b>", "a": 1}, indent=None).decode() == '{"b": "Größe Ω <b>", "a": 1}\n'


def test_numbers_without_a_value_become_null():
    # RFC 8259 section 6: Infinity and NaN are not permitted.
    assert to_plain([math.nan, math.inf, -math.inf, 0.0]) == [None, None, None, 0.0]


def test_numbers_of_numpy_flags_and_paths_get_plain_forms():
    value = {"f": np.float64(1.5), "i": np.int64(3), "b": np.bool_(True), "a": np.array([1.0, np.nan])}
    assert to_plain(value) == {"f": 1.5, "i": 3, "b": True, "a": [1.0, None]}
    assert to_json([SampleFlag.STALE, PurePosixPath("a/b")], indent=None) == b'[1, "a/b"]\n'


def test_half_a_surrogate_pair_does_not_stop_the_writing():
    assert to_json("a\udc80b", indent=None) == b'"a?b"\n'


def test_a_value_without_a_form_is_refused_by_its_type():
    with pytest.raises(TypeError, match="a object cannot stand in a JSON document"):
        to_plain({"x": [object()]})


def test_a_document_is_written_once(tmp_path):
    write_json(tmp_path / "a.json", {"x": 1})
    with pytest.raises(RecordError, match="exists already"):
        write_json(tmp_path / "a.json", {"x": 2})
    assert json.loads((tmp_path / "a.json").read_bytes()) == {"x": 1}
