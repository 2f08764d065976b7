"""A document of state on disk: it says what it is and which program wrote it, and proves that no bit of it was lost.

`{"schema":"KIND/NUMBER","version":"…","sha256":"…","body":{…}}`, where the SHA-256 is that of all bytes of the file
but its own 64 digits.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rtid import __version__
from rtid.publish.files import cannot_write
from rtid.service.codec import decode, encode

Migration = Callable[[Any], Any]  # the JSON body of one schema number into that of the next

_HEAD = re.compile(
    rb'\{"schema":"(?P<kind>[a-z/]+)/(?P<number>[0-9]{1,6})","version":"[^"]*","sha256":"(?P<seal>[0-9a-f]{64})","body":'
)
_NO_SEAL = "0" * 64


class NotUsable(ValueError):
    """Why a document is not to be trusted, in words that go on from its name."""


@dataclass(frozen=True, slots=True)
class Kind:
    """What documents of this kind are called, the schema number of now, and the steps that lead to it."""

    name: str
    number: int
    migrations: Mapping[int, Migration] = field(default_factory=dict)


def seal(body: Any, kind: Kind) -> bytes:
    """The document. `body` may hold whatever `codec.encode` knows."""
    head = {"schema": f"{kind.name}/{kind.number}", "version": __version__, "sha256": _NO_SEAL, "body": encode(body)}
    content = json.dumps(head, allow_nan=False, separators=(",", ":")).encode("ascii")
    found = _HEAD.match(content)
    assert found is not None, "the head of a sealed document is as its pattern says"
    digest = hashlib.sha256(_without_seal(content, found)).hexdigest().encode("ascii")
    return content[: found.start("seal")] + digest + content[found.end("seal") :]


def unseal(content: bytes, kind: Kind) -> Any:
    """The body, of an older schema number brought up to the present one. Raises NotUsable."""
    found = _HEAD.match(content)
    if found is None or found["kind"].decode("ascii") != kind.name:
        raise NotUsable(f"is no {kind.name} document, or its head is damaged")
    digest = hashlib.sha256(_without_seal(content, found)).hexdigest()
    if digest.encode("ascii") != found["seal"]:
        raise NotUsable("is damaged: its checksum does not agree")
    return _read_body(json.loads(content)["body"], int(found["number"]), kind)


def write(path: Path, content: bytes, *, keep: Path | None = None) -> None:
    """Put `content` on the disk under `path`: there is the old file or the new one, whole, whenever the power fails.

    The old one goes to `keep`; between the two renames only `keep` is there. Raises InputOutputError.
    """
    fresh = path.with_name(path.name + ".new")
    try:
        path.parent.mkdir(exist_ok=True)
        _write_through(fresh, content)
        if keep is not None and path.exists():
            os.replace(path, keep)
        os.replace(fresh, path)
        _settle(path.parent)
    except OSError as error:
        with contextlib.suppress(OSError):
            fresh.unlink(missing_ok=True)
        raise cannot_write(path, error) from None


def _without_seal(content: bytes, found: re.Match[bytes]) -> bytes:
    return content[: found.start("seal")] + content[found.end("seal") :]


def _read_body(body: Any, number: int, kind: Kind) -> Any:
    if number > kind.number:
        raise NotUsable(f"is of schema {kind.name}/{number}: a newer rtid wrote it, this one knows {kind.number}")
    try:
        for step in range(number, kind.number):
            body = kind.migrations[step](body)
        return decode(body)
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise NotUsable(f"is of schema {kind.name}/{number} and cannot be read ({type(error).__name__})") from None


def _write_through(path: Path, content: bytes) -> None:
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_TRUNC, 0o644)
    try:
        rest = memoryview(content)
        while rest:
            rest = rest[os.write(descriptor, rest) :]
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _settle(folder: Path) -> None:
    """A rename is on the disk only when the folder is."""
    descriptor = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)
