"""What the command line tells, with which exit code, and how it takes an interruption."""

from __future__ import annotations

import io
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from click.testing import CliRunner
from rich.console import Console

import rayloom
from rayloom.cli import main
from rayloom.cli.console import BarReporter, LineReporter
from rayloom.cli.teaching import keep_examples
from run_folder_cases import write_run_folder, write_small_survey

COMMANDS = (
    "demo",
    "init",
    "check",
    "run",
    "residuals",
    "invert",
    "tradeoff",
    "compare",
    "appraise",
    "bodies",
    "export",
    "import-model",
    "ratio",
)


def test_version() -> None:
    result = CliRunner().invoke(main, ["--version"])
    assert result.exit_code == 0
    assert rayloom.__version__ in result.output


def test_help_lists_the_commands_in_the_order_of_the_work() -> None:
    result = CliRunner().invoke(main, ["--help"])
    listed = result.output.split("Commands:")[1].split("\n")
    assert [line.split()[0] for line in listed if line.strip()] == list(COMMANDS)


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_teaches(command: str) -> None:
    result = CliRunner().invoke(main, [command, "--help"])
    assert result.exit_code == 0
    assert f"  rayloom {command}" in result.output or f"Example: rayloom {command}" in (
        result.output
    )
    assert "write" in result.output.lower()


def test_examples_are_kept_as_written() -> None:
    assert keep_examples("First.\n\nExample: one\n\nPlain\ntext.\n\nList:\n  a\n  b") == (
        "First.\n\n\b\nExample: one\n\nPlain\ntext.\n\n\b\nList:\n  a\n  b"
    )


def test_plain_lines_are_rate_limited(capsys: pytest.CaptureFixture[str]) -> None:
    quiet = LineReporter(line_every_s=1000.0)
    for done in range(500):
        quiet.progress("rays", done, 500)
    assert capsys.readouterr().err == ""
    chatty = LineReporter(line_every_s=0.0)
    chatty.progress("rays", 250, 500)
    chatty.progress("solving", 40, 0)
    assert capsys.readouterr().err == "  rays: 250 of 500 (50 %)\n  solving: 40\n"


def test_bars_leave_notes_and_no_colour_where_none_is_wanted(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setenv("NO_COLOR", "1")
    screen = io.StringIO()
    console = Console(file=screen, force_terminal=True, width=80, highlight=False)
    with BarReporter(console) as reporter:
        reporter.begin("invert", "not done yet")
        reporter.progress("tracing", 3, 10)
        reporter.progress("solving", 3, 0)
        reporter.note("iteration 1: [odd] text")
        reporter.finish("invert", 2.0)
    shown = screen.getvalue()
    assert "iteration 1: [odd] text" in shown
    assert "\x1b[32m" not in shown
    assert "\x1b[3" not in shown.replace("\x1b[39m", "")


def test_an_error_of_ours_goes_to_a_log_and_not_to_the_screen(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise ZeroDivisionError("deep inside")

    monkeypatch.setattr("rayloom.workflow.run", fail)
    result = CliRunner().invoke(main, ["run", str(tmp_path)])
    assert result.exit_code == 1
    assert "Traceback" not in result.output
    log = tmp_path / "rayloom_error.log"
    assert str(log) in result.stderr
    assert "ZeroDivisionError: deep inside" in log.read_text(encoding="utf-8")


def test_ctrl_c_says_how_to_resume(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupt(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    (tmp_path / "rayloom.toml").touch()
    monkeypatch.setattr("rayloom.workflow.run", interrupt)
    result = CliRunner().invoke(main, ["run", str(tmp_path)])
    assert result.exit_code == 130
    assert f"rayloom run {tmp_path}" in result.stderr


@pytest.mark.skipif(os.name == "nt", reason="signals differ there")
@pytest.mark.parametrize("request_to_stop", [signal.SIGINT, signal.SIGTERM])
def test_a_run_that_is_interrupted_goes_on_to_the_same_model(
    tmp_path: Path, request_to_stop: signal.Signals
) -> None:
    """A real process, a real signal: nothing half-written, and the same bits after resuming."""
    files = write_small_survey(tmp_path)
    whole, broken = (write_run_folder(tmp_path / name, files) for name in ("whole", "broken"))
    assert CliRunner().invoke(main, ["run", str(whole)]).exit_code == 0

    command = [sys.executable, "-c", "from rayloom.cli import main; main()", "run", str(broken)]
    with subprocess.Popen(command, stderr=subprocess.PIPE, text=True) as process:
        checkpoints = broken / "checkpoints"
        deadline = time.monotonic() + 60.0
        while not any(checkpoints.glob("invert_*.npz")) and time.monotonic() < deadline:
            time.sleep(0.005)
        process.send_signal(request_to_stop)
        _, told = process.communicate(timeout=60)
    assert process.returncode == 130
    assert f"rayloom run {broken}" in told
    assert not [path for path in broken.rglob("*") if path.name.startswith(".")]
    assert not (broken / "model.nc").exists()

    resumed = CliRunner().invoke(main, ["run", str(broken)])
    assert resumed.exit_code == 0
    assert "resuming after" in resumed.stderr
    assert (broken / "model.nc").read_bytes() == (whole / "model.nc").read_bytes()
