"""Whatever settings are written down load to the same settings, and the schema accepts what loads."""

from __future__ import annotations

from pathlib import Path

import pytest
import yaml
from hypothesis import HealthCheck, given, settings
from jsonschema import Draft202012Validator

from rtid import schemas
from rtid.settings import Node
from tests.support.config_strategies import document, nodes
from tests.support.config_texts import load_text


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("configuration")


@settings(max_examples=60, deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow])
@given(node=nodes())
def test_settings_written_and_loaded_are_the_same(node: Node, folder: Path) -> None:
    written = document(node)
    assert load_text(yaml.safe_dump(written, allow_unicode=True, sort_keys=False), folder) == node
    Draft202012Validator(schemas.load("configuration")).validate(written)
