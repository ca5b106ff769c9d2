"""The exit status of everything that can happen."""

import os
import signal
from argparse import Namespace
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from tests.cli.conftest import SCENARIO
from wavepack import cli, workflow
from wavepack.archive.disk import machine_errors
from wavepack.errors import Fault, MachineError, NumericalFault, ScenarioError, UsageError
from wavepack.running.session import as_run
from wavepack.running.tables import as_kept
from wavepack.scenario.load import load_scenario, parse_scenario
from wavepack.scenario.write import to_toml

Captured = pytest.CaptureFixture[str]


@pytest.fixture
def ending(monkeypatch: pytest.MonkeyPatch) -> Callable[[BaseException], int]:
    """Give tests the status of a command that ends with an exception."""

    def status(error: BaseException) -> int:
        def command(_: Namespace) -> int:
            raise error

        monkeypatch.setitem(cli.COMMANDS, "results", command)
        return cli.main(["results", "somewhere"])

    return status


@pytest.mark.parametrize(
    ("error", "status", "said"),
    [
        (ScenarioError([Fault("grid", "missing", 3, "a.toml")]), 2, "a.toml:3: grid: missing\n"),
        (UsageError("d: no run"), 2, "wavepack: d: no run\n"),
        (MachineError("d: disk full"), 4, "wavepack: d: disk full\n"),
        (MemoryError(), 4, "wavepack: out of memory: no more to be had"),
        (OSError(28, "No space left on device", "f"), 4, "f: the machine refused: No space left"),
        (NumericalFault("step 7: not finite"), 5, "wavepack: step 7: not finite\n"),
        (KeyboardInterrupt(), 130, "wavepack: interrupted\n"),
        (ZeroDivisionError("by zero"), 1, "a defect of the program, not of your input: ZeroDiv"),
    ],
    ids=lambda value: type(value).__name__,
)
def test_status_of_errors(
    ending: Callable[[BaseException], int],
    error: BaseException,
    status: int,
    said: str,
    capsys: Captured,
) -> None:
    """Each kind of error has its status and one message, without a traceback."""
    assert ending(error) == status
    out, err = capsys.readouterr()
    assert out == ""
    assert said in err
    assert "Traceback" not in err


def test_traceback_on_request(
    ending: Callable[[BaseException], int], monkeypatch: pytest.MonkeyPatch, capsys: Captured
) -> None:
    """WAVEPACK_DEBUG=1 shows where a defect is."""
    monkeypatch.setenv("WAVEPACK_DEBUG", "1")
    assert ending(ZeroDivisionError("by zero")) == 1
    assert "Traceback" in capsys.readouterr().err


def test_sigterm_is_an_interrupt(monkeypatch: pytest.MonkeyPatch) -> None:
    """A command asked to terminate ends like one interrupted, and the handler is put back."""
    before = signal.getsignal(signal.SIGTERM)

    def command(_: Namespace) -> int:
        os.kill(os.getpid(), signal.SIGTERM)
        return 0

    monkeypatch.setitem(cli.COMMANDS, "results", command)
    assert cli.main(["results", "somewhere"]) == 130
    assert signal.getsignal(signal.SIGTERM) is before


def results_with(transmission: float | None, reflection: float | None) -> dict[str, Any]:
    """Return results with given errors."""
    return {
        "quantities": {
            "transmission": {"value": 0.1, "error": transmission, "unit": ""},
            "reflection": {"value": 0.9, "error": reflection, "unit": ""},
        }
    }


@pytest.mark.parametrize(
    ("errors", "missed"),
    [
        ((1e-5, 1e-4), []),
        ((1e-5, 2e-4), ["reflection: the numerical error 0.0002 exceeds the target 0.0001"]),
        ((None, 1e-5), ["transmission: no numerical error is established, the target is 0.0001"]),
    ],
)
def test_target_missed(errors: tuple[float | None, float | None], missed: list[str]) -> None:
    """An error that is too large or not established misses the target."""
    scenario = parse_scenario(f"{SCENARIO}[accuracy]\ntarget = 1e-4\n")
    assert workflow.misses(results_with(*errors), scenario) == missed


def test_without_a_target_nothing_is_missed() -> None:
    """A scenario without [accuracy] asks nothing of the errors."""
    assert workflow.misses(results_with(None, None), parse_scenario(SCENARIO)) == []


def test_default_folder_is_named_after_the_file(tmp_path: Path) -> None:
    """A run goes to runs/ and the stem of its scenario's file."""
    path = tmp_path / "my.wire.toml"
    path.write_text(SCENARIO)
    assert workflow.default_folder(load_scenario(path)) == Path("runs/my.wire")


def test_hints_can_be_pasted(tmp_path: Path) -> None:
    """A folder's name is quoted in commands that go on with its run."""
    folder = tmp_path / "bend é"
    folder.mkdir()
    (folder / "checkpoint.h5").touch()
    with (
        pytest.raises(MachineError, match=f"then: wavepack resume '{folder}'"),
        machine_errors(folder, folder),
    ):
        raise OSError(28, "No space left on device")
    scenario = parse_scenario(SCENARIO)
    (folder / "scenario.toml").write_text(to_toml(as_kept(as_run(scenario), folder)))
    with pytest.raises(UsageError, match=f"`wavepack resume '{folder}'` goes on"):
        workflow.refuse_existing(folder, scenario)
