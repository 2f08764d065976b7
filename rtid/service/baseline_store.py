"""Every baseline in a file of its own, `<loop>-<number>.json`: it outlives whatever becomes of the state."""

from __future__ import annotations

import logging
import re
from pathlib import Path
from typing import Any

from rtid.judge.baselines import AcceptedBaseline
from rtid.service import sealed

BASELINE = sealed.Kind("rtid/baseline", 1)

log = logging.getLogger("rtid.service")


class BaselineStore:
    """The baselines of one loop in `folder`. `plant` says which plant they are of: other plants' are not given out."""

    def __init__(self, folder: Path, loop: str, plant: list[Any]) -> None:
        self._folder = folder
        self._loop = loop
        self._plant = plant
        self._kept: set[str] = set()

    def keep(self, accepted: AcceptedBaseline) -> None:
        """Write it unless it is there. Raises InputOutputError."""
        if accepted.identity in self._kept:
            return
        path = self._path(accepted.identity)
        content = sealed.seal({"plant": self._plant, "accepted": accepted}, BASELINE)
        if _content(path) != content:
            sealed.write(path, content)
        self._kept.add(accepted.identity)

    def get(self, identity: str) -> AcceptedBaseline | None:
        """None, said in the log, when it is not there, does not verify or is that of another plant."""
        path = self._path(identity)
        try:
            body = sealed.unseal(path.read_bytes(), BASELINE)
        except (OSError, sealed.NotUsable) as problem:
            log.warning("%s: baseline %s cannot be had: %s", path, identity, problem)
            return None
        if body["plant"] != self._plant:
            log.warning("%s: baseline %s is that of another plant under this name", path, identity)
            return None
        accepted: AcceptedBaseline = body["accepted"]
        return accepted

    @property
    def last_number(self) -> int:
        """The highest number that a file bears; 0 when there is none."""
        pattern = re.compile(re.escape(self._loop) + r"-([0-9]{1,9})\.json")
        found = (pattern.fullmatch(path.name) for path in self._folder.glob(f"{self._loop}-*.json"))
        return max((int(match[1]) for match in found if match), default=0)

    def _path(self, identity: str) -> Path:
        return self._folder / f"{identity}.json"


def _content(path: Path) -> bytes | None:
    try:
        return path.read_bytes()
    except OSError:
        return None
