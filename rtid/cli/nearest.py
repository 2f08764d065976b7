"""The valid name that a mistyped one was most likely meant to be."""

from __future__ import annotations

import difflib
from collections.abc import Iterable


def nearest(word: str, names: Iterable[str]) -> str:
    return difflib.get_close_matches(word, list(names), n=1, cutoff=0.0)[0]
