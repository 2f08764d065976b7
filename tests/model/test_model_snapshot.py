"""A snapshot of a running loop: it obeys its schema, and its transfer function is the model."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest
from scipy.signal import lfilter  # type: ignore[import-untyped]

from rtid.loop import Loop
from rtid.model.quantities import names_of
from rtid.model.snapshot import change_part
from rtid.plants.linear import LinearPlant, first_order, second_order, simulate
from rtid.publish import messages
from rtid.report import Quantity
from tests.support.payloads import check
from tests.support.plants import PERIOD_S, START_STAMP, Scenario, changed, feed, told

T = PERIOD_S
ONE = first_order(2.0, 8 * T, dead_time_s=2 * T, noise=0.2, offset=5.0)
TWO = second_order(-2.0, 0.25 / T, 0.7, dead_time_s=2.4 * T, noise=0.1, offset=5.0)
ARX = first_order(2.0, 8 * T, dead_time_s=2 * T, noise=0.03)
CASES = [
    pytest.param(Scenario(ONE), id="order 1"),
    pytest.param(Scenario(TWO), id="order 2"),
    pytest.param(Scenario(ARX, "equation_error"), id="equation error"),
]


def document(loop: Loop) -> dict[str, Any]:
    """What is published, after a trip through its bytes and its schema."""
    payload = messages.snapshot(loop.snapshot("asked"), node="packing-2", stamp=START_STAMP)
    check(payload)
    decoded: dict[str, Any] = json.loads(messages.dump(payload))
    return decoded


@pytest.mark.parametrize("scenario", CASES)
def test_snapshot_of_a_watching_loop_obeys_the_schema_and_is_complete(scenario: Scenario) -> None:
    found = document(scenario.watching())
    assert (found["state"], found["loop"], found["reason"]) == ("watching", "belt", "asked")
    assert found["structure"] == scenario.structure
    assert tuple(found["quantities"]) == tuple(found["baseline"]["quantities"]) == names_of(found["order"], 1)
    assert set(found["change"]) == {f"{name}_pct" for name in found["quantities"]}
    p = len(found["parameters"]["names"])
    assert np.shape(found["parameters"]["values"]) == (p,)
    assert np.shape(found["parameters"]["covariance"]) == (p, p)
    assert "not for automatic use" in found["caution"]


@pytest.mark.parametrize("scenario", CASES)
def test_the_transfer_function_is_the_plant(scenario: Scenario) -> None:
    """Simulated by scipy from the snapshot alone, within four standard errors of the gain and 3 % of it on the way."""
    found = document(scenario.watching())
    transfer = found["transfer"]
    late = np.concatenate((np.zeros(transfer["delay_samples"]), np.ones(200)))
    response = lfilter(transfer["numerator"], transfer["denominator"], late)[:200]
    rest = np.concatenate(([0.0], np.ones(220)))
    truth = simulate(changed(scenario.plant, noise=0.0, offset=0.0), rest, period_s=T)[1:201]
    gain = found["quantities"]["gain"]
    assert transfer["period_s"] == T
    assert response[-1] == pytest.approx(gain["value"], rel=1e-6)
    assert np.abs(response - truth).max() < 4.0 * gain["std_error"] + 0.03 * abs(gain["value"])


@pytest.mark.parametrize("scenario", CASES)
def test_validation_on_data_not_used_for_the_estimate(scenario: Scenario) -> None:
    """A free run leaves the noise alone; one step leaves no more."""
    loop = scenario.watching()
    feed(loop, scenario.next_rows(scenario.plant, 1600))
    found = document(loop)["validation"]
    assert 0.0 < found["one_step_error_pct"] <= found["free_run_error_pct"] * 1.001 < 30.0
    assert found["whiteness_p"] > 0.001
    assert found["input_residual_p"] > 0.001


def test_reduced_is_the_plant_where_it_is_of_first_order() -> None:
    found = document(Scenario(ONE).watching())
    assert found["reduced"]["gain"] == pytest.approx(found["quantities"]["gain"]["value"], rel=1e-6)
    assert found["reduced"]["time_constant_s"] == pytest.approx(
        found["quantities"]["time_constant_1"]["value"], rel=1e-3
    )
    assert found["reduced"]["dead_time_s"] == pytest.approx(found["quantities"]["dead_time"]["value"], abs=0.01)


def test_change_is_against_the_baseline() -> None:
    scenario = Scenario(ONE)
    loop = scenario.watching()
    feed(loop, scenario.next_rows(changed(ONE, gain=1.6), 1400))
    found = document(loop)
    now, before = found["quantities"]["gain"]["value"], found["baseline"]["quantities"]["gain"]["value"]
    assert found["change"]["gain_pct"] == pytest.approx(100.0 * (now / before - 1.0))
    assert found["change"]["gain_pct"] == pytest.approx(-20.0, abs=4.0)
    assert [alarm["alarm"] for alarm in found["alarms"]] == ["plant_drift"]


def quantity(value: float | None) -> Quantity:
    return Quantity(value, None, None, None, "1")


@pytest.mark.parametrize(
    ("now", "before", "pct"), [(1.5, 1.0, 50.0), (None, 1.0, None), (1.0, None, None), (1.0, 0.0, None)]
)
def test_change_of_what_is_unknown_is_unknown(now: float | None, before: float | None, pct: float | None) -> None:
    assert change_part({"gain": quantity(now)}, {"gain": quantity(before)}) == {"gain_pct": pct}


def test_snapshot_before_any_model_obeys_the_schema() -> None:
    found = document(Loop(told()))
    assert found["state"] == "waiting"
    assert found["transfer"] is found["reduced"] is found["baseline"] is None
    assert found["parameters"] == {"names": [], "values": [], "covariance": []}
    assert all(quantity["value"] is None for quantity in found["quantities"].values())
    assert found["change"] == {}


@pytest.mark.parametrize("plant", [ONE, TWO])
def test_parameters_lead_back_to_the_quantities(plant: LinearPlant) -> None:
    found = document(Scenario(plant).watching())
    values = dict(zip(found["parameters"]["names"], found["parameters"]["values"], strict=True))
    assert np.exp(values["ln_gain"]) == pytest.approx(abs(found["quantities"]["gain"]["value"]), rel=1e-9)
    assert values["dead_time"] == pytest.approx(found["quantities"]["dead_time"]["value"], rel=1e-9)
