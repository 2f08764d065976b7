"""The valid names in place of a mistyped one, for the end of an error message."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

_MOST_LISTED = 20  # a longer list helps nobody
_MOST_COMPARED = 60  # characters of the mistyped name
_LIKENESS = 0.5


def one_of(name: str, valid: Iterable[str]) -> str:
    """'one of a, b, c (nearest valid name 'b')', as far as it helps."""
    names = tuple(valid)
    near = difflib.get_close_matches(name[:_MOST_COMPARED], names, n=1, cutoff=_LIKENESS)
    listed = f"one of {', '.join(names)}" if len(names) <= _MOST_LISTED else f"one of {len(names)} names"
    return f"{listed} (nearest valid name '{near[0]}')" if near else listed
