"""What a small configuration means: its defaults, and the few values that are more than what is written."""

from __future__ import annotations

from pathlib import Path

import pytest

from rtid import config
from rtid.settings import AlarmBudget, AlarmSetting, Condition, Gate, Loop, Node, Place, Tolerance
from tests.support.config_texts import BASE, load_text


def loop_with(lines: str, folder: Path) -> Loop:
    """The base's loop with more lines."""
    return load_text(BASE + "".join(f"    {line}\n" for line in lines.splitlines()), folder).loops["belt"]


def test_defaults_that_depend_on_the_period(tmp_path: Path) -> None:
    loop = load_text(BASE, tmp_path).loops["belt"]
    assert loop.model.dead_time_s == pytest.approx((0.0, 0.1))
    assert loop.memory_s == pytest.approx(10)
    assert loop.baseline.after_s == pytest.approx(20)
    assert loop.baseline.automatic
    assert loop.stale_after_s == 5.0


def test_a_slow_loop_is_stale_after_five_periods(tmp_path: Path) -> None:
    slow = load_text(BASE.replace("period_s: 0.01", "period_s: 60"), tmp_path).loops["belt"]
    assert slow.stale_after_s == 300.0


def test_sections_that_name_other_keys_keep_the_period_dependent_defaults(tmp_path: Path) -> None:
    loop = loop_with("model: {order: 2}\nbaseline: {automatic: true}", tmp_path)
    assert loop.model.dead_time_s == pytest.approx((0.0, 0.1))
    assert loop.baseline.after_s == pytest.approx(20)


def test_the_other_defaults(tmp_path: Path) -> None:
    node = load_text(BASE, tmp_path)
    loop = node.loops["belt"]
    assert (loop.model.structure, loop.model.order, loop.model.integrating) == ("output_error", 1, False)
    assert loop.tolerance == Tolerance(gain_pct=10, time_constant_pct=20, dead_time_pct=30, noise_pct=50)
    assert loop.alarm_budget == AlarmBudget(false_alarms=1, per_days=30)
    assert (loop.alarms, loop.controller, loop.active_when) == ({}, None, None)
    assert (node.publish_every_s, loop.publish_every_s, node.record_keep_mb) == (1.0, 1.0, 64.0)
    assert node.broker is not None
    assert (node.broker.port, node.broker.prefix, node.broker.tls) == (1883, "rtid", None)
    assert node.notes == ()


def test_an_alarm_that_is_named_keeps_the_defaults_of_what_is_left_out(tmp_path: Path) -> None:
    alarms = loop_with("alarms: {plant_drift: {latching: true}, data_stale: {off_delay_s: 9}}", tmp_path).alarms
    assert alarms == {
        "plant_drift": AlarmSetting(priority="low", latching=True),
        "data_stale": AlarmSetting(priority="medium", off_delay_s=9.0),
    }


def test_a_loop_knows_what_its_sources_say_of_its_signals(tmp_path: Path) -> None:
    loop = load_text(BASE, tmp_path).loops["belt"]
    assert loop.units == {"drive.volts": "V", "drive.speed": "rad/s"}
    assert loop.limits == {"drive.volts": (-24.0, 24.0)}
    assert loop.ranges == {}


def test_one_dead_time_is_a_known_one(tmp_path: Path) -> None:
    assert loop_with("model: {dead_time_s: 2}", tmp_path).model.dead_time_s == (2.0, 2.0)


def test_truth_values_in_a_gate_are_one_and_zero(tmp_path: Path) -> None:
    gate = "{all: [{signal: drive.speed, equals: true}, {signal: drive.volts, equals: false}], settle_s: 3}"
    assert loop_with(f"active_when: {gate}", tmp_path).active_when == Gate(
        (Condition("drive.speed", equals=1.0), Condition("drive.volts", equals=0.0)), 3.0
    )


def test_one_condition_needs_no_list(tmp_path: Path) -> None:
    gate = loop_with("active_when: {signal: drive.speed, above: 5}", tmp_path).active_when
    assert gate == Gate((Condition("drive.speed", above=5.0),), 0.0)


def test_the_nodes_budget_is_shared_by_the_loops_without_their_own(tmp_path: Path) -> None:
    loop = "    inputs: [drive.volts]\n    output: drive.speed\n    period_s: 0.01\n"
    own = "    alarm_budget: {false_alarms: 5}\n"
    text = f"{BASE}  second:\n{loop}  third:\n{loop}{own}alarm_budget: {{false_alarms: 3, per_days: 90}}\n"
    loops = load_text(text, tmp_path).loops
    assert loops["belt"].alarm_budget == loops["second"].alarm_budget == AlarmBudget(1.5, 90)
    assert loops["third"].alarm_budget == AlarmBudget(5, 30)


def test_what_is_published_how_often_reaches_the_loops(tmp_path: Path) -> None:
    node = load_text(BASE + "publish: {every_s: 4}\n", tmp_path)
    assert (node.publish_every_s, node.loops["belt"].publish_every_s) == (4.0, 4.0)


def test_an_mqtt_signal_stands_at_its_place_and_topic(tmp_path: Path) -> None:
    valve, temp = load_text(BASE, tmp_path).sources["hall"].signals
    assert valve.place == Place(path="valve", topic="plant/hall/ahu1")
    assert temp.place == Place(path="temp")


def test_sections_of_later_versions_leave_a_remark(tmp_path: Path) -> None:
    text = BASE + "page: {port: 8000}\nrecord: {keep_mb: 8}\ncommands: {mqtt: true}\n"
    node = load_text(text, tmp_path)
    assert [note.partition(":")[0] for note in node.notes] == ["page", "record", "commands"]
    assert all("not in this version" in note for note in node.notes)
    assert node.record_keep_mb == 8.0


def test_commands_that_are_off_need_no_remark(tmp_path: Path) -> None:
    assert load_text(BASE + "commands: {mqtt: false}\n", tmp_path).notes == ()


@pytest.mark.parametrize(
    ("environ", "expected"),
    [
        ({}, "./rtid-state"),
        ({"STATE_DIRECTORY": ""}, "./rtid-state"),
        ({"STATE_DIRECTORY": "/var/lib/rtid"}, "/var/lib/rtid"),
        ({"STATE_DIRECTORY": "/var/lib/rtid:/var/lib/other"}, "/var/lib/rtid"),
    ],
)
def test_the_state_directory_comes_from_systemd(environ: dict[str, str], expected: str, tmp_path: Path) -> None:
    path = tmp_path / "c.yaml"
    path.write_text(BASE)
    assert config.load(path, environ=environ).state_dir == expected
    path.write_text(f"state_dir: mine\n{BASE}")
    assert config.load(path, environ=environ).state_dir == "mine"


def test_a_byte_order_mark_does_no_harm(tmp_path: Path) -> None:
    assert load_text(b"\xef\xbb\xbf" + BASE.encode(), tmp_path) == load_text(BASE, tmp_path)


def test_an_alias_stands_for_its_anchor(tmp_path: Path) -> None:
    text = BASE.replace("limits: [-24, 24]", "limits: &ends [-24, 24]").replace("unit: rad/s", "plausible: *ends")
    volts, speed = load_text(text, tmp_path).sources["drive"].signals
    assert volts.limits == speed.plausible == (-24.0, 24.0)


def test_quoted_words_are_names(tmp_path: Path) -> None:
    node: Node = load_text(BASE.replace("node: n1", "node: 'no'").replace("  belt:", "  '7':"), tmp_path)
    assert (node.name, list(node.loops)) == ("no", ["7"])
