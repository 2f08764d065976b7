"""The units say what the manual promises, and what they say of their own exposure is measured."""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path

import pytest

from rtid import config
from rtid.cli.main import COMMANDS
from rtid.errors import ConfigError, MissingInput, UsageError

FOLDER = Path(__file__).parents[1] / "systemd"
ONE, SEVERAL = FOLDER / "rtid.service", FOLDER / "rtid@.service"
ANALYZE = shutil.which("systemd-analyze")

HARDENING = {
    "NoNewPrivileges", "ProtectHome", "PrivateTmp", "PrivateMounts", "ProtectHostname", "ProtectKernelTunables",
    "ProtectKernelModules", "ProtectKernelLogs", "ProtectControlGroups", "RestrictNamespaces", "RestrictRealtime",
    "RestrictSUIDSGID", "LockPersonality", "MemoryDenyWriteExecute", "DynamicUser",
}  # fmt: skip
DIFFERENT = {"Description", "ExecStart", "StateDirectory", "RuntimeDirectory", "LoadCredential"}  # one for each site

each_unit = pytest.mark.parametrize("unit", [ONE, SEVERAL], ids=lambda unit: unit.name)
with_systemd = pytest.mark.skipif(ANALYZE is None, reason="systemd-analyze is missing")


def settings(unit: Path) -> dict[str, list[str]]:
    """The values of every key, in order; sections are left out, for no key stands in two."""
    found: dict[str, list[str]] = {}
    for line in unit.read_text(encoding="utf-8").splitlines():
        if "=" in line and not line.startswith("#"):
            key, value = line.split("=", 1)
            found.setdefault(key, []).append(value)
    return found


def analyze(*arguments: str | Path) -> subprocess.CompletedProcess[str]:
    assert ANALYZE is not None
    return subprocess.run([ANALYZE, *arguments], capture_output=True, text=True, timeout=60)


@each_unit
def test_the_unit_opens_with_what_it_gives_up(unit: Path) -> None:
    opening = unit.read_text(encoding="utf-8").split("[Unit]")[0]
    assert "What it gives up" in opening
    assert re.search(r"exposure.* \d\.\d of 10", opening)


@each_unit
def test_the_unit_waits_for_readiness_and_watches_over_the_worker(unit: Path) -> None:
    said = settings(unit)
    assert said["Type"] == ["notify"]
    assert said["NotifyAccess"] == ["main"]
    assert int(said["WatchdogSec"][0]) >= 30
    assert said["Restart"] == ["on-failure"]
    assert said["StartLimitIntervalSec"] == ["0"]
    assert said["ExecReload"] == ["/bin/sh -c 'kill -HUP $MAINPID'"]
    assert said["Environment"] == ["OPENBLAS_NUM_THREADS=1"]


@each_unit
def test_what_a_person_must_mend_is_not_tried_again(unit: Path) -> None:
    codes = {int(code) for code in settings(unit)["RestartPreventExitStatus"][0].split()}
    assert codes == {error.exit_code for error in (UsageError, MissingInput, ConfigError)}


@each_unit
def test_the_unit_gives_up_what_it_does_not_need(unit: Path) -> None:
    said = settings(unit)
    assert {key for key in HARDENING if said.get(key) != ["yes"]} == set()
    assert said["CapabilityBoundingSet"] == [""]
    assert said["ProtectSystem"] == ["strict"]
    assert said["RestrictAddressFamilies"] == ["AF_UNIX AF_INET AF_INET6"]
    assert said["SystemCallFilter"][0] == "@system-service"
    assert said["SystemCallArchitectures"] == ["native"]


@each_unit
def test_the_unit_reaches_serial_ports_that_are_plugged_in_later(unit: Path) -> None:
    """A driver's name is unknown until the first adapter is plugged in, and then stays forbidden: hence 188 and 166,
    which the kernel's list of devices gives to ttyUSB and ttyACM."""
    said = settings(unit)
    assert said["SupplementaryGroups"] == ["dialout"]
    assert said["DevicePolicy"] == ["closed"]
    assert said["DeviceAllow"] == ["char-188 rw", "char-166 rw", "char-ttyAMA rw", "char-ttyS rw"]
    assert not {"PrivateDevices", "ProtectClock", "PrivateUsers"} & set(said)


def test_the_instance_differs_in_its_places_only() -> None:
    one, several = settings(ONE), settings(SEVERAL)
    assert {key for key in one.keys() | several.keys() if one.get(key) != several.get(key)} == DIFFERENT
    assert all("%i" in several[key][0] for key in DIFFERENT)


@each_unit
def test_the_unit_starts_a_command_that_exists(unit: Path) -> None:
    program, command, file = settings(unit)["ExecStart"][0].split()
    assert program == "/opt/rtid/bin/rtid"
    assert command in COMMANDS
    assert file.startswith("/etc/rtid/")


def test_the_state_directory_is_what_a_configuration_uses_under_the_unit(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("STATE_DIRECTORY", f"/var/lib/{settings(ONE)['StateDirectory'][0]}")
    assert config.load(FOLDER.parent / "config" / "conveyor-serial.yaml").state_dir == "/var/lib/rtid"


def test_the_sealed_credential_has_the_name_of_the_plain_one() -> None:
    sealed = settings(FOLDER / "rtid.credential.example")
    assert sealed["LoadCredential"] == [""]
    assert sealed["LoadCredentialEncrypted"] == settings(ONE)["LoadCredential"]


@with_systemd
@each_unit
def test_systemd_finds_no_mistake(unit: Path, tmp_path: Path) -> None:
    copy = tmp_path / unit.name.replace("@", "@site")
    copy.write_text(re.sub(r"^ExecStart=.*", "ExecStart=/bin/true", unit.read_text(), flags=re.MULTILINE))
    done = analyze("verify", copy)
    assert (done.returncode, done.stderr) == (0, "")


@with_systemd
@each_unit
def test_the_exposure_is_the_stated_one(unit: Path) -> None:
    """Other versions of systemd weigh a little differently."""
    stated = re.search(r"exposure.* (\d\.\d) of 10", unit.read_text(encoding="utf-8"))
    measured = re.search(r"exposure level .*: (\d+\.\d)", analyze("security", "--offline=true", unit).stdout)
    assert stated is not None
    assert measured is not None
    assert float(measured[1]) == pytest.approx(float(stated[1]), abs=0.3)


def test_every_rule_for_ports_is_well_formed() -> None:
    lines = (FOLDER / "70-rtid-serial.rules").read_text(encoding="utf-8").splitlines()
    rules = [line.removeprefix("#") for line in lines if re.match(r"#?SUBSYSTEM", line)]
    assert len(rules) == 2
    part = r'[A-Z]+(\{\w+\})?(==|\+=|=)"[^"]+"'
    assert all(re.fullmatch(rf"{part}(, {part})+", rule) for rule in rules)
