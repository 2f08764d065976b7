"""Each operator's command end to end: on a real service, to the event with who and why."""

from __future__ import annotations

import getpass
import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from tests.support.payloads import check
from tests.support.served import Served, said

ROWS = 2400  # the baseline needs 2000


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Served]:
    """One service for the whole file, watching."""
    with Served(tmp_path_factory.mktemp("served")) as running:
        running.stream(ROWS)
        running.wait_for(lambda loop: loop["state"] == "watching", what="a baseline")
        yield running


def last_event(served: Served) -> dict[str, Any]:
    event = served.events()[-1]
    check(event)
    assert event["loop"] == "belt"
    return event


def test_a_hold_says_when_it_ends_and_is_an_event_with_who_and_why(served: Served) -> None:
    done = served.run("hold", "belt", "--for", "30m", "--by", "Kim", "--reason", "belt change")
    assert (done.code, done.err) == (0, "")
    assert done.out.startswith("belt: held by Kim until 20")
    event = last_event(served)
    assert (event["action"], event["by"]) == ("hold", "Kim")
    assert event["text"].endswith(": belt change")
    held = served.loop()
    assert (held["state"], held["health"]) == ("held", "function_check")
    assert held["hold"]["by"] == "Kim"
    assert "then it goes on by itself" in held["reason"]
    served.stream(200)
    assert served.loop()["state"] == "held"

    assert served.run("resume", "belt", "--by", "Kim").out == "belt: resumed by Kim\n"
    assert (served.loop()["hold"], last_event(served)["action"]) == (None, "resume")
    assert "is not held" in served.run("resume", "belt").error


def test_a_hold_ends_by_itself_in_data_time(served: Served) -> None:
    assert served.run("hold", "belt", "--for", "1s", "--by", "Kim").code == 0
    served.stream(300)
    served.wait_for(lambda loop: loop["state"] == "watching", what="the end of the hold")
    assert any(event["text"] == "the hold has ended by itself" for event in served.events())


def test_without_by_it_is_the_login_name(served: Served) -> None:
    assert served.run("hold", "belt", "--for", "5").code == 0
    assert last_event(served)["by"] == getpass.getuser()
    assert served.run("resume", "belt").code == 0


def test_an_alarm_that_was_raised_is_acknowledged_once(served: Served) -> None:
    assert "does not wait for an acknowledgement" in served.run("ack", "belt", "--alarm", "plant_drift").error
    served.stream(200, skip=100)
    served.wait_for(lambda _: any(e.get("alarm") == "data_gap" for e in served.events()), what="a gap")
    done = served.run("ack", "belt", "--alarm", "data_gap", "--by", "Kim", "--reason", "cable was out")
    assert (done.code, done.out) == (0, "belt: data_gap is acknowledged\n")
    event = last_event(served)
    assert (event["alarm"], event["transition"], event["by"]) == ("data_gap", "acknowledged", "Kim")
    assert event["text"].startswith("acknowledged by Kim: cable was out")
    assert served.run("ack", "belt", "--alarm", "data_gap").code == 64


def test_a_shelved_alarm_is_not_heard_and_its_end_is_said(served: Served) -> None:
    done = served.run("shelve", "belt", "--alarm", "data_gap", "--for", "8h", "--by", "Kim", "--reason", "rewiring")
    assert done.out.startswith("belt: data_gap is shelved until 20")
    event = last_event(served)
    assert (event["transition"], event["by"]) == ("shelved", "Kim")
    assert "rewiring" in event["text"]
    loop = served.loop()
    assert [shelved["alarm"] for shelved in loop["shelved"]] == ["data_gap"]
    assert "data_gap is shelved until" in loop["reason"]
    before = len(served.events())
    served.stream(100, skip=100)
    assert served.events()[before:] == []

    assert served.run("unshelve", "belt", "--alarm", "data_gap", "--reason", "done").code == 0
    assert (last_event(served)["transition"], served.loop()["shelved"]) == ("unshelved", [])
    assert "is not shelved" in served.run("unshelve", "belt", "--alarm", "data_gap").error


def test_the_alarm_of_one_signal_is_shelved_by_its_signal(served: Served) -> None:
    alarm = ("--alarm", "saturated", "--signal", "drive.volts")
    assert "saturated of drive.volts is shelved" in served.run("shelve", "belt", *alarm, "--for", "60").out
    assert last_event(served)["signal"] == "drive.volts"
    assert served.run("unshelve", "belt", *alarm).code == 0
    wrong = served.run("shelve", "belt", "--alarm", "saturated", "--signal", "drive.volt", "--for", "60")
    assert "(nearest valid name 'drive.volts')" in wrong.error


