"""JSON Schemas (2020-12) of the configuration and of every payload, by name: rtid/schemas/NAME.json."""

from __future__ import annotations

import json
from importlib.resources import files
from typing import Any

_SUFFIX = ".json"


def names() -> tuple[str, ...]:
    """The names of all schemas, sorted."""
    found = (each.name for each in files(__name__).iterdir())
    return tuple(sorted(name.removesuffix(_SUFFIX) for name in found if name.endswith(_SUFFIX)))


def load(name: str) -> dict[str, Any]:
    """The schema as it lies in the package. Raises KeyError when there is none of that name."""
    if name not in names():
        raise KeyError(f"no schema {name}; expected one of {', '.join(names())}")
    schema: dict[str, Any] = json.loads((files(__name__) / f"{name}{_SUFFIX}").read_text(encoding="utf-8"))
    return schema
