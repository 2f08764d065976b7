"""Prints how long the service takes to start and how much memory it holds, on this machine.

    python tools/footprint.py [SECONDS]

The service watches a simulated plant on a pseudo-terminal for SECONDS (default 20). Linux only.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from pathlib import Path

from rtid.cli.demo_configuration import PERIOD_S, configuration
from rtid.cli.plant_feed import PlantFeed
from rtid.plants.conveyor import Conveyor

KIB_PER_MIB = 1024.0


def main() -> int:
    seconds = float(sys.argv[1]) if len(sys.argv) > 1 else 20.0
    with tempfile.TemporaryDirectory() as name, PlantFeed(Conveyor(seed=1).row, period_s=PERIOD_S) as feed:
        path = Path(name, "node.yaml")
        path.write_text(configuration(feed.port, state_dir=Path(name, "state"), baseline_s=10.0), encoding="utf-8")
        feed.start()
        begin = time.monotonic()
        command = [sys.executable, "-m", "rtid", "run", str(path)]
        process = subprocess.Popen(command, stderr=subprocess.PIPE, text=True)
        assert process.stderr is not None
        first = process.stderr.readline()
        print(f"first log line after {time.monotonic() - begin:.2f} s: {first.strip()}")
        time.sleep(seconds)
        memory, used = resident_mib(process.pid), cpu_s(process.pid)
        print(f"after {seconds:g} s: {memory:.1f} MiB resident, {used:.2f} s of processor time")
        process.terminate()
        return process.wait()


def resident_mib(pid: int) -> float:
    lines = Path(f"/proc/{pid}/status").read_text(encoding="ascii", errors="replace").splitlines()
    return next(float(line.split()[1]) for line in lines if line.startswith("VmRSS:")) / KIB_PER_MIB


def cpu_s(pid: int) -> float:
    """User and system time, in seconds (fields 14 and 15 of /proc/PID/stat, in hundredths)."""
    fields = Path(f"/proc/{pid}/stat").read_text(encoding="ascii", errors="replace").rpartition(")")[2].split()
    return (float(fields[11]) + float(fields[12])) / 100.0


if __name__ == "__main__":
    sys.exit(main())
