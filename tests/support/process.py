"""The real command in a process of its own."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import threading
from collections.abc import Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Self

from tests.support.wait import wait_until

ROOT = Path(__file__).resolve().parents[2]
ENVIRONMENT = {
    **os.environ,
    "PYTHONPATH": os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")]),
    "OPENBLAS_NUM_THREADS": "1",
    "PYTHONUNBUFFERED": "1",
}


def rtid(
    *arguments: str | Path, timeout: float = 60.0, variables: Mapping[str, str] | None = None
) -> subprocess.CompletedProcess[str]:
    """Run a command to its end, with some more environment variables."""
    environment = ENVIRONMENT | dict(variables or {})
    return subprocess.run(_command(arguments), env=environment, capture_output=True, text=True, timeout=timeout)


class RunningRtid:
    """`with RunningRtid("run", path) as process:` - its stderr and stdout are collected line by line."""

    def __init__(self, *arguments: str | Path, variables: Mapping[str, str] | None = None) -> None:
        self._arguments = arguments
        self._environment = ENVIRONMENT | dict(variables or {})
        self.stdout: list[str] = []
        self.stderr: list[str] = []

    def __enter__(self) -> Self:
        self._process = subprocess.Popen(
            _command(self._arguments),
            env=self._environment,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        self._readers = [
            threading.Thread(target=kept.extend, args=(stream,), daemon=True)
            for kept, stream in ((self.stdout, self._process.stdout), (self.stderr, self._process.stderr))
        ]
        for reader in self._readers:
            reader.start()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self._process.kill()
        for reader in self._readers:
            reader.join()
        with self._process:  # closes its pipes and waits for it
            pass
        if error is not None:
            error.add_note(f"exit code {self._process.returncode}, stderr:\n{''.join(self.stderr)}")

    @property
    def pid(self) -> int:
        return self._process.pid

    def wait_for_line(self, words: str, seconds: float = 10.0) -> None:
        """Until a line on stderr or stdout holds `words`."""
        wait_until(
            lambda: self._said(words) or self._process.poll() is not None, seconds, what=f"a line with {words!r}"
        )
        assert self._said(words), f"the process ended without {words!r}: {''.join(self.stderr)}"

    def _said(self, words: str) -> bool:
        return any(words in line for line in (*self.stderr, *self.stdout))

    def end(self, number: signal.Signals = signal.SIGTERM, seconds: float = 5.0) -> int:
        """Send a signal and wait for the exit code: at most as long as the service may take."""
        self._process.send_signal(number)
        return self.ended(seconds)

    def ended(self, seconds: float = 5.0) -> int:
        """Wait for the exit code of a process that ends by itself."""
        code = self._process.wait(timeout=seconds)
        for reader in self._readers:
            reader.join()
        return code


def _command(arguments: Sequence[str | Path]) -> list[str]:
    return [sys.executable, "-m", "rtid", *(str(argument) for argument in arguments)]
