"""A YAML file as plain values that know their lines: no objects, no repeated keys, no bombs.

The subset is deliberately small. Tags, repeated keys, keys that are not text and second documents are refused; numbers
are plain decimals (`017`, `1_000`, `1:30` stay text), so that nothing is read as another number than a person reads.
"""

from __future__ import annotations

import os
import re
from dataclasses import dataclass
from pathlib import Path
from typing import NoReturn, TypeAlias

import yaml
from yaml.events import (
    AliasEvent,
    DocumentStartEvent,
    Event,
    MappingEndEvent,
    MappingStartEvent,
    ScalarEvent,
    SequenceEndEvent,
    StreamEndEvent,
)
from yaml.nodes import ScalarNode

from rtid.errors import ConfigError, InputOutputError, MissingInput

MOST_BYTES = 1 << 20
MOST_VALUES = 20_000  # in the whole file, aliases written out
MOST_LEVELS = 20

_INTEGER = re.compile(r"[-+]?(0|[1-9][0-9]*)")
_DECIMAL = re.compile(r"[-+]?([0-9]+\.[0-9]*|\.[0-9]+)([eE][-+][0-9]+)?")
_NOT_FINITE = re.compile(r"[-+]?\.(inf|nan)", re.IGNORECASE)
_EXACT_DIGITS = 15

Content: TypeAlias = "str | int | float | bool | None | tuple[Item, ...] | dict[str, Item]"


@dataclass(frozen=True, slots=True)
class Item:
    """A value and the line of its key (of the value itself within a list). `text`: a scalar as it is written."""

    line: int
    content: Content
    text: str = ""


def read(path: str | os.PathLike[str]) -> Item:
    """The one document of the file.

    Raises MissingInput (no such file), InputOutputError (not readable), ConfigError (not in the subset).
    """
    file = os.fspath(path)
    return _Builder(_text(file), file).document()


def printable(text: str, most: int = 60) -> str:
    """The text on one line, shortened, without characters that a terminal would obey."""
    short = text if len(text) <= most else text[: most - 1] + "…"
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in short)


def _text(file: str) -> str:
    try:
        with Path(file).open("rb") as stream:
            data = stream.read(MOST_BYTES + 1)
    except FileNotFoundError:
        raise MissingInput(f"{file}: no such file; give the path of a configuration") from None
    except IsADirectoryError:
        raise MissingInput(f"{file}: this is a folder; give the path of a configuration file in it") from None
    except OSError as error:
        raise InputOutputError(f"{file}: cannot be read: {error.strerror}") from None
    if len(data) > MOST_BYTES:
        raise ConfigError(f"{file}:1: the file is larger than 1 MiB; expected a configuration")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise ConfigError(f"{file}:{line}: a byte that is not UTF-8; save the file as UTF-8") from None


