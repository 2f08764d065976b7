"""The plant simulator for installers: a port, and a configuration that reads it."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

from rtid import config
from tests.support.process import ENVIRONMENT, ROOT, RunningRtid


def test_the_printed_configuration_reads_the_plant(tmp_path: Path) -> None:
    link, path = tmp_path / "plant", tmp_path / "node.yaml"
    command = [sys.executable, str(ROOT / "tools" / "plant_port.py"), "--link", str(link), "--seed", "3"]
    with subprocess.Popen(command, env=ENVIRONMENT, stdout=subprocess.PIPE, text=True) as plant:
        assert plant.stdout is not None
        lines = [plant.stdout.readline()]
        while "alarms:" not in lines[-1]:
            lines.append(plant.stdout.readline())
        path.write_text("".join(lines))
        serial = config.load(path).sources["drive"].serial
        assert serial is not None
        assert serial.port == str(link)
        with RunningRtid("listen", path) as listening:
            listening.wait_for_line("rad/s")
        plant.terminate()
        assert plant.wait(timeout=5.0) == 0
    assert not link.is_symlink()
