"""How a recorded CSV file is written: separator, decimal sign, times. The contract's own layout is the default."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime

from rtid.errors import UsageError
from rtid.intake.decode_values import excerpt, parse_number
from rtid.intake.reading import Rejected


@dataclass(frozen=True, slots=True)
class CsvLayout:
    """Fields are split at every separator: there is no quoting.

    time_format: as for `datetime.strptime`; None: the time is a number of seconds. Times without an offset are taken
    as UTC, because local time jumps twice a year. Raises UsageError when the parts contradict each other.
    """

    separator: str = ","
    decimal: str = "."
    time_format: str | None = None
    time_column: str = "time_s"

    def __post_init__(self) -> None:
        if len(self.separator) != 1 or self.separator in "\r\n":
            raise UsageError(f"the separator must be one character, not {self.separator!r}")
        if self.decimal not in (".", ","):
            raise UsageError(f"the decimal sign must be . or , and not {self.decimal!r}")
        if self.separator == self.decimal:
            raise UsageError(f"separator and decimal sign are both {self.decimal!r}; declare another separator")
        if self.time_format is not None:
            _check_time_format(self.time_format)

    def split(self, line: bytes) -> list[str]:
        """The fields of a line, without the blanks around them."""
        text = line.decode("utf-8", errors="replace").rstrip("\r\n")
        return [field.strip() for field in text.split(self.separator)]

    def number(self, text: str) -> float:
        """Raises Rejected('number') unless `text` is a finite plain ASCII decimal."""
        if self.decimal == ",":
            if "." in text:
                raise Rejected("number", f"{excerpt(text)} is not a number with a decimal comma")
            text = text.replace(",", ".")
        return parse_number(text)

    def seconds(self, text: str) -> float:
        """Raises Rejected('time')."""
        try:
            return self.number(text) if self.time_format is None else _moment(text, self.time_format)
        except ValueError:  # Rejected is one too
            expected = "a number of seconds" if self.time_format is None else self.time_format
            raise Rejected("time", f"the time {excerpt(text)} is not {expected}") from None


def _moment(text: str, time_format: str) -> float:
    if not text.isascii():
        raise ValueError
    moment = datetime.strptime(text, time_format)
    return (moment if moment.tzinfo else moment.replace(tzinfo=UTC)).timestamp()


def _check_time_format(time_format: str) -> None:
    try:
        datetime.strptime("", time_format)
    except ValueError as error:
        if "bad directive" in str(error) or "stray %" in str(error):
            raise UsageError(f"the time format {time_format!r} is wrong: {error}") from None
