"""The command line as a user meets it: one line for every mistake, sysexits codes, nothing loaded that is not used."""

from __future__ import annotations

import importlib
import subprocess
import sys
from collections.abc import Callable

import pytest

from rtid import __version__
from rtid.cli import main as main_module
from rtid.cli.main import COMMANDS, main
from rtid.errors import ConfigError, MissingInput, RtidError, UsageError

NOT_IN_THIS_VERSION = ("survey", "retune", "excite", "report")


def rtid(*arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, "-m", "rtid", *arguments], capture_output=True, text=True, timeout=60)


def failing(error: BaseException) -> Callable[[object], int]:
    def run(args: object) -> int:
        raise error

    return run


@pytest.fixture
def guide_raises(monkeypatch: pytest.MonkeyPatch) -> Callable[[BaseException], None]:
    def put(error: BaseException) -> None:
        monkeypatch.setattr("rtid.cli.guide.run", failing(error))

    return put


def only_line(text: str) -> str:
    assert text.endswith("\n")
    assert text.count("\n") == 1
    assert text.startswith("rtid: ")
    return text


def test_version_is_one_line() -> None:
    done = rtid("--version")
    assert (done.returncode, done.stdout, done.stderr) == (0, f"rtid {__version__}\n", "")


def test_version_and_guide_load_neither_numpy_nor_the_clients() -> None:
    code = (
        "import sys; from rtid.cli.main import main; main(['--version']); main(['guide', 'start']);"
        "print(sorted({'numpy', 'paho', 'serial', 'yaml', 'rtid.service'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True)
    assert done.stdout.endswith("[]\n")


def test_the_entry_asks_for_one_blas_thread_and_leaves_a_wish_of_the_user(monkeypatch: pytest.MonkeyPatch) -> None:
    seen = {}
    monkeypatch.setattr(main_module, "main", lambda: seen.update(main_module.os.environ) or 0)
    monkeypatch.delenv("OPENBLAS_NUM_THREADS", raising=False)
    monkeypatch.setenv("OMP_NUM_THREADS", "3")
    assert main_module.entry() == 0
    assert (seen["OPENBLAS_NUM_THREADS"], seen["OMP_NUM_THREADS"]) == ("1", "3")


def test_help_lists_every_command_and_ends_with_an_example(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--help"]) == 0
    said = capsys.readouterr().out
    assert all(f"  {name} " in said for name in COMMANDS)
    assert said.rstrip().splitlines()[-1].startswith("  rtid ")


@pytest.mark.parametrize("name", COMMANDS)
def test_the_help_of_a_command_ends_with_an_example_of_it(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([name, "--help"]) == 0
    lines = capsys.readouterr().out.rstrip().splitlines()
    assert lines[-1].startswith(f"  rtid {name}")
    assert "example:" in lines
    assert any("--debug" in line for line in lines)


@pytest.mark.parametrize("name", COMMANDS)
def test_an_unknown_option_of_a_command_is_one_line(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([name, "--no-such-option"]) == 64
    assert f"rtid {name} --help" in only_line(capsys.readouterr().err)


@pytest.mark.parametrize("name", NOT_IN_THIS_VERSION)
def test_a_command_that_this_version_does_not_have_is_not_offered(
    name: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert name not in COMMANDS
    assert main([name, "anything", "--json"]) == 64
    said = only_line(capsys.readouterr().err)
    assert repr(name) in said
    assert ", ".join(COMMANDS) in said


def test_a_mistyped_command_gets_the_nearest_one(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["reply"]) == 64
    assert "(nearest valid name 'replay')" in only_line(capsys.readouterr().err)


@pytest.mark.parametrize("arguments", [[], ["--debug"]])
def test_no_command_is_a_usage_error(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(arguments) == 64
    assert "no command given" in capsys.readouterr().err


def test_a_global_option_stands_before_or_after_the_command(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--debug", "guide", "safety"]) == main(["guide", "safety", "--debug"]) == 0


def test_a_global_option_that_does_not_exist_is_named(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--fast", "guide"]) == 64
    assert "--fast" in only_line(capsys.readouterr().err)


@pytest.mark.parametrize("kind", [UsageError, MissingInput, ConfigError])
def test_what_a_user_can_mend_is_one_line_and_its_code(
    kind: type[RtidError], guide_raises: Callable[[BaseException], None], capsys: pytest.CaptureFixture[str]
) -> None:
    guide_raises(kind("plant.yaml:3: no such\nkey"))
    assert main(["guide"]) == kind.exit_code
    assert only_line(capsys.readouterr().err) == "rtid: plant.yaml:3: no such key\n"


def test_an_unexpected_error_is_named_in_one_line(
    guide_raises: Callable[[BaseException], None], capsys: pytest.CaptureFixture[str]
) -> None:
    guide_raises(ZeroDivisionError("a secret of ours"))
    assert main(["guide"]) == 70
    said = only_line(capsys.readouterr().err)
    assert "ZeroDivisionError: a secret of ours" in said
    assert "--debug" in said


@pytest.mark.parametrize("arguments", [["--debug", "guide"], ["guide", "--debug"]])
def test_debug_shows_the_traceback_and_keeps_the_code(
    arguments: list[str], guide_raises: Callable[[BaseException], None], capsys: pytest.CaptureFixture[str]
) -> None:
    guide_raises(MissingInput("plant.yaml: no such file"))
    assert main(arguments) == 66
    said = capsys.readouterr().err
    assert "Traceback" in said
    assert said.endswith("\nrtid: plant.yaml: no such file\n")


def test_an_interrupt_is_quiet(
    guide_raises: Callable[[BaseException], None], capsys: pytest.CaptureFixture[str]
) -> None:
    guide_raises(KeyboardInterrupt())
    assert main(["guide"]) == 130
    assert capsys.readouterr().err == ""


def test_a_reader_that_leaves_is_no_error() -> None:
    command = [sys.executable, "-m", "rtid", "guide", "configuration"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True) as child:
        assert child.stdout is not None
        assert child.stderr is not None
        child.stdout.close()
        assert child.stderr.read() == ""
        assert child.wait(60) == 0


def test_every_command_is_a_file_of_its_own() -> None:
    for name in COMMANDS:
        module = importlib.import_module(f"rtid.cli.{name}")
        assert callable(module.add)
        assert callable(module.run)
