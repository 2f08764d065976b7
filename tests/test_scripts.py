"""The set-up scripts where something is missing: one line that names the mend, exit code 69, from any folder.

Each test copies the scripts into a project of its own and runs them with a PATH of a few named tools and stub Pythons.
"""

from __future__ import annotations

import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
TOOLS_OF_THE_SYSTEM = ("sh", "dirname", "cksum", "cat", "sed", "mkdir", "chmod", "rm")

# A Python new enough whose `-m venv DIR` makes DIR/bin/python, a stub as well: what its pip does is PIP.
WORKING_PYTHON = """#!/bin/sh
case "$*" in
    *version_info*) exit 0 ;;
    *ensurepip*) exit 0 ;;
    *"-m venv"*) rm -rf "$4" && mkdir -p "$4/bin" && cat >"$4/bin/python" <<'STUB' && chmod +x "$4/bin/python" ;;
#!/bin/sh
case "$*" in
    *"import pip"*) exit 0 ;;
    *"-m pip install"*) PIP ;;
esac
STUB
esac
"""
MAKES_RTID = """cd "${0%/*}"; echo install >>log; printf '#!/bin/sh\\necho "rtid:" "$@"\\n' >rtid; chmod +x rtid"""

Script = Callable[..., subprocess.CompletedProcess[str]]


@pytest.fixture
def project(tmp_path: Path) -> Path:
    home = tmp_path / "a project"
    shutil.copytree(ROOT / "tools", home / "tools")
    shutil.copy(ROOT / "pyproject.toml", home)
    return home


@pytest.fixture
def path(tmp_path: Path) -> Path:
    folder = tmp_path / "bin"
    folder.mkdir()
    for tool in TOOLS_OF_THE_SYSTEM:
        place = shutil.which(tool)
        assert place is not None
        (folder / tool).symlink_to(place)
    return folder


@pytest.fixture
def script(project: Path, path: Path, tmp_path: Path) -> Script:
    def run(name: str, *arguments: str) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            ["sh", str(project / "tools" / name), *arguments],
            cwd=tmp_path,
            env={"PATH": str(path)},
            capture_output=True,
            text=True,
            timeout=60,
        )

    return run


def put(path: Path, name: str, body: str) -> None:
    (path / name).write_text(body)
    (path / name).chmod(0o755)


def working(pip: str) -> str:
    return WORKING_PYTHON.replace("PIP", pip)


def failure(done: subprocess.CompletedProcess[str]) -> str:
    assert done.returncode == 69
    assert done.stdout == ""
    *progress, line = done.stderr.splitlines()
    assert all(said.startswith("rtid: installing") for said in progress)
    assert line.startswith("rtid: ")
    return line


@pytest.mark.parametrize("name", ["try.sh", "test.sh", "check.sh"])
def test_no_python(script: Script, name: str) -> None:
    line = failure(script(name))
    assert "there is no python3 here" in line
    assert "apt install python3.11" in line


def test_a_python_that_is_too_old(script: Script, path: Path) -> None:
    put(path, "python3", '#!/bin/sh\ncase "$*" in *print*) echo python3 here is 3.9 ;; *) exit 1 ;; esac\n')
    line = failure(script("try.sh"))
    assert "Python 3.11 or newer" in line
    assert "python3 here is 3.9" in line


def test_a_newer_python_beside_an_old_one_is_found(script: Script, path: Path) -> None:
    put(path, "python3", "#!/bin/sh\nexit 1\n")
    put(path, "python3.12", working(MAKES_RTID))
    assert script("try.sh").returncode == 0


def test_a_python_without_its_venv_module(script: Script, path: Path) -> None:
    put(path, "python3", '#!/bin/sh\ncase "$*" in *ensurepip*) exit 1 ;; esac\n')
    assert "apt install python3-venv" in failure(script("try.sh"))


def test_a_folder_that_cannot_be_written(script: Script, path: Path) -> None:
    body = working("exit 0").replace('rm -rf "$4"', 'echo "Error: Permission denied: .venv" && exit 1')
    put(path, "python3", body)
    line = failure(script("try.sh"))
    assert "Permission denied" in line
    assert "cannot make" in line


@pytest.mark.parametrize(
    ("said", "mend"),
    [
        ("WARNING: NewConnectionError(...)", "connect this computer to the network"),
        ("ERROR: Could not find a version that satisfies hatchling", "connect this computer to the network"),
        ("ERROR: [Errno 28] No space left on device", "make room"),
        ("ERROR: the wheel is broken", "pip failed (ERROR: the wheel is broken); to see all:"),
    ],
)
def test_an_installation_that_fails(script: Script, path: Path, said: str, mend: str) -> None:
    put(path, "python3", working(f'echo "{said}" >&2; exit 1'))
    assert mend in failure(script("try.sh"))


def test_try_hands_its_options_to_the_demo_and_installs_once(script: Script, path: Path, project: Path) -> None:
    put(path, "python3", working(MAKES_RTID))
    first = script("try.sh", "--seconds", "20")
    second = script("try.sh")
    assert (first.stdout, second.stdout) == ("rtid: demo --seconds 20\n", "rtid: demo\n")
    assert first.stderr.startswith("rtid: installing into ")
    assert second.stderr == ""
    assert (project / ".venv/bin/log").read_text() == "install\n"


def test_new_requirements_are_installed_again(script: Script, path: Path, project: Path) -> None:
    put(path, "python3", working(MAKES_RTID))
    script("try.sh")
    with (project / "pyproject.toml").open("a") as file:
        file.write("# one more\n")
    script("try.sh")
    assert (project / ".venv/bin/log").read_text() == "install\ninstall\n"


def test_an_environment_whose_python_is_gone_is_made_again(script: Script, path: Path, project: Path) -> None:
    (project / ".venv/bin").mkdir(parents=True)
    (project / ".venv/bin/python").symlink_to(project / "gone")
    put(path, "python3", working(MAKES_RTID))
    assert script("try.sh").returncode == 0
