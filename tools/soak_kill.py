"""Kills the real service for as long as you like and looks whether anything was lost. Linux only.

    python tools/soak_kill.py [KILLS] [SEED]

KILLS (default 500) come in rounds of 50, each a plant of its own that is learnt and then changes. After every round the
event list is compared with what was promised, and the state file is cut at every length and every one of 2000 bits is
flipped in turn: none of these may be taken for good. Exit code 0 when all of it held.
"""

from __future__ import annotations

import logging
import random
import sys
import tempfile
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from rtid.service import sealed
from rtid.service.state_store import STATE
from tests.support.kills import faults, killed, lines, uninterrupted

ROUND = 50
FLIPS = 2000


def main() -> int:
    logging.getLogger("rtid").setLevel(logging.CRITICAL)  # of the runs inside this process
    kills = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    first = int(sys.argv[2]) if len(sys.argv) > 2 else 1
    found = []
    for seed in range(first, first + -(-kills // ROUND)):
        with tempfile.TemporaryDirectory(prefix="rtid-soak-") as name:
            said = _round(Path(name), seed)
        print(f"seed {seed}, {ROUND} kills: {'; '.join(said) or 'nothing lost, nothing twice'}", flush=True)
        found += said
    return 1 if found else 0


def _round(folder: Path, seed: int) -> list[str]:
    sent = lines(seed)
    outcome = killed(folder, sent, kills=ROUND, seed=seed)
    said = faults(outcome, uninterrupted(folder / "uninterrupted", sent))
    content = (folder / "state" / "loops" / "belt.json").read_bytes()
    if not _usable(content):
        return [*said, "the state file does not verify"]
    cuts = [length for length in range(len(content)) if _usable(content[:length])]
    flips = [bit for bit in _bits(len(content), seed) if _usable(_flipped(content, bit))]
    return said + [f"taken though cut at {cuts}" for _ in cuts[:1]] + [f"taken with bits {flips}" for _ in flips[:1]]


def _bits(size: int, seed: int) -> list[int]:
    return random.Random(seed).sample(range(8 * size), FLIPS)


def _flipped(content: bytes, bit: int) -> bytes:
    damaged = bytearray(content)
    damaged[bit // 8] ^= 1 << bit % 8
    return bytes(damaged)


def _usable(content: bytes) -> bool:
    try:
        sealed.unseal(content, STATE)
    except sealed.NotUsable:
        return False
    return True


if __name__ == "__main__":
    sys.exit(main())
