"""Making output files, with errors of one line that name the place and the mend."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any, TextIO

from rtid.errors import CannotCreate, InputOutputError


def create(path: Path) -> TextIO:
    """An empty text file, open for writing. Raises CannotCreate."""
    try:
        return path.open("w", encoding="utf-8", newline="\n")
    except OSError as error:
        raise cannot_create(path, error) from None


def write_json(path: str | os.PathLike[str], document: Mapping[str, Any]) -> None:
    """One JSON document, indented for people. Raises CannotCreate or InputOutputError."""
    text = json.dumps(document, allow_nan=False, indent=1, ensure_ascii=False) + "\n"
    place = Path(path)
    file = create(place)
    try:
        with file:
            file.write(text)
    except OSError as error:
        raise cannot_write(place, error) from None


def cannot_create(path: Path, error: OSError) -> CannotCreate:
    return CannotCreate(f"{path}: cannot be created ({error.strerror}); choose a folder that exists and can be written")


def cannot_write(path: Path, error: OSError) -> InputOutputError:
    return InputOutputError(f"{path}: cannot be written ({error.strerror}); make room on the disk or mend it")
