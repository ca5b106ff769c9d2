"""``results.json``: written whole or not at all, strict JSON."""

import json
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from wavepack.archive.disk import machine_errors, write_atomically
from wavepack.archive.layout import RESULTS_FILE
from wavepack.errors import UsageError


def jsonable(value: Any) -> Any:  # noqa: ANN401 - any value goes in, plain JSON values come out
    """Return the value in plain JSON types: arrays as lists, not-a-number and infinity as null.

    Raises
    ------
    TypeError
        For a value that JSON has no form for (complex numbers, functions).
    """
    match value:
        case np.ndarray() | np.generic():
            plain = jsonable(value.tolist())
        case None | str() | bool() | int():
            plain = value
        case float():
            plain = value if math.isfinite(value) else None
        case Mapping():
            plain = {str(key): jsonable(item) for key, item in value.items()}
        case list() | tuple() | set() | frozenset():
            plain = [jsonable(item) for item in value]
        case Path():
            plain = str(value)
        case _:
            raise TypeError(f"results: JSON has no form for {type(value).__name__} {value!r}")
    return plain


def write_results(folder: Path, results: Mapping[str, Any], name: str = RESULTS_FILE) -> Path:
    """Write the results of a run, replacing the former ones at once.

    Raises
    ------
    MachineError
        If the disk is full or the folder cannot be written.
    """
    text = json.dumps(jsonable(results), indent=2, allow_nan=False, ensure_ascii=False)
    path = Path(folder) / name
    write_atomically(path, (text + "\n").encode())
    return path


def read_results(folder: Path, name: str = RESULTS_FILE) -> dict[str, Any]:
    """Return what `write_results` wrote.

    Raises
    ------
    UsageError
        If there are no results, or the file does not hold them.
    MachineError
        If the file cannot be read.
    """
    path = Path(folder) / name
    if not path.is_file():
        raise UsageError(f"{folder}: no {name} in it; is it a run folder?")
    with machine_errors(path, Path(folder)):
        content = path.read_bytes()
    try:
        results = json.loads(content)
    except ValueError as error:
        raise UsageError(f"{path}: not readable as JSON: {error}") from error
    if not isinstance(results, dict):
        raise UsageError(f"{path}: need a JSON object, found {type(results).__name__}")
    return results
