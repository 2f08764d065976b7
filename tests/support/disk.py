"""Disks that refuse: one that is full, one that can only be read."""

from __future__ import annotations

import os
import resource
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest


@contextmanager
def full_disk() -> Iterator[None]:
    """Every write of this process to a file fails, as on a full disk."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (0, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


@contextmanager
def small_disk(folder: Path, kib: int) -> Iterator[None]:
    """`folder` is a file system of its own with that much room. Skips the test where it cannot be mounted."""
    _mount(folder, f"size={kib}k")
    try:
        yield
    finally:
        subprocess.run(["umount", str(folder)], check=True)


@contextmanager
def read_only(folder: Path) -> Iterator[None]:
    """`folder` can be read and not written. Skips the test where root cannot mount."""
    if os.geteuid() == 0:
        _mount(folder, "ro")
        try:
            yield
        finally:
            subprocess.run(["umount", str(folder)], check=True)
        return
    folder.chmod(0o555)
    try:
        yield
    finally:
        folder.chmod(0o755)


def _mount(folder: Path, options: str) -> None:
    command = ["mount", "-t", "tmpfs", "-o", options, "tmpfs", str(folder)]
    try:
        done = subprocess.run(command, capture_output=True, text=True)
    except FileNotFoundError:
        pytest.skip("there is no mount here")
    if done.returncode != 0:
        pytest.skip(f"nothing can be mounted here: {done.stderr.strip()}")
