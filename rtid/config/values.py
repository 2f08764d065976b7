"""The kinds of single values: numbers within bounds, whole numbers, truth values, texts, names, pairs and lists."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from typing import Literal, TypeVar

from rtid.config.entry import Entry, Kind
from rtid.config.yaml_lines import Item, printable
from rtid.settings import Range
from rtid.valid_names import one_of

T = TypeVar("T")

MOST = 1e30  # beyond every physical quantity; keeps all arithmetic with the settings finite
MOST_SECONDS = 1e9

_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9_-]{0,63}")
_EXPONENT = re.compile(r"([-+]?[0-9]+)\.?([0-9]*)[eE]([-+]?)([0-9]+)")
_NUMERAL = re.compile(r"[-+]?[0-9]*\.?[0-9]+")


def number(
    what: str = "a number", *, above: float = -math.inf, least: float = -MOST, most: float = MOST
) -> Kind[float]:
    """A finite number above `above`, from `least` to `most`."""
    expected = what + _bounds(above, least, most)

    def take(entry: Entry) -> float:
        content = entry.item.content
        if isinstance(content, bool) or not isinstance(content, int | float):
            return entry.refuse_found(expected + _hint(entry.item))
        if not (above < content and least <= content <= most):
            entry.refuse_found(expected + _hint(entry.item))
        return float(content)

    return Kind(expected, take)


def seconds(*, above: float = -math.inf, least: float = 0.0) -> Kind[float]:
    return number("a number of seconds", above=above, least=least, most=MOST_SECONDS)


def integer(*, least: int, most: int) -> Kind[int]:
    expected = f"a whole number from {least} to {most}"

    def take(entry: Entry) -> int:
        content = entry.item.content
        if isinstance(content, bool) or not isinstance(content, int) or not least <= content <= most:
            return entry.refuse_found(expected + _hint(entry.item))
        return content

    return Kind(expected, take)


def choice(options: tuple[T, ...]) -> Kind[T]:
    """Exactly one of the options, which are texts or whole numbers."""
    names = tuple(str(option) for option in options)
    expected = f"one of {', '.join(names)}"

    def take(entry: Entry) -> T:
        content = entry.item.content
        if isinstance(content, bool) or content not in options:
            return entry.refuse_found(one_of(entry.item.text, names))
        return options[options.index(content)]

    return Kind(expected, take)


def pair(order: Literal["ascending", "level", "distinct"]) -> Kind[Range]:
    """Two numbers [a, b]: a < b (ascending), a <= b (level) or a != b (distinct)."""
    words = {"ascending": ", the lower first", "level": ", the lower first", "distinct": " that differ"}[order]
    expected = f"two numbers{words}: [a, b]"

    def take(entry: Entry) -> Range:
        ends = tuple(number()(each) for each in elements(entry, expected))
        if len(ends) != 2:
            return entry.refuse(f"found {len(ends)} values; expected {expected}")
        low, high = ends
        if not {"ascending": low < high, "level": low <= high, "distinct": low != high}[order]:
            entry.refuse(f"found [{low:g}, {high:g}]; expected {expected}")
        return low, high

    return Kind(expected, take)


def elements(entry: Entry, expected: str) -> list[Entry]:
    """The entries of a list, each with its own place."""
    content = entry.item.content
    if not isinstance(content, tuple):
        entry.refuse_found(expected)
    return [Entry(entry.file, f"{entry.path}[{i}]", item) for i, item in enumerate(content)]


def named(entry: Entry, read: Callable[[Entry, str], T], what: str) -> dict[str, T]:
    """A mapping from names to sections, at least one."""
    items = entry.mapping(f"{what}, one section under each name")
    if not items:
        entry.refuse(f"found an empty mapping; expected {what}, at least one")
    sections: dict[str, T] = {}
    for name, item in items.items():
        below = entry.below(name, item)
        _check_name(below, name)
        sections[name] = read(below, name)
    return sections


def signal_of(known: tuple[str, ...]) -> Kind[str]:
    """The name `source.signal` of a signal that a source declares."""

    def take(entry: Entry) -> str:
        name = TEXT(entry)
        if name not in known:
            entry.refuse(f"no such signal {printable(name)}; expected {one_of(name, known)}")
        return name

    return Kind("a signal as source.signal", take)


def _flag(entry: Entry) -> bool:
    content = entry.item.content
    return content if isinstance(content, bool) else entry.refuse_found(FLAG.expected)


def _text(entry: Entry) -> str:
    content = entry.item.content
    if isinstance(content, bool | int | float):
        entry.refuse_found(f"text; quote it: '{printable(entry.item.text)}'")
    if not isinstance(content, str) or not content:
        return entry.refuse_found(TEXT.expected)
    if not content.isprintable():
        entry.refuse_found("text without control characters")
    return content


def _name(entry: Entry) -> str:
    name = TEXT(entry)
    _check_name(entry, name)
    return name


def _check_name(entry: Entry, name: str) -> None:
    if not _NAME.fullmatch(name):
        entry.refuse(
            f"'{printable(name)}' is no name; expected letters (a-z), digits, '-' and '_', "
            "a letter or a digit first, 64 at most"
        )


FLAG = Kind("true or false", _flag)
TEXT = Kind("text", _text)
NAME = Kind("a name", _name)


def _bounds(above: float, least: float, most: float) -> str:
    low = f" above {above:g}" if above > -math.inf else f" of at least {least:g}" if least > -MOST else ""
    high = f"{' and' if low else ' of'} at most {most:g}" if most < MOST else ""
    return low + high


def _hint(item: Item) -> str:
    """How to write what was meant: a numeral that YAML takes for text, a number that is none."""
    content = item.content
    if isinstance(content, float) and not abs(content) <= MOST:
        return f", finite and within {MOST:g}"
    if not isinstance(content, str):
        return ""
    if match := _EXPONENT.fullmatch(content):
        whole, fraction, sign, exponent = match.groups()
        return f" (write {whole}.{fraction or '0'}e{sign or '+'}{exponent})"
    return " (a plain decimal, without quotes)" if _NUMERAL.fullmatch(content) else ""
