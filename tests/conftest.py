"""What every test may use: brokers, and one line at the top of the run that says which broker it is."""

from __future__ import annotations

import os
import signal
from collections.abc import Iterator

import pytest

from tests.support.broker import Broker, mosquitto


def pytest_configure(config: pytest.Config) -> None:
    signal.signal(signal.SIGINT, signal.default_int_handler)  # a run in the background hands an ignored one to children
    if mosquitto() is None and os.environ.get("CI") == "true":
        raise pytest.UsageError("mosquitto is missing; with CI=true the broker tests may not be skipped: install it")


def pytest_report_header(config: pytest.Config) -> str:
    program = mosquitto()
    if program is None:
        return "broker: mosquitto is missing, a pure-Python MQTT 3.1.1 broker stands in; tests that need MQTT 5 skip"
    return f"broker: {program}"


@pytest.fixture
def broker() -> Iterator[Broker]:
    """A running broker of its own for one test: any client that speaks MQTT 3.1.1."""
    with Broker() as running:
        yield running


@pytest.fixture
def mqtt5_broker() -> Iterator[Broker]:
    """A running broker of its own for one test that speaks MQTT 5, as rtid does."""
    if mosquitto() is None:
        pytest.skip("mosquitto is missing; the fallback broker does not speak MQTT 5")
    with Broker() as running:
        yield running