class _Builder:
    """Turns the parser's events into items, counting as it goes."""

    def __init__(self, text: str, file: str) -> None:
        self._text = text
        self._file = file
        self._values = 0
        self._anchors: dict[str, tuple[Item, int]] = {}  # the item and how many values it holds

    def document(self) -> Item:
        try:
            self._loader = yaml.SafeLoader(self._text)
            return self._only_document()
        except yaml.MarkedYAMLError as error:
            mark = error.problem_mark or error.context_mark
            line = mark.line + 1 if mark else 1
            problem = printable(error.problem or error.context or "cannot be read", 100)
            self._refuse(line, "", f"not valid YAML: {problem}; check indentation, colons and quotes around here")
        except yaml.reader.ReaderError as error:
            line = self._text.count("\n", 0, error.position) + 1
            self._refuse(line, "", "a control character; remove it")
        except (ValueError, OverflowError):  # the scanner's, for an escape or a version beyond every range
            self._refuse(self._loader.get_mark().line + 1, "", "not valid YAML: a number beyond every range; remove it")

    def _only_document(self) -> Item:
        self._next()  # the start of the stream
        has_document = isinstance(self._next(), DocumentStartEvent)
        root = self._item(self._next(), "", depth=0) if has_document else Item(1, None)
        if root.content is None:
            self._refuse(1, "", "the file is empty; expected node, sources and loops")
        self._next()  # the end of the document
        after = self._next()
        if not isinstance(after, StreamEndEvent):
            self._refuse(_line(after), "", "a second document begins here; expected one configuration in a file")
        return root

    def _next(self) -> Event:
        event: Event = self._loader.get_event()  # type: ignore[no-untyped-call]
        return event

    def _item(self, event: Event, path: str, *, depth: int, line: int = 0) -> Item:
        line = line or _line(event)
        if isinstance(event, AliasEvent):
            return self._alias(event, path, line)
        before = self._values
        self._count(1, path, line)
        if getattr(event, "tag", None) is not None:
            self._refuse(line, path, "a tag ('!…') stands here; remove it, expected a plain value")
        if isinstance(event, ScalarEvent):
            item = self._scalar(event, line)
        else:
            item = Item(line, self._collection(event, path, depth, line))
        anchor = getattr(event, "anchor", None)
        if anchor is not None:
            self._anchors[anchor] = item, self._values - before
        return item

    def _alias(self, event: AliasEvent, path: str, line: int) -> Item:
        name = str(event.anchor)
        if name not in self._anchors:
            self._refuse(line, path, f"no anchor '&{printable(name)}' stands above; expected a value, not an alias")
        item, values = self._anchors[name]
        self._count(values, path, line)
        return Item(line, item.content, item.text)

    def _collection(self, event: Event, path: str, depth: int, line: int) -> Content:
        if depth >= MOST_LEVELS:
            self._refuse(line, "", f"more than {MOST_LEVELS} levels of nesting; check brackets and indentation")
        return self._mapping(path, depth) if isinstance(event, MappingStartEvent) else self._sequence(path, depth)

    def _sequence(self, path: str, depth: int) -> tuple[Item, ...]:
        items: list[Item] = []
        while not isinstance(event := self._next(), SequenceEndEvent):
            items.append(self._item(event, f"{path}[{len(items)}]", depth=depth + 1))
        return tuple(items)

    def _mapping(self, path: str, depth: int) -> dict[str, Item]:
        items: dict[str, Item] = {}
        while not isinstance(event := self._next(), MappingEndEvent):
            key = self._key(event, path)
            below = below_path(path, key)
            if key in items:
                first = items[key].line
                self._refuse(_line(event), below, f"this key stands already in line {first}; expected it once")
            items[key] = self._item(self._next(), below, depth=depth + 1, line=_line(event))
        return items

    def _key(self, event: Event, path: str) -> str:
        line = _line(event)
        if not isinstance(event, ScalarEvent) or event.tag is not None:
            self._refuse(line, path, "a list, a mapping, an alias or a tag stands as a key; expected a word")
        content = self._scalar(event, line).content
        if not isinstance(content, str):
            word = printable(event.value)
            self._refuse(line, path, f"YAML does not read the key {word or '(nothing)'} as text; quote it: '{word}'")
        return content

    def _scalar(self, event: ScalarEvent, line: int) -> Item:
        tag: str = self._loader.resolve(ScalarNode, event.value, event.implicit)  # type: ignore[no-untyped-call]
        return Item(line, _content(tag.rpartition(":")[2], event.value), event.value)

    def _count(self, values: int, path: str, line: int) -> None:
        self._values += values
        if self._values > MOST_VALUES:
            self._refuse(line, path, f"more than {MOST_VALUES} values, aliases written out; expected a configuration")

    def _refuse(self, line: int, path: str, problem: str) -> NoReturn:
        place = f"{path}: " if path else ""
        raise ConfigError(f"{self._file}:{line}: {place}{problem}") from None


def below_path(path: str, key: str) -> str:
    """The path of a key for messages: outer.inner."""
    return f"{path}.{printable(key)}" if path else printable(key)


def _line(event: Event) -> int:
    return event.start_mark.line + 1 if event.start_mark else 1


def _content(kind: str, text: str) -> Content:
    match kind:
        case "null":
            return None
        case "bool":
            return text.lower() in {"yes", "true", "on"}
        case "int" if _INTEGER.fullmatch(text):
            return int(text) if len(text) <= _EXACT_DIGITS else float(text)
        case "float" if _DECIMAL.fullmatch(text):
            return float(text)
        case "float" if _NOT_FINITE.fullmatch(text):
            return float(text.replace(".", ""))
    return text
