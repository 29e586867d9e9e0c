"""Canonical bytes against RFC 8785 and against the library.

RFC 8785: Rundgren A, Jordan B, Erdtman S. JSON Canonicalization Scheme (JCS). 2020. The vectors below are
its sections 3.2.2 (whole object), 3.2.3 (sorting) and Appendix B (numbers), from memory; the numbers are
also what IEEE 754 and ECMAScript's Number::toString give by definition.
"""

from __future__ import annotations

import json
import math
import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from treering.errors import CanonicalError
from treering.store.canonical import canonical_bytes, canonical_string, library_bytes, parse, parse_canonical
from treering.terms import EntryKind

LARGEST = 2**53 - 1
SCALARS = (
    st.none()
    | st.booleans()
    | st.integers(-LARGEST, LARGEST)
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.sampled_from([1.0, 0.1, -0.0, 1e16, 1e-7, 12.5, 123456789012345678.0, 1e21])
    | st.text(st.characters(exclude_categories=["Cs"]))
    | st.sampled_from(["1.0", "1e+22", "\U0001f600", "\ufb33", "\u20ac", "\x7f\x1f", '"\\/'])
)
KEYS = st.text(st.characters(exclude_categories=["Cs"]), max_size=3) | st.sampled_from(
    ["", "a", "\ue000", "\U00010000", "1"]
)
VALUES = st.recursive(
    SCALARS,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(KEYS, inner, max_size=4),
    max_leaves=12,
)


@given(VALUES)
def test_both_roads_write_the_same_bytes(value):
    assert canonical_bytes(value) == library_bytes(value)


@given(VALUES)
def test_reading_back_and_writing_again_changes_nothing(value):
    data = canonical_bytes(value)
    assert parse(data) == value
    assert canonical_bytes(parse(data)) == data
    assert parse_canonical(data) == value


@given(st.text(st.characters(exclude_categories=["Cs"])))
def test_strings_are_written_as_the_library_writes_them(text):
    assert canonical_string(text) == library_bytes(text)


@given(st.dictionaries(KEYS, st.integers(0, 9), min_size=2, max_size=6))
def test_keys_are_sorted_by_utf16_unit(value):
    names = list(json.loads(canonical_bytes(value)))
    assert names == sorted(value, key=lambda name: name.encode("utf-16be"))


def test_rfc_section_3_2_2_object():
    text = (
        '{"numbers":[333333333.33333329,1E30,4.50,2e-3,0.000000000000000000000000001],'
        '"string":"\\u20ac$\\u000F\\u000aA\'\\u0042\\u0022\\u005c\\\\\\"\\/","literals":[null,true,false]}'
    )
    expected = (
        '{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],'
        '"string":"\u20ac$\\u000f\\nA\'B\\"\\\\\\\\\\"/"}'
    )
    assert canonical_bytes(json.loads(text)) == expected.encode()


def test_rfc_section_3_2_3_order_of_keys():
    keys = ["\u20ac", "\r", "\ufb33", "1", "\U0001f600", "\x80", "\u00f6"]
    order = ["\r", "1", "\x80", "\u00f6", "\u20ac", "\U0001f600", "\ufb33"]
    assert list(json.loads(canonical_bytes(dict.fromkeys(keys)))) == order


@pytest.mark.parametrize(
    ("bits", "text"),
    [
        ("0000000000000000", "0"),
        ("8000000000000000", "0"),
        ("0000000000000001", "5e-324"),
        ("8000000000000001", "-5e-324"),
        ("7fefffffffffffff", "1.7976931348623157e+308"),
        ("ffefffffffffffff", "-1.7976931348623157e+308"),
        ("4340000000000000", "9007199254740992"),
        ("c340000000000000", "-9007199254740992"),
        ("4430000000000000", "295147905179352830000"),
        ("44b52d02c7e14af5", "9.999999999999997e+22"),
        ("44b52d02c7e14af6", "1e+23"),
        ("44b52d02c7e14af7", "1.0000000000000001e+23"),
        ("444b1ae4d6e2ef4e", "999999999999999700000"),
        ("444b1ae4d6e2ef4f", "999999999999999900000"),
        ("444b1ae4d6e2ef50", "1e+21"),
        ("3eb0c6f7a0b5ed8c", "9.999999999999997e-7"),
        ("3eb0c6f7a0b5ed8d", "0.000001"),
        ("41b3de4355555553", "333333333.3333332"),
        ("41b3de4355555554", "333333333.33333325"),
        ("41b3de4355555555", "333333333.3333333"),
        ("41b3de4355555556", "333333333.3333334"),
        ("41b3de4355555557", "333333333.33333343"),
        ("becbf647612f3696", "-0.0000033333333333333333"),
        ("43143ff3c1cb0959", "1424953923781206.2"),
    ],
)
def test_rfc_appendix_b_numbers(bits, text):
    (number,) = struct.unpack(">d", bytes.fromhex(bits))
    assert canonical_bytes(number) == text.encode()
    assert float(text) == number


@pytest.mark.parametrize(
    ("value", "place", "found"),
    [
        ({"a": [1, {"b": math.nan}]}, r"a\[1\]\.b", "nan"),
        ({"a": -math.inf}, "a", "-inf"),
        ({"a": LARGEST + 1}, "a", "9007199254740992"),
        ({"a": {2: 1}}, r"a\.2", "2"),
        ({"a": "\udc00"}, "a", "udc00"),
        ({"\ud800": 1}, "ud800", "ud800"),
        ({"a": b"bytes"}, "a", "bytes"),
        ({"a": {1, 2}}, "a", "{1, 2}"),
    ],
    ids=str,
)
def test_what_has_no_canonical_form_is_named(value, place, found):
    with pytest.raises(CanonicalError, match=rf"entry study/T1: field .*{place}.*Found: .*{found}"):
        canonical_bytes(value, key="study/T1")


def test_largest_integers_are_kept():
    assert canonical_bytes([LARGEST, -LARGEST]) == b"[9007199254740991,-9007199254740991]"


def test_words_of_the_vocabulary_and_tuples_are_plain_json():
    assert canonical_bytes({"kind": EntryKind.STUDY, "pair": (1, 2)}) == b'{"kind":"study","pair":[1,2]}'


@pytest.mark.parametrize("data", [b'{"b":1,"a":2}', b'{"a": 1}', b"1.0", b"{", b"\xff", b'"\\u0041"', b"NaN"])
def test_other_bytes_are_not_canonical(data):
    with pytest.raises(CanonicalError, match="not in canonical form"):
        parse_canonical(data)
