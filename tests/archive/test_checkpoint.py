"""checkpoint.h5: exact, whole, or not believed."""

import math
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from wavepack.archive import checkpoint
from wavepack.archive.checkpoint import load, save
from wavepack.archive.layout import CHECKPOINT_FILE, PREVIOUS_CHECKPOINT_FILE
from wavepack.errors import MachineError, UsageError

DTYPES = st.sampled_from(["f8", "f4", "c16", "c8", "i8", "u1", "i4", ">f8", "?"])
ARRAYS = arrays.arrays(DTYPES, arrays.array_shapes(min_dims=0, max_dims=3, min_side=0, max_side=4))
VALUES = st.one_of(
    ARRAYS, st.binary(max_size=200), st.text(), st.booleans(), st.integers(), st.floats()
)
KEYS = st.text("abcxyz_0ψ -", min_size=1, max_size=8)


def same(found: Any, wanted: Any) -> bool:  # noqa: ANN401 - compares whatever a state may hold
    """Tell whether two values agree in type and in every bit."""
    if isinstance(wanted, np.ndarray):
        kept = found.dtype == wanted.dtype and found.shape == wanted.shape
        return bool(kept and found.tobytes() == wanted.tobytes())
    if isinstance(wanted, float):
        return type(found) is float and np.float64(found).tobytes() == np.float64(wanted).tobytes()
    return type(found) is type(wanted) and found == wanted


@given(state=st.dictionaries(KEYS, VALUES, max_size=6))
@settings(max_examples=60, deadline=None)
def test_every_state_comes_back_exactly(
    tmp_path_factory: pytest.TempPathFactory, state: dict[str, Any]
) -> None:
    """Arrays, bytes, text, truth values, whole numbers and floats come back to the bit."""
    path = tmp_path_factory.getbasetemp() / CHECKPOINT_FILE
    save(path, state)
    found = load(path)
    assert found.note is None
    assert found.state.keys() == state.keys()
    assert all(same(found.state[key], value) for key, value in state.items())


def test_large_and_odd_values(tmp_path: Path) -> None:
    """A planner's 100 kB of bytes, numbers past 64 bits, and nested names are kept."""
    state: dict[str, Any] = {
        "planner": bytes(range(256)) * 400,
        "steps": 10**40,
        "flux/exit/tally": np.arange(3.0),
        "flux/exit/name": "exit",
        "flux/other": -math.inf,
        "one": np.float32(0.1),
    }
    save(tmp_path / CHECKPOINT_FILE, state)
    found = load(tmp_path / CHECKPOINT_FILE)
    assert found.state["planner"] == state["planner"]
    assert found.state["steps"] == 10**40
    assert found.state["one"] == np.float32(0.1)
    assert found.section("flux/exit").keys() == {"tally", "name"}
    with h5py.File(tmp_path / CHECKPOINT_FILE, "r") as file:
        assert file["flux/exit/tally"][:].tolist() == [0, 1, 2]


@pytest.mark.parametrize("key", ["", "/a", "a//b", ".", "a/..", "a\0b"])
def test_keys_that_are_no_names_are_refused(tmp_path: Path, key: str) -> None:
    """Keys that HDF5 would take for something else are errors."""
    with pytest.raises(ValueError, match="cannot be used"):
        save(tmp_path / CHECKPOINT_FILE, {key: 1})


def test_values_without_a_form_are_refused(tmp_path: Path) -> None:
    """Objects, and keys that are both a value and a path, are errors; nothing is written."""
    path = tmp_path / CHECKPOINT_FILE
    with pytest.raises(TypeError, match="no form for list"):
        save(path, {"a": [1]})  # type: ignore[dict-item] # the fault under test
    with pytest.raises(TypeError, match="arrays of object"):
        save(path, {"a": np.array([None])})
    with pytest.raises(ValueError, match="cannot be used"):
        save(path, {"a": 1, "a/b": 2})
    assert list(tmp_path.iterdir()) == []


def saved_twice(folder: Path) -> Path:
    """Save two states and return the path of the newer one."""
    path = folder / CHECKPOINT_FILE
    save(path, {"step": 1, "psi": np.ones(50)})
    save(path, {"step": 2, "psi": np.ones(50)})
    return path


def test_previous_is_kept(tmp_path: Path) -> None:
    """The state before stays beside the newest; no scratch file is left."""
    path = saved_twice(tmp_path)
    assert load(path).state["step"] == 2
    assert load(tmp_path / PREVIOUS_CHECKPOINT_FILE).state["step"] == 1
    assert {p.name for p in tmp_path.iterdir()} == {CHECKPOINT_FILE, PREVIOUS_CHECKPOINT_FILE}


def test_any_flipped_byte_is_noticed(tmp_path: Path) -> None:
    """Whichever byte is damaged, the previous state is used and a note says so."""
    path = saved_twice(tmp_path)
    content = path.read_bytes()
    for place in np.random.default_rng(1).integers(0, len(content), 100):
        damaged = bytearray(content)
        damaged[place] ^= 0x10
        path.write_bytes(damaged)
        found = load(path)
        assert found.state["step"] == 1
        assert found.note == (
            "checkpoint.h5 is damaged (its checksum does not fit); using checkpoint.previous.h5"
        )


@pytest.mark.parametrize("kept", [0, 1, 60, 500, -1])
def test_truncation_is_noticed(tmp_path: Path, kept: int) -> None:
    """However much of the end is missing, the previous state is used."""
    path = saved_twice(tmp_path)
    path.write_bytes(path.read_bytes()[:kept])
    assert load(path).state["step"] == 1


def test_missing_and_damaged_ones(tmp_path: Path) -> None:
    """Without the newest the previous is used; without any the user is told what to expect."""
    path = tmp_path / CHECKPOINT_FILE
    with pytest.raises(UsageError, match="nothing to resume from"):
        load(path)
    saved_twice(tmp_path)
    path.unlink()
    assert load(path).note == "checkpoint.h5 is missing; using checkpoint.previous.h5"
    (tmp_path / PREVIOUS_CHECKPOINT_FILE).write_bytes(b"")
    with pytest.raises(MachineError, match="no checkpoint to resume from"):
        load(path)


def test_newer_layout_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A checkpoint of a newer version is refused politely, not called damaged."""
    with monkeypatch.context() as patch:
        patch.setattr(checkpoint, "SCHEMA_VERSION", 99)
        saved_twice(tmp_path)
    with pytest.raises(UsageError, match="newer wavepack: layout 99"):
        load(tmp_path / CHECKPOINT_FILE)
