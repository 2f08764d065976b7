"""`active_when`: the conditions under which a loop learns and judges."""

from __future__ import annotations

from rtid.config.entry import Entry, Kind, Section
from rtid.config.values import elements, number, seconds
from rtid.settings import Condition, Gate

_TESTS = ("above", "below", "equals")


def gate(entry: Entry, signal: Kind[str]) -> Gate:
    """One condition, or `all` of several."""
    if "all" in entry.mapping("signal and above, below or equals, or all"):
        section = Section(entry, ("all", "settle_s"))
        conditions = section.need("all", _conditions(signal))
    else:
        section = Section(entry, ("signal", *_TESTS, "all", "settle_s"))
        conditions = (_condition(section, signal),)
    return Gate(conditions=conditions, settle_s=section.get("settle_s", seconds(), 0.0))


def _conditions(signal: Kind[str]) -> Kind[tuple[Condition, ...]]:
    expected = "a list of conditions: [{signal: source.signal, above: 1.0}]"

    def take(entry: Entry) -> tuple[Condition, ...]:
        each = [Section(below, ("signal", *_TESTS)) for below in elements(entry, expected)]
        return tuple(_condition(s, signal) for s in each) or entry.refuse(f"found an empty list; expected {expected}")

    return Kind(expected, take)


def _condition(section: Section, signal: Kind[str]) -> Condition:
    tests = section.given(_TESTS)
    if len(tests) != 1:
        section.entry.refuse(
            f"found {' and '.join(tests) or 'no test'}; expected exactly one of above, below, equals (several: all)"
        )
    return Condition(
        signal=section.need("signal", signal),
        above=section.get("above", number(), None),
        below=section.get("below", number(), None),
        equals=section.get("equals", _mode, None),
    )


def _mode(entry: Entry) -> float:
    """A number; the truth values of a mode signal are 1 and 0."""
    content = entry.item.content
    return float(content) if isinstance(content, bool) else number("a number, true or false")(entry)
