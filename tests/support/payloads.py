"""A payload against its schema, after a trip through its bytes."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from jsonschema import Draft202012Validator  # type: ignore[import-untyped]

from rtid import schemas
from rtid.publish import messages


def check(payload: Mapping[str, Any]) -> None:
    """Raise jsonschema's ValidationError unless the bytes of `payload` obey the schema that it names."""
    check_as(payload["schema"].split("/")[1], messages.dump(payload))


def check_as(kind: str, content: bytes) -> None:
    """The same for bytes that do not name their schema."""
    schema = schemas.load(kind)
    Draft202012Validator.check_schema(schema)
    Draft202012Validator(schema).validate(json.loads(content))
