"""One line of comma-separated values: no quoting, columns counted from 0."""

from __future__ import annotations

from collections.abc import Iterable
from contextlib import suppress

from rtid.intake.decode_values import Message, Scalar, parse_number
from rtid.intake.reading import Rejected
from rtid.settings import Place


class CsvMessage(Message):
    """The fields of one line; a field is a number where it looks like one, else text."""

    def __init__(self, fields: list[str]) -> None:
        self._fields = fields

    def value(self, place: Place) -> Scalar:
        text = self._fields[place.column or 0]
        if not text:
            raise Rejected("missing", f"column {place.column} is empty")
        with suppress(Rejected):
            return parse_number(text)
        return text


def columns_needed(places: Iterable[Place]) -> int:
    """How many columns a line must have at least so that every place exists."""
    return 1 + max((place.column for place in places if place.column is not None), default=-1)


def parse(payload: bytes, needed: int) -> CsvMessage:
    """Raises Rejected('garbled') when the line is not printable ASCII, Rejected('columns') when it is too short."""
    text = payload.decode("ascii", errors="replace").replace("\t", " ").rstrip("\r\n")
    if not (text.isascii() and text.isprintable()):
        raise Rejected("garbled", "the line holds characters that are not printable ASCII")
    fields = [field.strip() for field in text.split(",")]
    if len(fields) < needed:
        raise Rejected("columns", f"the line has {len(fields)} columns, {needed} are needed")
    return CsvMessage(fields)
