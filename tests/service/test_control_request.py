"""What is no request is refused in one line; what is one comes through as it was."""

from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtid.errors import Unavailable, UsageError
from rtid.service.control_request import FIELDS, MOST_CHARACTERS, NEEDED, answer_line, parse, refusal_line

HOLD = {"do": "hold", "loop": "belt", "for_s": 60}


def line(request: object) -> bytes:
    return json.dumps(request).encode()


def test_a_request_comes_through_and_null_is_absent() -> None:
    assert parse(line(HOLD | {"by": None, "reason": "Riemen geprüft"})) == HOLD | {"reason": "Riemen geprüft"}


@pytest.mark.parametrize("do", FIELDS)
def test_a_request_with_all_its_fields_is_taken(do: str) -> None:
    full = {"do": do} | {name: 1.0 if name == "for_s" else "x" for name in FIELDS[do]}
    assert parse(line(full)) == full


@pytest.mark.parametrize(("do", "name"), [(do, name) for do, names in NEEDED.items() for name in sorted(names)])
def test_what_a_request_needs_is_named(do: str, name: str) -> None:
    full = {"do": do} | {field: 1.0 if field == "for_s" else "x" for field in FIELDS[do] if field != name}
    with pytest.raises(UsageError, match=f"{do} needs {name}$"):
        parse(line(full))


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"\xff\xfe", "not UTF-8"),
        (b"{", "not JSON"),
        (b"[]", "expected one JSON object"),
        (b"3", "expected one JSON object"),
        (b'{"do":"hold","do":"resume"}', "appears twice"),
        (b"[" * 60000, "nested too deeply"),
        (b'{"do":{"do":"hold"}}', "'do' is no text"),
        (b"{}", "'do' is None; expected one of status"),
        (line({"do": "hodl", "loop": "belt"}), "(nearest valid name 'hold')"),
        (line({"do": "hold", "for_s": 3}), "hold needs loop"),
        (line(HOLD | {"fro_s": "x"}), "(nearest valid name 'for_s')"),
        (line(HOLD | {"alarm": "plant_drift"}), "hold has no 'alarm'"),
        (line(HOLD | {"for_s": "3"}), "for_s is no number"),
        (line(HOLD | {"for_s": True}), "for_s is no number"),
        (b'{"do":"hold","loop":"belt","for_s":NaN}', "for_s is no number"),
        (b'{"do":"hold","loop":"belt","for_s":1e999}', "for_s is no number"),
        (line(HOLD | {"by": 7}), "'by' is no text"),
        (line(HOLD | {"by": ""}), "'by' is no text"),
        (line(HOLD | {"by": "a\nb"}), "'by' is no text"),
        (line(HOLD | {"by": "\ud800"}), "'by' is no text"),
        (line(HOLD | {"reason": "x" * (MOST_CHARACTERS + 1)}), "'reason' is no text"),
        (line(HOLD | {"\n\ud800": "x"}), r"hold has no '\n\ud800'"),
    ],
)
def test_a_bad_request_is_refused_with_its_reason(data: bytes, words: str) -> None:
    with pytest.raises(UsageError) as refused:
        parse(data)
    assert words in str(refused.value)
    assert json.loads(refusal_line(refused.value))["exit_code"] == 64


@given(data=st.binary(max_size=200) | st.recursive(st.none() | st.text() | st.floats(), st.lists).map(line))
def test_whatever_comes_is_parsed_or_refused_in_one_line(data: bytes) -> None:
    said = answer_line({})
    try:
        parse(data)
    except UsageError as error:
        said = refusal_line(error)
    assert said.count(b"\n") == 1


def test_answers_are_one_line_each() -> None:
    assert answer_line({"text": "a\nb"}) == b'{"ok":true,"answer":{"text":"a\\nb"}}\n'
    refusal = b'{"ok":false,"error":"not now","exit_code":69}\n'
    assert refusal_line(Unavailable("not\nnow")) == refusal
