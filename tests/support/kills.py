"""A real service that is killed again and again while its plant runs on and a person acts on it."""

from __future__ import annotations

import json
import random
import signal
import socket
import threading
from collections import Counter
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from rtid import config
from rtid.cli.plant_feed import csv_line
from rtid.intake.decode import Decoder
from rtid.plants.linear import first_order, random_steps, simulate
from tests.support.plant_lines import PERIOD_S
from tests.support.process import RunningRtid
from tests.support.pty import PtyDevice
from tests.support.remembering import listed, start
from tests.support.wait import wait_until

ROWS = 16_000
CHANGE = 8000  # the row at which the plant's gain changes
KEPT_BACK = 2500  # rows that only the last run is given, which nobody kills
UNDISTURBED = slice(CHANGE - 3000, CHANGE + 1000)  # rows that tell the whole story when nobody interrupts
BURST, PAUSE_S = 8, 0.006  # rows that are sent together, and the time between
ALIVE_S = (0.0, 0.4)  # from the open port to the kill
CONFIRMED = 50  # remarks at the least; the last run waits for what a loaded machine left out
AT_START = 0.2  # share of the kills while the service starts

CONFIGURATION = """\
node: test-node
state_dir: {folder}/state
sources:
  drive:
    serial: {{port: {folder}/board}}
    decode: csv
    time: {{column: 0, unit: ms}}
    checksum: xor8
    signals: {{volts: {{column: 1, unit: V}}, speed: {{column: 2, unit: rad/s}}}}
loops:
  belt:
    inputs: [drive.volts]
    output: drive.speed
    period_s: 0.01
    model: {{order: 1, dead_time_s: [0, 0.05]}}
    memory_s: 20
    baseline: {{after_s: 8}}
"""
_OF_A_GAP = ("data_gap", "estimate_invalid")  # alarms that a gap may bring about; the kills make gaps


@dataclass
class Outcome:
    """What is left on the disk after all kills, and what was promised."""

    events: list[dict[str, Any]]
    asked: list[str]  # remarks that a person wanted to make
    answered: list[str]  # those of which the service said that they were made
    stderr: list[str] = field(default_factory=list)
    exit_code: int = -1

    def wait_for_a_confirmation(self) -> None:
        """A confirmed remark has saved the state, so that learning gets on in however short a life."""
        before = len(self.answered)
        wait_until(lambda: len(self.answered) > before, 30.0, what="a confirmed remark")


def lines(seed: int) -> list[bytes]:
    plant = first_order(2.0, 0.1, dead_time_s=0.02, noise=0.2)
    volts = random_steps(ROWS, low=2.0, high=12.0, hold=(10, 60), seed=seed)
    changes = {CHANGE: replace(plant, gain=2.8)}
    speed = simulate(plant, volts, period_s=PERIOD_S, seed=seed, changes=changes)
    return [csv_line((PERIOD_S * k, float(volts[k]), float(speed[k]))) for k in range(ROWS)]


def story(events: list[dict[str, Any]]) -> list[str]:
    """Baselines and alarms in order, without what comes from the gaps that kills make."""
    told = [event for event in events if event.get("action") == "baseline" or event.get("alarm")]
    return [
        event.get("action") or f"{event['alarm']} {event['transition']}"
        for event in told
        if event.get("alarm") not in _OF_A_GAP and event["transition"] != "updated"
    ]


def faults(outcome: Outcome, expected: list[str]) -> list[str]:
    """What is lost, twice or wrong; `expected` is the story without kills."""
    events = outcome.events
    made = Counter(event["text"] for event in events if event.get("action") == "note")
    found = {
        "the numbers of the events have a hole": [e["sequence"] for e in events] != list(range(1, len(events) + 1)),
        f"the story is {story(events)}, not {expected}": story(events) != expected,
        "a confirmed remark is lost": any(made[text] == 0 for text in outcome.answered),
        "a remark stands twice": any(times > 1 for times in made.values()),
        "a remark stands that nobody made": any(text not in outcome.asked for text in made),
        "hardly any remark was confirmed": len(outcome.answered) < CONFIRMED,
        "the service ended with a traceback": any("Traceback" in line for line in outcome.stderr),
        "a state file did not verify": any("is set aside" in line for line in outcome.stderr),
        f"the last run ended with exit code {outcome.exit_code}": outcome.exit_code != 0,
    }
    return [text for text, present in found.items() if present]


