"""The nodes themselves."""

from reports.items import properties


def test_properties_are_flat_texts_of_what_is_known() -> None:
    verdict = {"limit": "charges", "value": True, "u": None, "low": 0.1, "evidence": [1.5, 2.0], "why": "a\x00b"}
    assert properties(verdict) == [
        ("limit", "charges"), ("value", "yes"), ("low", "0.1"), ("evidence", "1.5 2.0"), ("why", "a\ufffdb"),
    ]  # fmt: skip
