"""The keys of the small sections about what goes out: publish, record, page, commands."""

from __future__ import annotations

from typing import Any

from rtid.config.broker import PORT
from rtid.config.entry import Kind
from rtid.config.values import FLAG, TEXT, number, seconds

PUBLISH = {"every_s": seconds(above=0)}
RECORD = {"keep_mb": number("a number of megabytes", above=0, most=1e6)}
PAGE: dict[str, Kind[Any]] = {"listen": TEXT, "port": PORT}
COMMANDS = {"mqtt": FLAG}
