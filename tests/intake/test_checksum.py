from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtid.intake.checksum import crc16, strip
from rtid.intake.reading import Rejected


def test_crc16_has_the_check_value_of_ccitt_false() -> None:
    assert crc16(b"123456789") == 0x29B1  # catalogue of parametrised CRC algorithms: CRC-16/CCITT-FALSE


def test_crc16_line() -> None:
    assert strip(b"123456789*29b1", "crc16") == b"123456789"


def test_xor8_line() -> None:
    """The well-known example sentence of NMEA 0183, without its dollar sign."""
    body = b"GPGGA,123519,4807.038,N,01131.000,E,1,08,0.9,545.4,M,46.9,M,,"
    assert strip(body + b"*47", "xor8") == body


def test_without_checksum_the_line_stays_as_it_is() -> None:
    assert strip(b"1,2*3", "none") == b"1,2*3"


@pytest.mark.parametrize("line", [b"", b"1,2", b"1,2*", b"1,2*4", b"1,2*GG", b"1,2*1F1F", b"1,2*0x", b"*", b"1,2*+1"])
def test_missing_or_malformed_checksum_is_rejected(line: bytes) -> None:
    with pytest.raises(Rejected) as caught:
        strip(line, "xor8")
    assert caught.value.kind == "checksum"


@given(st.binary(min_size=1, max_size=60), st.data())
def test_crc16_finds_every_single_flipped_bit(body: bytes, data: st.DataObject) -> None:
    place = data.draw(st.integers(0, len(body) - 1))
    flipped = bytearray(body)
    flipped[place] ^= 1 << data.draw(st.integers(0, 7))
    digits = f"*{crc16(body):04X}".encode()
    assert strip(body + digits, "crc16") == body
    with pytest.raises(Rejected):
        strip(bytes(flipped) + digits, "crc16")
