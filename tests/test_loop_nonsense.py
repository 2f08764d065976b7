"""Whatever the rows hold, a loop goes on, and what it publishes is finite JSON."""

from __future__ import annotations

import copy
import functools
import itertools
from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, Phase, given
from hypothesis import settings as hypothesis_settings
from hypothesis import strategies as st

from rtid import settings
from rtid.loop import Loop
from rtid.plants.linear import first_order, simulate
from rtid.publish import messages
from rtid.report import Report
from rtid.rows import Rows
from tests.support.payloads import check
from tests.support.plants import PERIOD_S, Array, blocks, feed, prbs, told

T = PERIOD_S
PIECE = 160  # rows of one kind
PLANT = first_order(2.0, 6 * T, dead_time_s=T, noise=0.1, offset=5.0)
STRUCTURES = ("output_error", "equation_error")
pytestmark = pytest.mark.filterwarnings("ignore::RuntimeWarning")  # an overflow is no harm while nothing raises


def plant_like(seed: int) -> Array:
    drive = prbs(PIECE, bit=8, seed=seed)
    return np.column_stack((drive, simulate(PLANT, drive, period_s=T, seed=seed)))


def constant(u: float, y: float) -> Array:
    return np.tile([u, y], (PIECE, 1))


def random(seed: int, exponent: float) -> Array:
    return np.asarray(10.0**exponent * np.random.default_rng(seed).standard_normal((PIECE, 2)))


def holed(seed: int) -> Array:
    values = plant_like(seed)
    values[np.random.default_rng(seed).random(PIECE) < 0.5, 1] = np.nan
    return values


def pieces(most: float) -> st.SearchStrategy[Array]:
    """Rows of one kind, numbers up to 10**`most` in size."""
    seeds = st.integers(0, 1000)
    levels = st.sampled_from([0.0, 1.0, -1e-300, 5e-324, 10.0**most, -(10.0**most)])
    return st.one_of(
        st.builds(plant_like, seeds),
        st.builds(constant, levels, st.one_of(levels, st.just(float("nan")))),
        st.builds(random, seeds, st.floats(-12.0, most)),
        st.builds(holed, seeds),
    )


few = hypothesis_settings(
    max_examples=6, deadline=None, derandomize=True, phases=[Phase.generate], suppress_health_check=list(HealthCheck)
)


def config(structure: Any, order: int) -> settings.Loop:
    model = settings.Model(structure, order=order, dead_time_s=(0.0, 3 * T))
    return told(model=model, memory_s=200 * T, baseline=settings.Baseline(after_s=300 * T))


def publish(report: Report) -> None:
    """As the service does, through the bytes, which refuse what is not finite."""
    for payload in (messages.model(report, "n"), messages.drift(report, "n"), messages.health(report, "n")):
        messages.dump(payload)
    for number, transition in enumerate(report.transitions):
        messages.dump(messages.event(transition, node="n", loop=report.loop, sequence=number))


def unknown_together(report: Report) -> bool:
    return all(
        len({v is None for v in (q.value, q.std_error, q.low, q.high)}) == 1
        and all(v is None or np.isfinite(v) for v in (q.value, q.std_error, q.low, q.high))
        for q in report.quantities.values()
    )


@functools.cache
def learnt(structure: str) -> Loop:
    loop = config(structure, 1)
    found = Loop(loop)
    feed(found, blocks(loop, np.concatenate([plant_like(seed) for seed in range(4)])))
    assert found.state == "watching"
    return found


def watching_then(structure: str, values: Array) -> tuple[Loop, Iterator[Rows]]:
    """A loop that has learnt the plant on 640 rows, and the blocks of what comes then."""
    return copy.deepcopy(learnt(structure)), blocks(config(structure, 1), values, first=4 * PIECE)


def survive(loop: Loop, rows: Iterator[Rows]) -> None:
    for block in rows:
        report = loop.advance(block)
        assert unknown_together(report)
        if report.due or report.transitions:
            publish(report)
    check(messages.snapshot(loop.snapshot("asked"), node="n", stamp=0.0))
    assert loop.report is not None
    check(messages.drift(loop.report, "n"))


@pytest.mark.parametrize("order", [1, 2])
@pytest.mark.parametrize("structure", STRUCTURES)
@few
@given(parts=st.lists(pieces(6.0), min_size=1, max_size=3))
def test_any_rows_are_survived(structure: str, order: int, parts: list[Array]) -> None:
    loop = config(structure, order)
    survive(Loop(loop), blocks(loop, np.concatenate(parts)))


@pytest.mark.parametrize("structure", STRUCTURES)
@few
@given(parts=st.lists(pieces(6.0), min_size=1, max_size=3))
def test_a_loop_that_watches_survives_any_rows(structure: str, parts: list[Array]) -> None:
    survive(*watching_then(structure, np.concatenate(parts)))


ABSURD = list(itertools.product(STRUCTURES, (0, 1), (1e10, -1e15, 1e100, 1e300)))


@pytest.mark.parametrize(("structure", "column", "size"), ABSURD)
def test_one_absurd_reading_is_survived(structure: str, column: int, size: float) -> None:
    """What a broken decimal point or a float read from the wrong byte looks like."""
    values = np.concatenate([plant_like(seed) for seed in (10, 11)])
    values[20, column] = size
    survive(*watching_then(structure, values))


@pytest.mark.parametrize("structure", STRUCTURES)
@pytest.mark.parametrize(
    "values",
    [
        constant(1.0, 5.0),
        constant(0.0, 0.0),
        constant(1.0, float("nan")),
        np.column_stack((prbs(PIECE), np.ones(PIECE))),
    ],
    ids=["constant", "zero", "no output", "output stuck"],
)
def test_data_that_say_nothing_never_make_a_baseline(structure: str, values: Array) -> None:
    loop = config(structure, 1)
    found = Loop(loop)
    survive(found, blocks(loop, np.tile(values, (4, 1))))
    assert found.state == "learning"
    assert found.report is not None
    assert found.report.health == "function_check"


def test_the_noise_free_plant_is_survived_and_known() -> None:
    loop = config("output_error", 1)
    drive = prbs(960, bit=8, seed=1)
    quiet = first_order(2.0, 6 * T, dead_time_s=T, offset=5.0)
    found = Loop(loop)
    survive(found, blocks(loop, np.column_stack((drive, simulate(quiet, drive, period_s=T)))))
    assert found.report is not None
    assert found.report.quantities["gain"].value == pytest.approx(2.0, rel=1e-3)
