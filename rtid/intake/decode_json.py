"""JSON (RFC 8259), read strictly: no repeated keys, no depth that exhausts the stack, no huge integers.

`NaN`, `Infinity` and numbers beyond the range of a double are read as not finite, so that they cost their own signal
and not the whole message.
"""

from __future__ import annotations

import json
from typing import Any

from rtid.intake.decode_values import Message, Scalar, excerpt
from rtid.intake.reading import Rejected
from rtid.settings import Place


class JsonMessage(Message):
    """Values found by a path of keys and list indices, joined by dots: `sensors.supply`, `a.0.b`."""

    def __init__(self, document: Any) -> None:
        self._document = document

    def value(self, place: Place) -> Scalar:
        node = self._document
        for step in (place.path or "").split("."):
            node = _child(node, step)
            if node is None:
                raise Rejected("missing", f"the message has no {excerpt(place.path)}")
        if not isinstance(node, (float, bool, str)):
            raise Rejected("number", f"{excerpt(place.path)} is a list or an object, not a value")
        return node


def parse(payload: bytes) -> JsonMessage:
    return JsonMessage(load(payload))


def load(payload: bytes) -> Any:
    """The document, every number a float. Raises Rejected('json')."""
    try:
        return json.loads(payload.decode("utf-8"), object_pairs_hook=_unique, parse_int=float)
    except RecursionError:
        raise Rejected("json", "the message is nested too deeply") from None
    except UnicodeDecodeError:
        raise Rejected("json", "the message is not UTF-8 text") from None
    except json.JSONDecodeError as error:
        raise Rejected("json", f"the message is not JSON: {error.msg} at character {error.pos}") from None


def _unique(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    unique = dict(pairs)
    if len(unique) != len(pairs):
        keys = [key for key, _ in pairs]
        repeated = next(key for key in unique if keys.count(key) > 1)
        raise Rejected("json", f"the key {excerpt(repeated)} appears twice")
    return unique


def _child(node: Any, step: str) -> Any:
    if isinstance(node, dict):
        return node.get(step)
    if isinstance(node, list) and step.isascii() and step.isdigit() and int(step) < len(node):
        return node[int(step)]
    return None
