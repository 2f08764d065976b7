"""A JSON Schema, taken apart."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any


def parts(schema: Any) -> Iterator[dict[str, Any]]:
    """Every mapping in it, at any depth."""
    if isinstance(schema, dict):
        yield schema
    below = schema.values() if isinstance(schema, dict) else schema if isinstance(schema, list) else ()
    for part in below:
        yield from parts(part)
