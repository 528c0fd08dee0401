"""The command line explains itself, starts light, and says plainly what was wrong."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from tapband import __version__
from tapband.cli import main

HEAVY = ("numpy", "scipy", "pandas", "matplotlib", "SALib", "pint", "jinja2")
COMMANDS = ("start", "check", "reduce", "rank", "compare", "forecast", "size", "schema")


def loaded_after(*arguments: str) -> set[str]:
    """Heavy packages that a fresh process has loaded after this command line."""
    code = (
        "import sys\nfrom tapband.cli import main\nmain(sys.argv[1:])\n"
        f"print('loaded:', *(name for name in {HEAVY!r} if name in sys.modules))"
    )
    run = subprocess.run([sys.executable, "-c", code, *arguments], capture_output=True, text=True, check=True)
    return set(run.stdout.splitlines()[-1].split()[1:])


@pytest.mark.parametrize("arguments", [["--version"], ["--help"], *([name, "--help"] for name in COMMANDS)])
def test_version_and_help_load_nothing_heavy(arguments: list[str]) -> None:
    assert loaded_after(*arguments) == set()


def test_the_package_itself_loads_nothing_heavy() -> None:
    code = f"import sys, tapband\nprint([name for name in {HEAVY!r} if name in sys.modules])"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout == "[]\n"


@pytest.mark.parametrize("arguments", [["--version"], ["reduce", "--version"], ["schema", "--version"]])
def test_version_is_printed_by_every_command(
    arguments: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(arguments) == 0
    assert capsys.readouterr().out == f"tapband {__version__}\n"


@pytest.mark.parametrize("command", COMMANDS)
def test_help_of_every_command_ends_with_an_example(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([command, "--help"]) == 0
    assert f"Example: tapband {command}" in capsys.readouterr().out


def test_no_command_shows_the_help_and_counts_as_bad_usage(capsys: pytest.CaptureFixture[str]) -> None:
    assert main([]) == 2
    assert "Usage: tapband" in capsys.readouterr().out


MISTAKES = [
    (["reduc", "c.toml"], "tapband: No such command 'reduc'. Did you mean 'reduce'?; see 'tapband --help'"),
    (["reduce"], "tapband reduce: Missing argument 'CAMPAIGN'; see 'tapband reduce --help'"),
    (["--verbose"], "tapband: No such option: --verbose (Possible options: --version); see 'tapband --help'"),
    (
        ["reduce", "c.toml", "--trials", "1e6"],
        '--trials: must be "auto", a whole number from 100, or "plain:N"; got "1e6"; write "auto"',
    ),
    (
        ["reduce", "c.toml", "--trials", "0"],
        '--trials: must be "auto", a whole number from 100, or "plain:N"; got "0"; write "auto"',
    ),
]


@pytest.mark.parametrize(("arguments", "message"), MISTAKES)
def test_a_mistake_in_the_command_is_one_line_on_standard_error(
    arguments: list[str], message: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(arguments) == 2
    assert capsys.readouterr() == ("", message + "\n")


@pytest.mark.parametrize(
    "arguments",
    [
        ["reduce", "c.toml", "d.toml"],
        ["reduce", "c.toml", "--figures", "gif"], ["reduce", "c.toml", "--out"], ["schema", "extra"],
        ["reduce", "--sed", "3", "c.toml"], ["check", "c.toml", "--excel"], ["start"], ["-x"],
    ],
)  # fmt: skip
def test_bad_usage_is_exit_2_in_one_line_that_names_the_help(
    arguments: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(arguments) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err.count("\n") == 1
    assert "--help'" in err


def test_schema_prints_json_schema_of_the_campaign(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["schema"]) == 0
    schema = json.loads(capsys.readouterr().out)
    assert schema["type"] == "object"
    assert "source" in schema["properties"]


def test_a_fault_of_ours_is_exit_70_with_a_traceback(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("tapband.files.schema.schema", lambda: 1 / 0)
    assert main(["schema"]) == 70
    err = capsys.readouterr().err
    assert "ZeroDivisionError" in err
    assert err.endswith("tapband: this is a fault of tapband, not of your input\n")


def test_an_interruption_is_one_line_and_exit_130(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    def interrupt() -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("tapband.files.schema.schema", interrupt)
    assert main(["schema"]) == 130
    assert capsys.readouterr() == ("", "tapband: interrupted; nothing is left half-written\n")


@pytest.mark.skipif(os.name != "posix", reason="pipes of a POSIX shell")
def test_a_reader_that_goes_away_causes_no_complaint() -> None:
    command = f'"{sys.executable}" -m tapband schema | head -c 10 >/dev/null'
    run = subprocess.run(["bash", "-c", command], capture_output=True, text=True, check=False)
    assert run.stderr == ""


def test_output_in_a_terminal_without_unicode_does_not_fail(tmp_path: Path) -> None:
    environment = {**os.environ, "PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"}
    command = [sys.executable, "-m", "tapband", "--help"]
    run = subprocess.run(command, capture_output=True, env=environment, check=False)
    assert run.returncode == 0
    assert run.stderr == b""


def test_no_color_and_pipes_get_no_escape_codes() -> None:
    command = [sys.executable, "-m", "tapband", "reduce", "--help"]
    run = subprocess.run(
        command, capture_output=True, text=True, env={**os.environ, "NO_COLOR": "1"}, check=True
    )
    assert "\x1b" not in run.stdout
