"""A place in the configuration: what stands there, how to ask for it, and how to refuse it by file, line and key."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import MISSING, dataclass, fields
from typing import Any, Generic, NoReturn, TypeVar

from rtid.config.yaml_lines import Item, below_path, printable
from rtid.errors import ConfigError
from rtid.valid_names import one_of

T = TypeVar("T")
D = TypeVar("D")


@dataclass(frozen=True, slots=True)
class Entry:
    """What stands under one key, with the place to name in a refusal."""

    file: str
    path: str
    item: Item

    def below(self, key: str, item: Item) -> Entry:
        return Entry(self.file, below_path(self.path, key), item)

    def refuse(self, problem: str) -> NoReturn:
        place = f"{self.path}: " if self.path else ""
        raise ConfigError(f"{self.file}:{self.item.line}: {place}{problem}")

    def refuse_found(self, expected: str) -> NoReturn:
        self.refuse(f"found {found(self.item)}; expected {expected}")

    def mapping(self, expected: str) -> dict[str, Item]:
        if not isinstance(self.item.content, dict):
            self.refuse_found(f"a mapping: {expected}")
        return self.item.content


@dataclass(frozen=True, slots=True)
class Kind(Generic[T]):
    """A kind of value: the words that say what is expected, and the reader that takes it or refuses."""

    expected: str
    take: Callable[[Entry], T]

    def __call__(self, entry: Entry) -> T:
        return self.take(entry)


class Section:
    """A mapping with known keys. Every other key is refused with the nearest valid name."""

    def __init__(self, entry: Entry, keys: Iterable[str]) -> None:
        valid = tuple(keys)
        self.entry = entry
        self._items = entry.mapping(f"the keys {', '.join(valid)}")
        for key, item in self._items.items():
            if key not in valid:
                entry.below(key, item).refuse(f"unknown key; expected {one_of(key, valid)}")

    def __contains__(self, key: str) -> bool:
        return key in self._items

    def at(self, key: str) -> Entry:
        """The entry of a key that is there."""
        return self.entry.below(key, self._items[key])

    def part(self, key: str) -> Entry:
        """The entry of a section that may be left out: then it is empty."""
        return self.at(key) if key in self else self.entry.below(key, Item(self.entry.item.line, {}))

    def get(self, key: str, kind: Callable[[Entry], T], default: D) -> T | D:
        return kind(self.at(key)) if key in self._items else default

    def need(self, key: str, kind: Kind[T]) -> T:
        if key not in self._items:
            missing = Item(self.entry.item.line, None)
            self.entry.below(key, missing).refuse(f"missing; expected {kind.expected}")
        return kind(self.at(key))

    def given(self, keys: Iterable[str]) -> tuple[str, ...]:
        """Those of the keys that are there."""
        return tuple(key for key in keys if key in self._items)

    def values(self, kinds: Mapping[str, Callable[[Entry], Any]]) -> dict[str, Any]:
        """The values of those keys that are there."""
        return {key: kind(self.at(key)) for key, kind in kinds.items() if key in self._items}


def record(what: str, make: Callable[..., T], kinds: Mapping[str, Kind[Any]]) -> Kind[T]:
    """A mapping read into the dataclass `make`, whose fields are the keys and whose defaults fill in what is absent."""
    required = {each.name for each in fields(make) if each.default is MISSING}  # type: ignore[arg-type]

    def take(entry: Entry) -> T:
        section = Section(entry, kinds)
        needed = {key: section.need(key, kinds[key]) for key in kinds if key in required}
        return make(**section.values({key: kind for key, kind in kinds.items() if key not in required}), **needed)

    return Kind(what, take)


def found(item: Item) -> str:
    """What stands in the file, in words."""
    match item.content:
        case None:
            return "nothing"
        case bool():
            return f"{printable(item.text)}, which YAML reads as a truth value"
        case int() | float():
            return f"the number {printable(item.text)}"
        case str():
            return f"the text '{printable(item.text)}'"
        case dict():
            return "a mapping"
        case _:
            return "a list"