def uninterrupted(folder: Path, sent: list[bytes]) -> list[str]:
    """The story when nobody kills the service."""
    folder.mkdir()
    node = config.load(configure(folder))
    decoder = Decoder(node.sources["drive"])
    parts = start(folder / "state", replace(node, sources={}))
    for line in sent[UNDISTURBED]:
        for reading in decoder.decode(line.rstrip(), arrival=0.0)[0]:
            parts.pipeline.feed(reading, reading.time)
    return story(listed(folder / "state"))


def killed(folder: Path, sent: list[bytes], *, kills: int, seed: int) -> Outcome:
    """`kills` SIGKILLs at random moments, then a run to the end of the data."""
    chance = random.Random(seed)
    path = configure(folder)
    outcome = Outcome([], [], [])
    with PtyDevice(folder / "board") as board, Sender(board, sent) as sender:
        for _ in range(kills):
            with RunningRtid("run", path) as service:
                with Remarks(folder / "state" / "control.sock", outcome):
                    if chance.random() >= AT_START:
                        service.wait_for_line("is open", 30.0)
                        sender.allow(ROWS - KEPT_BACK)
                        outcome.wait_for_a_confirmation()
                    threading.Event().wait(chance.uniform(*ALIVE_S))
                    service.end(signal.SIGKILL)
                sender.allow(0)
            outcome.stderr += service.stderr
        with RunningRtid("run", path) as service:
            service.wait_for_line("is open", 30.0)
            sender.allow(ROWS)
            with Remarks(folder / "state" / "control.sock", outcome):
                wait_until(lambda: len(outcome.answered) >= CONFIRMED, 120.0, what="enough confirmed remarks")
            wait_until(lambda: sender.sent == ROWS, 120.0, what="the end of the data")
            outcome.exit_code = service.end(signal.SIGTERM, 20.0)
        outcome.stderr += service.stderr
    outcome.events = listed(folder / "state")
    return outcome


def configure(folder: Path) -> Path:
    path = folder / "node.yaml"
    path.write_text(CONFIGURATION.format(folder=folder))
    return path


class Sender:
    """The board: it sends its rows up to the allowed one, as far as somebody reads them."""

    def __init__(self, board: PtyDevice, sent: list[bytes]) -> None:
        self._board = board
        self._lines = sent
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._send, name="board", daemon=True)
        self._allowed = 0
        self.sent = 0

    def __enter__(self) -> Sender:
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._ended.set()
        self._thread.join()

    def allow(self, rows: int) -> None:
        self._allowed = rows

    def _send(self) -> None:
        while not self._ended.wait(PAUSE_S):
            burst = self._lines[self.sent : min(self.sent + BURST, self._allowed)]
            try:
                self._board.send(b"".join(burst))
            except BlockingIOError:  # nobody reads, for the moment
                continue
            self.sent += len(burst)


class Remarks:
    """A person who makes one remark after the other, and remembers which were confirmed."""

    def __init__(self, path: Path, outcome: Outcome) -> None:
        self._path = path
        self._outcome = outcome
        self._ended = threading.Event()
        self._thread = threading.Thread(target=self._remark, name="person", daemon=True)

    def __enter__(self) -> Remarks:
        self._thread.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._ended.set()
        self._thread.join()

    def _remark(self) -> None:
        while not self._ended.wait(0.01):
            text = f"remark {len(self._outcome.asked)}"
            self._outcome.asked.append(text)
            try:
                answer = self._ask({"do": "note", "loop": "belt", "by": "Kim", "text": text})
            except (OSError, ValueError):  # not there yet, or killed on the way
                continue
            if answer.get("ok"):
                self._outcome.answered.append(text)

    def _ask(self, request: dict[str, str]) -> dict[str, Any]:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as person:
            person.settimeout(20.0)
            person.connect(str(self._path))
            person.sendall(json.dumps(request).encode() + b"\n")
            with person.makefile("rb") as answers:
                answer: dict[str, Any] = json.loads(answers.readline())
                return answer
