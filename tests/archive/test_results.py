"""results.json and run.log: strict JSON, whole or not there."""

import json
import math
from datetime import datetime
from pathlib import Path

import numpy as np
import pytest

from wavepack.archive.results import jsonable, read_results, write_results
from wavepack.archive.runlog import RunLog, read_log
from wavepack.errors import MachineError, UsageError


def test_numbers_become_plain_json() -> None:
    """Arrays become lists; not-a-number and infinity become null, at any depth."""
    value = {
        "a": np.array([1.0, np.nan]),
        "b": (np.float32(0.5), np.int64(3), np.bool_(True), math.inf),
        3: [Path("x"), None, "ψ", {"c": np.array(2.0)}],
    }
    assert jsonable(value) == {
        "a": [1.0, None],
        "b": [0.5, 3, True, None],
        "3": ["x", None, "ψ", {"c": 2.0}],
    }
    with pytest.raises(TypeError, match="no form for complex"):
        jsonable(1j)


def test_results_come_back(tmp_path: Path) -> None:
    """Results are written as strict JSON, read back, and replaced without a trace."""
    results = {"status": "finished", "x": {"value": 0.1, "error": None, "unit": "nm"}}
    write_results(tmp_path, {"status": "running"})
    path = write_results(tmp_path, results)
    assert read_results(tmp_path) == results
    assert json.loads(path.read_text()) == results
    assert [p.name for p in tmp_path.iterdir()] == ["results.json"]


def test_faults_of_the_folder_are_named(tmp_path: Path) -> None:
    """Missing, torn and foreign results are told apart; a missing folder is named."""
    with pytest.raises(UsageError, match=r"no results\.json"):
        read_results(tmp_path)
    (tmp_path / "results.json").write_text('{"status": ')
    with pytest.raises(UsageError, match="not readable as JSON"):
        read_results(tmp_path)
    (tmp_path / "results.json").write_text("[]")
    with pytest.raises(UsageError, match="need a JSON object"):
        read_results(tmp_path)
    with pytest.raises(MachineError, match="does not exist"):
        write_results(tmp_path / "nowhere", {})


def test_log_appends_and_skips_torn_lines(tmp_path: Path) -> None:
    """Events carry a time; a line torn by a kill costs only itself."""
    assert read_log(tmp_path) == []
    with RunLog(tmp_path) as log:
        log.write("start", step=np.int64(0), norm=np.nan)
    with log.path.open("a") as file:
        file.write('{"time": "20')
    with RunLog(tmp_path) as log:
        log.write("resume", step=5)
    first, second = read_log(tmp_path)
    assert (first["event"], first["step"], first["norm"]) == ("start", 0, None)
    assert (second["event"], second["step"]) == ("resume", 5)
    assert datetime.fromisoformat(first["time"]) <= datetime.fromisoformat(second["time"])
    with pytest.raises(MachineError, match="does not exist"):
        RunLog(tmp_path / "nowhere")
