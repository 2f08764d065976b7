from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtid.intake.decode_values import check_quality, excerpt, number, parse_number, scaled, seconds
from rtid.intake.reading import Rejected
from rtid.settings import Place, Quality, Scale


@pytest.mark.parametrize(("text", "value"), [("1", 1.0), ("-1.5", -1.5), ("+.5", 0.5), ("2.", 2.0), ("1e-3", 0.001)])
def test_plain_decimals_are_numbers(text: str, value: float) -> None:
    assert parse_number(text) == value


@pytest.mark.parametrize(
    "text",
    ["", " 1", "1_0", "infinity", "inf", "NaN", "0x10", "1e400", "-1e999", "\u0661", "1,5", "1e", ".", "--1", "1\n"],
)
def test_everything_else_is_refused(text: str) -> None:
    with pytest.raises(Rejected) as caught:
        parse_number(text)
    assert caught.value.kind == "number"


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_every_finite_double_survives_its_text(value: float) -> None:
    assert parse_number(repr(value)) == value


def test_a_long_run_of_digits_is_refused() -> None:
    """A pattern that backtracks would need two thousand million steps here."""
    with pytest.raises(Rejected):
        parse_number("1" * 64000 + "x")


def test_booleans_are_one_and_zero_and_text_is_no_number() -> None:
    assert (number(True), number(False), number(2.5)) == (1.0, 0.0, 2.5)
    for raw in ("1", math.inf, math.nan):
        with pytest.raises(Rejected):
            number(raw)


@pytest.mark.parametrize(
    ("raw", "unit", "expected"),
    [
        (1500.0, "ms", 1.5),
        (2e9, "ns", 2.0),
        (-3.0, "s", -3.0),
        ("1970-01-01T00:00:01.5Z", "s", 1.5),
        ("1970-01-01T01:00:00+01:00", "ms", 0.0),
        ("1970-01-02 00:00:00", "s", 86400.0),
    ],
)
def test_times(raw: float | str, unit: str, expected: float) -> None:
    assert seconds(raw, unit) == expected


@pytest.mark.parametrize("raw", [True, None, "yesterday", "1.5", math.nan, 1e308 * 10, "\u0661970-01-01", "2024-13-01"])
def test_what_is_no_time_is_refused(raw: float | str | None) -> None:
    with pytest.raises(Rejected):
        seconds(raw, "s")


@pytest.mark.parametrize(("good", "raw"), [(True, True), (True, 1.0), (True, "true"), (True, "TRUE"), (192, 192.0),
                                           ("OK", "OK"), ("1", 1.0), (False, 0.0)])
def test_good_quality_passes(good: bool | float | str, raw: bool | float | str) -> None:
    check_quality(Quality(Place(path="q"), good), raw)


@pytest.mark.parametrize(("good", "raw"), [(True, False), (True, 0.0), (True, None), (192, 0.0), ("OK", "ok"),
                                           ("OK", 1.0)])
def test_other_quality_is_rejected(good: bool | float | str, raw: bool | float | str | None) -> None:
    with pytest.raises(Rejected) as caught:
        check_quality(Quality(Place(path="q"), good), raw)
    assert caught.value.kind == "quality"


def test_scale_is_linear_and_may_fall() -> None:
    scale = Scale(raw=(0.0, 4095.0), value=(400.0, -400.0))
    assert (scaled(0.0, scale), scaled(4095.0, scale), scaled(2047.5, scale)) == (400.0, -400.0, 0.0)
    with pytest.raises(Rejected):
        scaled(1e308, Scale(raw=(0.0, 1.0), value=(0.0, 1e6)))


def test_excerpt_is_short_plain_and_on_one_line() -> None:
    text = excerpt("\u00e4\n" * 1000)
    assert text.isascii()
    assert text.isprintable()
    assert len(text) <= 40
