"""Checksums of a text line: `body*HH` or `body*HHHH`, hexadecimal, computed over all bytes before the last `*`.

- xor8: exclusive or of all bytes, two digits. As in NMEA 0183, except that no leading `$` is expected or left out.
- crc16: CRC-16/CCITT-FALSE (polynomial 0x1021, start 0xFFFF, not reflected, no final exclusive or), four digits,
  high byte first. Its check value, over the text `123456789`, is 29B1.
"""

from __future__ import annotations

import binascii
import re
from functools import reduce
from operator import xor

from rtid.intake.reading import Rejected
from rtid.settings import Checksum

_HEX = {"xor8": re.compile(rb"[0-9A-Fa-f]{2}"), "crc16": re.compile(rb"[0-9A-Fa-f]{4}")}


def strip(line: bytes, kind: Checksum) -> bytes:
    """The line without its checksum. Raises Rejected('checksum') when it is missing or wrong."""
    if kind == "none":
        return line
    body, _, digits = line.rstrip().rpartition(b"*")
    if not _HEX[kind].fullmatch(digits):
        raise Rejected("checksum", f"no {kind} checksum at the end of the line")
    computed = xor8(body) if kind == "xor8" else crc16(body)
    if int(digits, 16) != computed:
        text = f"{kind} checksum {digits.decode()} is wrong, the line gives {computed:0{len(digits)}X}"
        raise Rejected("checksum", text)
    return body


def xor8(body: bytes) -> int:
    return reduce(xor, body, 0)


def crc16(body: bytes) -> int:
    return binascii.crc_hqx(body, 0xFFFF)
