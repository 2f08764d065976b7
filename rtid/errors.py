"""The one tree of errors. What a user can mend is an RtidError; it ends as one line on stderr and a sysexits code.

RtidError
├── UsageError        64  the command line is wrong
├── DataError         65  recorded data cannot be read
├── MissingInput      66  a named file does not exist
├── Unavailable       69  a service, port or optional package is not there
├── CannotCreate      73  an output file or folder cannot be made
├── InputOutputError  74  reading or writing failed
└── ConfigError       78  the configuration is wrong (its text begins with file:line)
"""

from __future__ import annotations

from typing import ClassVar


class RtidError(Exception):
    """Something that the user can mend. `str(error)` is one line: what, where, and the mend."""

    exit_code: ClassVar[int] = 70


class UsageError(RtidError):
    exit_code = 64


class DataError(RtidError):
    exit_code = 65


class MissingInput(RtidError):
    exit_code = 66


class Unavailable(RtidError):
    exit_code = 69


class CannotCreate(RtidError):
    exit_code = 73


class InputOutputError(RtidError):
    exit_code = 74


class ConfigError(RtidError):
    exit_code = 78
