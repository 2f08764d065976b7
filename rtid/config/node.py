"""The whole file: node, broker, sources, loops, and what is published and kept."""

from __future__ import annotations

import os
from collections.abc import Mapping
from typing import Any

from rtid.config import later
from rtid.config.broker import broker
from rtid.config.entry import Entry, Kind, Section
from rtid.config.loop_parts import ALARM_BUDGET
from rtid.config.loops import loops
from rtid.config.outlets import PUBLISH, RECORD
from rtid.config.sources import sources
from rtid.config.values import NAME, TEXT
from rtid.config.yaml_lines import read
from rtid.settings import Node

_KEYS = (
    "node",
    "state_dir",
    "broker",
    "sources",
    "loops",
    "alarm_budget",
    "publish",
    "record",
    "page",
    "commands",
)
_NAME = Kind("a name for this computer", NAME)


def load(path: str | os.PathLike[str], *, environ: Mapping[str, str] = os.environ) -> Node:
    """The settings in the file, every default filled in.

    `environ` gives STATE_DIRECTORY, which systemd sets; a relative `state_dir` is relative to the current folder.
    Raises ConfigError (one line that begins with FILE:LINE), MissingInput (no such file) and InputOutputError (not
    readable).
    """
    root = Entry(os.fspath(path), "", read(path))
    section = Section(root, _KEYS)
    later.refuse(root)
    name = section.need("node", _NAME)
    joined = section.get("broker", broker, None)
    read_from = section.need("sources", Kind("the sources that are read", lambda entry: sources(entry, joined)))
    budget = section.get("alarm_budget", ALARM_BUDGET, None)
    pace = _flat(section, "publish", PUBLISH)
    watched = Kind("the loops that are watched", lambda entry: loops(entry, read_from, budget=budget, pace=pace))
    return Node(
        name=name,
        sources=read_from,
        loops=section.need("loops", watched),
        state_dir=section.get("state_dir", TEXT, _state_dir(environ)),
        broker=joined,
        notes=later.remarks(section),
        **pace,
        **_flat(section, "record", RECORD),
    )


def _flat(section: Section, key: str, kinds: Mapping[str, Kind[Any]]) -> dict[str, Any]:
    """The given values of a small section, named KEY_NAME as in `Node`."""
    values = Section(section.part(key), kinds).values(kinds)
    return {f"{key}_{name}": value for name, value in values.items()}


def _state_dir(environ: Mapping[str, str]) -> str:
    """The first folder of STATE_DIRECTORY (systemd separates several by colons), else one in the current folder."""
    return environ.get("STATE_DIRECTORY", "").split(":")[0] or "./rtid-state"
