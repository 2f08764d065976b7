"""The bar is drawn on a terminal, and nowhere else."""

from __future__ import annotations

import io

from rtid.cli.progress import Progress


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_nothing_is_written_where_there_is_no_terminal() -> None:
    stream = io.StringIO()
    progress = Progress(lambda: 0.5, stream=stream, monotonic=iter(range(10)).__next__)
    progress.update(100)
    progress.close()
    assert not stream.getvalue()


def test_a_terminal_shows_share_and_rate_and_is_left_clean() -> None:
    stream = Terminal()
    progress = Progress(lambda: 0.5, stream=stream, monotonic=iter([0.0, 2.0, 2.0]).__next__)
    progress.update(5000)
    assert "[###############...............]  50 %  2,500 rows/s" in stream.getvalue()
    progress.close()
    assert stream.getvalue().endswith("\r\x1b[K")


def test_it_is_not_drawn_more_than_ten_times_a_second() -> None:
    stream = Terminal()
    ticks = iter([0.0, *(0.01 * k for k in range(1, 1000))])
    progress = Progress(lambda: 0.1, stream=stream, monotonic=lambda: next(ticks))
    for count in range(300):
        progress.update(count)
    assert stream.getvalue().count("\r") <= 35
