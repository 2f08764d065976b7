"""What the contract holds and this version does not have yet. A later version deletes lines here.

What would change numbers is refused. What changes none is checked, accepted and remarked.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from rtid.config.entry import Entry, Kind, Section
from rtid.config.outlets import COMMANDS, PAGE, RECORD
from rtid.config.yaml_lines import Content


@dataclass(frozen=True, slots=True)
class Refused:
    key: str  # path of the key; * is every name
    here: Callable[[Content], bool]
    what: str
    mend: str


@dataclass(frozen=True, slots=True)
class Remarked:
    section: str
    kinds: Mapping[str, Kind[Any]]
    wanted: Callable[[Mapping[str, Any]], bool]
    remark: str


def _always(_: object) -> bool:
    return True


REFUSED = (
    Refused("loops.*.model.structure", lambda c: c == "physical", "physical", "use output_error or equation_error"),
    Refused("loops.*.model.balance", _always, "a physical balance", "use output_error or equation_error, with inputs"),
    Refused("loops.*.model.filter_s", _always, "the filter of a physical balance", "remove it"),
    Refused("loops.*.model.integrating", lambda c: c is True, "integrating: true", "use a loop whose output settles"),
    Refused("loops.*.operating_point", _always, "a baseline per region", "remove it, or gate with active_when"),
    Refused("loops.*.baseline.automatic", lambda c: c is False, "automatic: false", "let it be learnt from the data"),
    Refused("loops.*.baseline.known", _always, "a known baseline", "let it be learnt: automatic: true"),
)

REMARKED = (
    Remarked("page", PAGE, _always, "nothing is served"),
    Remarked("record", RECORD, _always, "no raw samples are kept"),
    Remarked("commands", COMMANDS, lambda values: values.get("mqtt") is True, "no operator action is taken over MQTT"),
)


def refuse(root: Entry) -> None:
    """Refuse the first entry that this version cannot honour."""
    for later in REFUSED:
        for entry in _at(root, later.key.split(".")):
            if later.here(entry.item.content):
                entry.refuse(f"{later.what} is not in this version; {later.mend}")


def remarks(section: Section) -> tuple[str, ...]:
    """What to say of the sections that are accepted here without an effect."""
    here = (later for later in REMARKED if later.section in section and _wanted(section, later))
    return tuple(f"{later.section}: not in this version, {later.remark}" for later in here)


def _wanted(section: Section, later: Remarked) -> bool:
    return later.wanted(Section(section.at(later.section), later.kinds).values(later.kinds))


def _at(entry: Entry, keys: list[str]) -> Iterator[Entry]:
    if not keys:
        yield entry
    elif isinstance(entry.item.content, dict):
        for key, item in entry.item.content.items():
            if keys[0] in {"*", key}:
                yield from _at(entry.below(key, item), keys[1:])
