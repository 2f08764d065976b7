from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from rtid.intake.framing import LineFramer


def opened(max_bytes: int = 4096) -> LineFramer:
    """A framer that has passed its first newline."""
    framer = LineFramer(max_bytes)
    framer.feed(b"\n")
    return framer


def test_lines_end_with_either_terminator() -> None:
    assert opened().feed(b"1,2\n3,4\r\n5") == [b"1,2", b"3,4"]


def test_first_fragment_after_opening_is_dropped_and_counted() -> None:
    framer = LineFramer()
    assert framer.feed(b"9,8\n1,2\n") == [b"1,2"]
    assert framer.discarded == 3


def test_terminator_may_be_split() -> None:
    framer = opened()
    assert framer.feed(b"1,2\r") == []
    assert framer.feed(b"\n") == [b"1,2"]


def test_empty_lines_are_skipped() -> None:
    assert opened().feed(b"\n\r\n1\n\n") == [b"1"]


def test_reset_drops_what_waits_up_to_the_next_newline() -> None:
    framer = opened()
    framer.feed(b"1,")
    framer.reset()
    assert framer.feed(b"2\n3\n") == [b"3"]


def test_overlong_line_is_dropped_whole_and_the_next_one_is_used() -> None:
    framer = opened(max_bytes=4)
    assert framer.feed(b"12345678\n1234\n") == [b"1234"]
    assert (framer.overlong, framer.discarded) == (1, 8)


def test_endless_line_takes_no_memory() -> None:
    framer = opened(max_bytes=10)
    for _ in range(1000):
        framer.feed(b"x" * 100)
    assert len(framer._buffer) == 0
    assert framer.overlong == 1


@given(st.lists(st.sampled_from([b"a", b"bc", b"\n", b"\r\n", b"\r", b"\x00\xff", b"defgh"]), max_size=40), st.data())
def test_any_split_gives_the_same_lines(pieces: list[bytes], data: st.DataObject) -> None:
    stream = b"".join(pieces)
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=10)))
    whole, split = LineFramer(max_bytes=6), LineFramer(max_bytes=6)
    expected = whole.feed(stream)
    got = [line for begin, end in zip([0, *cuts], [*cuts, None], strict=True) for line in split.feed(stream[begin:end])]
    assert got == expected
    assert (split.overlong, split.discarded) == (whole.overlong, whole.discarded)
