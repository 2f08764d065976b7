"""From the payload of one message to readings in engineering units, whatever the format.

Whether a value is plausible is not judged here: the data checks of the loop do that.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import lru_cache

from rtid.intake import checksum, decode_csv, decode_json, decode_plain, decode_senml
from rtid.intake.decode_values import Message, Scalar, check_quality, number, scaled
from rtid.intake.reading import Reading, Rejected
from rtid.settings import Place, Signal, Source
from rtid.topics import matches

MAX_PAYLOAD = 64 * 1024  # bytes
_TOPICS_REMEMBERED = 256


class Decoder:
    """Decodes the messages of one source. Keeps nothing between two messages."""

    def __init__(self, source: Source) -> None:
        self._source = source
        self._parse = _parser(source)
        self.wanted = lru_cache(_TOPICS_REMEMBERED)(self._wanted)

    def decode(
        self, payload: bytes, *, arrival: float, topic: str | None = None
    ) -> tuple[list[Reading], list[Rejected]]:
        """Readings in the order of their times, and what was refused. Raises nothing, whatever the bytes.

        arrival: monotonic clock, s; it is the data time of formats and sources without a time of their own. A message
        on a topic that no signal wants gives nothing.
        """
        signals = self.wanted(topic)
        if not signals:
            return [], []
        try:
            messages = self._messages(payload)
        except Rejected as problem:
            return [], [problem]
        return self._readings(messages, signals, arrival)

    def _wanted(self, topic: str | None) -> tuple[Signal, ...]:
        """The signals that messages on `topic` carry; a signal without a topic belongs to every message."""
        return tuple(signal for signal in self._source.signals if _belongs(signal.place.topic, topic))

    def _messages(self, payload: bytes) -> Sequence[Message]:
        if len(payload) > MAX_PAYLOAD:
            raise Rejected("length", f"the payload has {len(payload)} bytes, at most {MAX_PAYLOAD} are read")
        return self._parse(checksum.strip(payload, self._source.checksum))

    def _readings(
        self, messages: Sequence[Message], signals: tuple[Signal, ...], arrival: float
    ) -> tuple[list[Reading], list[Rejected]]:
        readings: list[Reading] = []
        problems: list[Rejected] = []
        for message in messages:
            try:
                time = message.time(self._source.time, arrival)
            except Rejected as problem:
                problems.append(problem)
                continue
            values = _values(message, signals, problems)
            if values:
                readings.append(Reading(self._source.name, time, values, arrival))
        if not readings and not problems:
            problems.append(Rejected("missing", "the message holds none of the signals"))
        return readings, problems


def _parser(source: Source) -> Callable[[bytes], Sequence[Message]]:
    if source.decode == "csv":
        needed = decode_csv.columns_needed(_places(source))
        return lambda payload: [decode_csv.parse(payload, needed)]
    if source.decode == "json":
        return lambda payload: [decode_json.parse(payload)]
    if source.decode == "senml":
        return decode_senml.parse
    return lambda payload: [decode_plain.parse(payload)]


def _places(source: Source) -> list[Place]:
    """Every place that a message of `source` is asked for."""
    places = [signal.place for signal in source.signals]
    places += [signal.quality.place for signal in source.signals if signal.quality]
    return places + ([source.time.place] if source.time else [])


def _belongs(own_topic: str | None, topic: str | None) -> bool:
    return own_topic is None or (topic is not None and matches(own_topic, topic))


def _values(message: Message, signals: tuple[Signal, ...], problems: list[Rejected]) -> dict[str, float]:
    """The signals that the message holds in good quality; what is wrong with one is added to `problems`."""
    values = {}
    for signal in signals:
        try:
            raw = message.value(signal.place)
            if raw is not None:
                values[signal.name] = _engineering(message, signal, raw)
        except Rejected as problem:
            problems.append(Rejected(problem.kind, f"{signal.name}: {problem.text}"))
    return values


def _engineering(message: Message, signal: Signal, raw: Scalar) -> float:
    if signal.quality is not None:
        check_quality(signal.quality, message.value(signal.quality.place))
    value = number(raw)
    return value if signal.scale is None else scaled(value, signal.scale)
