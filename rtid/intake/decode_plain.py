"""A payload that is one number and nothing else."""

from __future__ import annotations

from rtid.intake.decode_values import Message, parse_number
from rtid.intake.reading import Rejected
from rtid.settings import Place


class PlainMessage(Message):
    def __init__(self, value: float) -> None:
        self._value = value

    def value(self, place: Place) -> float:
        return self._value


def parse(payload: bytes) -> PlainMessage:
    """Raises Rejected('number')."""
    try:
        return PlainMessage(parse_number(payload.decode("ascii").strip()))
    except UnicodeDecodeError:
        raise Rejected("number", "the payload is not plain ASCII") from None
