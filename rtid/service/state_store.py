"""The state files of one loop: the present one, the one before it, and those that were set aside.

In the folder: `<loop>.json`, `<loop>.previous.json`, `<loop>.TIME.bad.json` (does not verify), `<loop>.TIME.old.json`
(of another plant under the same name).
"""

from __future__ import annotations

import contextlib
import logging
import os
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypeVar

from rtid.actions import ActionRefused
from rtid.errors import InputOutputError
from rtid.service import sealed

STATE = sealed.Kind("rtid/state", 1)
MOST_ASIDE = 10  # of one loop and kind; older ones go

log = logging.getLogger("rtid.service")
Made = TypeVar("Made")


class StateStore:
    """`save` and `restore` the state of one loop in `folder`, which need not exist yet."""

    def __init__(self, folder: Path, loop: str, *, kind: sealed.Kind = STATE) -> None:
        self._folder = folder
        self._loop = loop
        self._kind = kind
        self.present = folder / f"{loop}.json"
        self.previous = folder / f"{loop}.previous.json"

    def save(self, body: dict[str, Any]) -> None:
        """Raises InputOutputError; what was there before is still there then."""
        sealed.write(self.present, sealed.seal(body, self._kind), keep=self.previous)

    def restore(self, make: Callable[[dict[str, Any]], Made]) -> Made | None:
        """What `make` makes of the newest body that is good for it; None when there is none.

        A file that does not verify is set aside. Raises ActionRefused when the state is that of another plant, after
        a copy of it was kept.
        """
        for path in (self.present, self.previous):
            try:
                return make(sealed.unseal(path.read_bytes(), self._kind))
            except FileNotFoundError:
                continue
            except ActionRefused:
                self.keep_old(path)
                raise
            except OSError as error:
                log.warning("%s: cannot be read (%s)", path, error.strerror)
            except sealed.NotUsable as problem:
                self._set_aside(path, str(problem))
            except (KeyError, TypeError, ValueError, AttributeError, IndexError) as error:
                self._set_aside(path, f"does not fit this rtid ({type(error).__name__}: {error})")
        return None

    def keep_old(self, path: Path) -> None:
        """Copy a good state that will not be gone on from."""
        aside = self._name_aside("old")
        try:
            sealed.write(aside, path.read_bytes())
        except FileNotFoundError:  # this loop was never saved
            return
        except (OSError, InputOutputError) as error:
            log.warning("%s: the old state cannot be kept: %s", path, error)
            return
        log.warning("%s: the old state is kept as %s", path, aside.name)
        self._forget_oldest("old")

    def _set_aside(self, path: Path, problem: str) -> None:
        aside = self._name_aside("bad")
        try:
            os.replace(path, aside)
        except OSError as error:
            log.warning("%s %s; it cannot be set aside (%s)", path, problem, error.strerror)
            return
        log.warning("%s %s; it is set aside as %s", path, problem, aside.name)
        self._forget_oldest("bad")

    def _name_aside(self, why: str) -> Path:
        return self._folder / f"{self._loop}.{datetime.now(UTC):%Y%m%dT%H%M%S.%fZ}.{why}.json"

    def _forget_oldest(self, why: str) -> None:
        for path in sorted(self._folder.glob(f"{self._loop}.*.{why}.json"))[:-MOST_ASIDE]:
            with contextlib.suppress(OSError):
                path.unlink()
                log.warning("%s: removed, %d newer ones are kept", path, MOST_ASIDE)
