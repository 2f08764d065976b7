"""Making output files, with errors of one line that name the place and the mend."""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any, TextIO

from rtid.errors import CannotCreate, InputOutputError


def create(path: Path, *, meant: Path | None = None) -> TextIO:
    """An empty text file, open for writing. Raises CannotCreate, which names the file that is `meant` in the end."""
    try:
        return path.open("w", encoding="utf-8", newline="\n")
    except OSError as error:
        raise cannot_create(meant or path, error) from None


def write_json(path: str | os.PathLike[str], document: Mapping[str, Any]) -> None:
    """One JSON document, indented for people, in one step: nobody ever finds half of it under its name.

    A device or a pipe is written to as it is. Raises CannotCreate or InputOutputError.
    """
    text = json.dumps(document, allow_nan=False, indent=1, ensure_ascii=False) + "\n"
    place = Path(path).resolve()
    direct = place.exists() and not place.is_file()
    fresh = place if direct else place.with_name(place.name + ".new")
    file = create(fresh, meant=place)
    try:
        with file:
            file.write(text)
        if not direct:
            os.replace(fresh, place)
    except OSError as error:
        if not direct:
            fresh.unlink(missing_ok=True)
        raise cannot_write(place, error) from None


def cannot_create(path: Path, error: OSError) -> CannotCreate:
    return CannotCreate(f"{path}: cannot be created ({error.strerror}); choose a folder that exists and can be written")


def cannot_write(path: Path, error: OSError) -> InputOutputError:
    return InputOutputError(f"{path}: cannot be written ({error.strerror}); make room on the disk or mend it")
