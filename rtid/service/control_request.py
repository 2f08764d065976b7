"""What is said on the control socket: one JSON object per line in, one per line out, both ways strict.

A request is flat: `{"do": "hold", "loop": "belt", "for_s": 1800, "by": "Kim", "reason": "belt change"}`. The answer is
`{"ok": true, "answer": {...}}` or `{"ok": false, "error": "one line", "exit_code": 64}`.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from rtid.errors import RtidError, UsageError
from rtid.intake import decode_json
from rtid.intake.decode_values import excerpt
from rtid.intake.reading import Rejected
from rtid.publish.messages import dump
from rtid.valid_names import one_of

MOST_BYTES = 65536  # of one request
MOST_CHARACTERS = 1000  # of one text in it

_PERSON = frozenset({"loop", "by", "reason"})
_ALARM = _PERSON | {"alarm", "signal"}

FIELDS: dict[str, frozenset[str]] = {  # by what is to be done, beside `do` and `node`
    "status": frozenset({"loop"}),
    "baselines": frozenset({"loop"}),
    "snapshot": _PERSON,
    "hold": _PERSON | {"for_s"},
    "resume": _PERSON,
    "ack": _ALARM,
    "shelve": _ALARM | {"for_s"},
    "unshelve": _ALARM,
    "rebaseline": _PERSON | {"because"},
    "restore": _PERSON | {"baseline"},
    "note": _PERSON | {"text"},
}
NEEDED: dict[str, frozenset[str]] = {  # beside the loop, which all of them need
    "hold": frozenset({"for_s"}),
    "ack": frozenset({"alarm"}),
    "shelve": frozenset({"alarm", "for_s"}),
    "unshelve": frozenset({"alarm"}),
    "rebaseline": frozenset({"because", "by", "reason"}),
    "restore": frozenset({"baseline", "by", "reason"}),
    "note": frozenset({"text", "by"}),
}

Request = dict[str, Any]


def parse(line: bytes) -> Request:
    """The fields that were given; a field that is null was not. Raises UsageError."""
    try:
        document = decode_json.load(line)
    except (Rejected, ValueError) as problem:
        raise UsageError(f"bad request: {problem}") from None
    if not isinstance(document, dict):
        raise UsageError('bad request: expected one JSON object per line, such as {"do": "status"}')
    given = {name: value for name, value in document.items() if value is not None}
    for name, value in given.items():
        _check_value(name, value)
    _check_names(given)
    return given


def answer_line(answer: Mapping[str, Any]) -> bytes:
    return dump({"ok": True, "answer": answer}) + b"\n"


def refusal_line(error: RtidError) -> bytes:
    text = " ".join(str(error).split())
    return dump({"ok": False, "error": text, "exit_code": error.exit_code}) + b"\n"


def _check_names(given: Request) -> None:
    do = given.get("do")
    if do not in FIELDS:
        raise UsageError(f"bad request: 'do' is {excerpt(do)}; expected {one_of(str(do), FIELDS)}")
    for name in given.keys() - FIELDS[do] - {"do", "node"}:
        raise UsageError(f"bad request: {do} has no {excerpt(name)}; expected {one_of(name, sorted(FIELDS[do]))}")
    needed = NEEDED.get(do, frozenset()) | (frozenset() if do == "status" else {"loop"})
    missing = sorted(needed - given.keys())
    if missing:
        raise UsageError(f"bad request: {do} needs {', '.join(missing)}")


def _check_value(name: str, value: Any) -> None:
    if name == "for_s":
        if not isinstance(value, float) or not math.isfinite(value):
            raise UsageError("bad request: for_s is no number of seconds")
        return
    if not isinstance(value, str) or not value.isprintable() or not 0 < len(value) <= MOST_CHARACTERS:
        raise UsageError(
            f"bad request: {excerpt(name)} is no text of one line with 1 to {MOST_CHARACTERS} printable characters"
        )