def test_a_note_is_an_event(served: Served) -> None:
    assert served.run("note", "belt", "Riemen ersetzt: 5 € [neu]", "--by", "Kim").out == (
        "belt: Riemen ersetzt: 5 € [neu]\n"
    )
    event = last_event(served)
    assert (event["action"], event["by"], event["text"]) == ("note", "Kim", "Riemen ersetzt: 5 € [neu]")


def test_a_snapshot_on_stdout_and_in_a_file_that_is_replaced(served: Served, tmp_path: Path) -> None:
    shown = json.loads(served.run("snapshot", "belt", "--reason", "weekly").out)
    check(shown)
    assert (shown["loop"], shown["reason"], shown["state"]) == ("belt", "weekly", "watching")
    path = tmp_path / "belt.json"
    path.write_text("an older one")
    assert served.run("snapshot", "belt", "--out", path, "--by", "Kim").out.startswith(f"{path}: model of loop belt")
    written = json.loads(path.read_text())
    check(written)
    assert written["reason"] == "asked for by Kim"
    assert list(tmp_path.iterdir()) == [path]


def test_a_snapshot_that_cannot_be_written_is_73(served: Served, tmp_path: Path) -> None:
    done = served.run("snapshot", "belt", "--out", tmp_path / "none" / "x.json")
    assert done.code == 73
    assert f"{tmp_path}/none/x.json: cannot be created" in done.error


def test_a_new_baseline_is_learnt_and_the_old_one_can_be_restored(served: Served) -> None:
    first = served.run("rebaseline", "belt", "--list").out
    assert first.startswith("* belt-1  20")
    assert "learnt by itself" in first

    why = ("--by", "Kim", "--reason", "new belt")
    assert "a new baseline is learnt" in served.run("rebaseline", "belt", "--because", "repair", *why).out
    event = last_event(served)
    assert (event["action"], event["by"]) == ("rebaseline", "Kim")
    assert event["text"].endswith("repair: new belt")
    assert served.loop()["state"] == "learning"
    assert served.run("rebaseline", "belt", "--list").out.endswith("none is in force: a new one is learnt\n")

    served.stream(ROWS)
    served.wait_for(lambda loop: loop["baseline"] == "belt-2", what="the second baseline")
    listed = served.run("rebaseline", "belt", "--list").out
    assert [line[:8] for line in listed.splitlines()] == ["  belt-1", "* belt-2"]
    assert "repair, Kim: new belt" in listed

    assert served.run("rebaseline", "belt", "--restore", "belt-1", *why).code == 0
    assert (last_event(served)["action"], served.loop()["baseline"]) == ("restore", "belt-1")
    wrong = served.run("rebaseline", "belt", "--restore", "belt-9", *why)
    assert "there are: belt-1, belt-2" in wrong.error


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("belt",), "--because (sensor, repair, grade, retune, other)"),
        (("belt", "--because", "repair"), "only with --by and --reason"),
        (("belt", "--restore", "belt-1", "--by", "Kim"), "only with --reason"),
        (("belt", "--because", "age", "--by", "Kim", "--reason", "x"), "age"),
        (("belt", "--list", "--restore", "belt-1"), "not allowed with"),
    ],
)
def test_a_baseline_is_not_changed_in_passing(served: Served, arguments: tuple[str, ...], words: str) -> None:
    before = served.events()
    refused = served.run("rebaseline", *arguments)
    assert refused.code == 64
    assert words in refused.error
    assert served.events() == before


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("hold", "bel", "--for", "5"), "(nearest valid name 'belt')"),
        (("hold", "belt", "--for", "900d"), "up to 366 d"),
        (("ack", "belt", "--alarm", "drift"), "there is no alarm 'drift'"),
        (("note", "belt", "", "--by", "Kim"), "'text' is no text"),
        (("note", "belt", "two\nlines", "--by", "Kim"), "'text' is no text"),
        (("note", "belt", "x" * 2000, "--by", "Kim"), "1 to 1000"),
        (("hold", "belt", "--for", "5", "--by", " "), "say who you are"),
    ],
)
def test_what_makes_no_sense_is_refused_and_leaves_no_event(
    served: Served, arguments: tuple[str, ...], words: str
) -> None:
    before = served.events()
    refused = served.run(*arguments)
    assert refused.code == 64
    assert words in refused.error
    assert served.events() == before


def test_a_configuration_of_another_node_is_refused(served: Served, tmp_path: Path) -> None:
    other = tmp_path / "other.yaml"
    other.write_text(served.config.read_text().replace("test-node", "other-node"))
    before = served.events()
    refused = said("hold", "belt", "--for", "5", "--config", other)
    assert refused.code == 64
    assert "not that of 'other-node'" in refused.error
    assert served.events() == before
