"""run.h5: written, read back, opened by others."""

import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
import xarray

from wavepack.archive import hdf5
from wavepack.archive.layout import RUN_FILE, RunPlan, rows_per_chunk, text_sha256
from wavepack.archive.reader import open_run
from wavepack.archive.writer import RunWriter
from wavepack.arrays import ComplexArray
from wavepack.errors import MachineError, UsageError

Plan = Callable[..., RunPlan]
Append = Callable[[RunWriter, int], None]
Frame = Callable[[int], ComplexArray]


@pytest.fixture
def filled(tmp_path: Path, make_plan: Plan, append: Append) -> Path:
    """Give a folder with a run of five rows."""
    with RunWriter.create(tmp_path, make_plan()) as writer:
        for row in range(5):
            append(writer, row)
        writer.write_spectrum("exit", np.arange(5.0), np.ones(5))
        writer.write_momentum(np.ones((6, 4)), None)
    return tmp_path


def datasets(path: Path) -> dict[str, bytes]:
    """Return the bytes of every dataset of a file."""
    found: dict[str, bytes] = {}

    def keep(name: str, item: h5py.Dataset | h5py.Group) -> None:
        if isinstance(item, h5py.Dataset):
            found[name] = f"{item.shape} {item.dtype} ".encode() + item[()].tobytes()

    with h5py.File(path, "r") as file:
        file.visititems(keep)
    return found


def test_reads_back_what_was_written(filled: Path, frame: Frame) -> None:
    """Title, facts, axes, potential, frames, series and spectra come back exactly."""
    run = open_run(filled)
    assert (run.title, run.scenario_text) == ("Small", 'title = "Small"\n')
    assert run.facts == {"drive": False, "absorber": [["x", -1.0, -0.5]]}
    assert run.units == {"length": "nm", "energy": "eV", "time": "fs", "mass": "m_e"}
    assert run.potential is not None
    assert np.array_equal(run.potential, np.outer(run.axes["x"], run.axes["y"]))
    assert len(run) == 5
    assert np.array_equal(run.frame(-1), frame(4))
    assert np.allclose(run.density(1), 4.0, rtol=1e-15)
    assert run.series.norm.values.tolist() == [0.5, 1.5, 2.5, 3.5, 4.5]
    assert run.regions["drain"].probability.values[1] == 0.5
    assert run.detectors["exit"].sizes == {"time": 10}
    assert run.spectra["exit"].flux_by_energy.values.tolist() == [0, 1, 2, 3, 4]
    assert np.isnan(run.spectra["exit"].transmission.values).all()
    assert "plain" not in run.spectra
    assert run.momentum is not None
    assert run.momentum.before.dims == ("kx", "ky")
    with pytest.raises(IndexError, match="holds 5 frames"):
        run.frame(5)


def test_frames_are_lazy_xarray(filled: Path, frame: Frame) -> None:
    """Frames can be cut along every axis, backwards and by lists, before they are read."""
    psi = open_run(filled).frames.psi
    whole = np.stack([frame(row) for row in range(5)])
    assert psi.attrs == {"units": "1/nm", "long_name": "wavefunction"}
    assert np.array_equal(psi[::-2, [1, 3], 0].values, whole[::-2, [1, 3], 0])
    assert np.array_equal(psi.isel(time=2, y=slice(1, 3)).values, whole[2, :, 1:3])
    assert psi.isel(time=slice(0)).values.shape == (0, 6, 4)
    assert np.array_equal(psi.sel(time=3.0).values, whole[3])


@pytest.mark.parametrize(
    ("group", "variable", "dims", "unit"),
    [
        (None, "potential", ("x", "y"), "eV"),
        ("frames", "psi", ("time", "x", "y"), "1/nm"),
        ("series", "autocorrelation", ("time",), ""),
        ("series", "x", ("time",), "nm"),
        ("regions/drain", "probability", ("time",), ""),
        ("detectors/exit", "flux", ("time",), "1/fs"),
        ("detectors/exit", "flux_by_energy", ("energy",), "1/eV"),
        ("momentum", "before", ("kx", "ky"), "nm^2"),
    ],
)
def test_opens_in_plain_xarray(
    filled: Path, group: str | None, variable: str, dims: tuple[str, ...], unit: str
) -> None:
    """Every group opens in xarray by itself, with coordinates, units and long names."""
    path = filled / RUN_FILE
    with xarray.open_dataset(path, engine="h5netcdf", group=group) as dataset:
        array = dataset[variable].load()
        assert array.dims == dims
        assert all(dim in array.coords for dim in dims)
        assert array.attrs["units"] == unit
        assert array.attrs["long_name"]
        assert all(array.coords[dim].attrs["long_name"] for dim in dims)
    if variable == "psi":
        assert array.dtype == np.complex128
        assert np.array_equal(array.values, np.stack([open_run(filled).frame(i) for i in range(5)]))


@pytest.mark.parametrize(
    ("kind", "precision", "dtype"),
    [
        ("psi", "single", np.complex64),
        ("psi", "double", np.complex128),
        ("density", "single", np.float32),
        ("density", "double", np.float64),
    ],
)
def test_frame_types(
    tmp_path: Path, make_plan: Plan, kind: str, precision: str, dtype: type
) -> None:
    """Each kind and precision of frames is stored as such; complex does not pass for real."""
    plan = make_plan(frame_kind=kind, precision=precision)
    with RunWriter.create(tmp_path, plan) as writer:
        writer.append_frame(0.0, np.full((6, 4), 0.5))
        if kind == "density":
            with pytest.raises(ValueError, match="does not fit"):
                writer.append_frame(1.0, np.ones((6, 4), complex))
    run = open_run(tmp_path)
    assert run.frame(0).dtype == dtype
    assert run.density(0)[0, 0] == (0.5 if kind == "density" else 0.25)


def test_resumed_file_equals_unbroken_one(tmp_path: Path, make_plan: Plan, append: Append) -> None:
    """Dropping rows and appending them again gives the same datasets, byte for byte."""
    for name in ("broken", "unbroken"):
        (tmp_path / name).mkdir()
    with RunWriter.create(tmp_path / "unbroken", make_plan()) as writer:
        for row in range(30):
            append(writer, row)
    with RunWriter.create(tmp_path / "broken", make_plan()) as writer:
        for row in range(20):
            append(writer, row)
            if row == 12:
                writer.sync()
                counts = writer.counts()
    with RunWriter.reopen(tmp_path / "broken", counts) as writer:
        assert writer.notes == ()
        for row in range(13, 30):
            append(writer, row)
    assert datasets(tmp_path / "broken" / RUN_FILE) == datasets(tmp_path / "unbroken" / RUN_FILE)


def test_truncating_to_more_than_there_is_is_refused(filled: Path) -> None:
    """A file that holds less than its checkpoint knows of is called damaged."""
    with RunWriter.reopen(filled) as writer:
        counts = writer.counts()
        with pytest.raises(MachineError, match=r"series holds 5 rows.*knows of 6"):
            writer.truncate(counts | {"series": 6})
        with pytest.raises(MachineError, match="not those of the checkpoint"):
            writer.truncate({"series": 1})


def test_file_cut_short_is_read_and_mended(filled: Path) -> None:
    """A file that lost its last bytes is read, and padded with a note before it is resumed."""
    path = filled / RUN_FILE
    content = path.read_bytes()
    path.write_bytes(content[:-100])
    assert open_run(filled).series.norm.values[-1] == 4.5
    with RunWriter.reopen(filled) as writer:
        assert writer.notes == ("run.h5: 100 bytes were missing at its end; filled with zeros",)
    assert path.stat().st_size == len(content)


def test_live_run_is_read_by_another_process(
    tmp_path: Path, make_plan: Plan, append: Append
) -> None:
    """While a run is written another process sees all that was flushed."""
    writer = RunWriter.create(tmp_path, make_plan())
    for row in range(3):
        append(writer, row)
    code = (
        "from wavepack.archive.reader import open_run; import sys;"
        "run = open_run(sys.argv[1]);"
        "print(len(run), 'xarray' in sys.modules, run.read('series/norm'))"
    )
    shown = subprocess.run(
        [sys.executable, "-c", code, tmp_path], capture_output=True, text=True, check=True
    )
    assert shown.stdout == "3 False [0.5 1.5 2.5]\n"
    writer.close()


@pytest.mark.parametrize(
    "options", [{}, {"locking": True}, {"locking": False}, {"locking": "best-effort"}]
)
def test_run_is_read_while_the_same_process_has_the_file_open(
    filled: Path, options: dict[str, Any]
) -> None:
    """A file left open in plain h5py, whatever its locking, does not keep a run from opening."""
    expected = open_run(filled).read("series/norm")
    with h5py.File(filled / "run.h5", "r", **options):
        assert np.array_equal(open_run(filled).read("series/norm"), expected)


def test_rows_are_buffered_and_flushed(tmp_path: Path, make_plan: Plan) -> None:
    """Single rows wait for a flush; a thousand are written by themselves."""
    with RunWriter.create(tmp_path, make_plan()) as writer:
        writer.append_detector("plain", 0.0, 1.0)
        assert writer.counts()["detectors/plain"] == 1
        assert open_run(tmp_path).counts["detectors/plain"] == 0
        writer.flush()
        assert open_run(tmp_path).counts["detectors/plain"] == 1
        writer.append_detector("plain", np.arange(1.0, 1001.0), np.ones(1000))
        assert open_run(tmp_path).counts["detectors/plain"] == 1001


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ({"time": 0, "norm": 1.0}, "need"),
        ({"time": np.nan, "norm": 1, "x": 1, "autocorrelation": 1}, "finite"),
        ({"time": [0, 1], "norm": 1, "x": 1, "autocorrelation": 1}, "unequal"),
        ({"time": 0, "norm": 1j, "x": 1, "autocorrelation": 1}, "does not fit"),
        ({"time": 0, "norm": [[1]], "x": 1, "autocorrelation": 1}, "shape"),
    ],
)
def test_rows_that_do_not_fit_are_refused(
    tmp_path: Path, make_plan: Plan, rows: dict[str, float], message: str
) -> None:
    """Missing columns, unequal lengths, wrong types and unknown times are errors."""
    with RunWriter.create(tmp_path, make_plan()) as writer:
        with pytest.raises(ValueError, match=message):
            writer.append_series(rows)
        with pytest.raises(ValueError, match="not part of this run"):
            writer.append_region("elsewhere", 0.0, 0.0)
        with pytest.raises(ValueError, match="not part of this run"):
            writer.write_spectrum("plain", [1.0])
        with pytest.raises(ValueError, match="shape"):
            writer.write_spectrum("exit", [1.0])


def test_scenario_can_be_replaced(filled: Path) -> None:
    """A scenario whose end was moved takes the place of the former, checksum included."""
    text = 'title = "Longer"\n# ü\n'
    with RunWriter.reopen(filled) as writer:
        writer.replace_scenario(text)
        with pytest.raises(ValueError, match="there is room for"):
            writer.replace_scenario("x" * 10000)
    run = open_run(filled)
    assert (run.scenario_text, run.scenario_sha256) == (text, text_sha256(text))


def test_format_is_the_oldest(filled: Path) -> None:
    """The file has a superblock of version 0, which every HDF5 reader understands."""
    head = (filled / RUN_FILE).read_bytes()[:9]
    assert head == hdf5.SIGNATURE


def test_no_run_folder(tmp_path: Path, make_plan: Plan) -> None:
    """What is no run folder is named, with what is missing."""
    with pytest.raises(UsageError, match="no such folder"):
        open_run(tmp_path / "nowhere")
    with pytest.raises(UsageError, match=r"no run\.h5"):
        open_run(tmp_path)
    with pytest.raises(UsageError, match=r"no run\.h5"):
        RunWriter.reopen(tmp_path)
    with pytest.raises(MachineError, match="does not exist"):
        RunWriter.create(tmp_path / "nowhere", make_plan())
    (tmp_path / RUN_FILE).write_text("no HDF5")
    with pytest.raises(UsageError, match="not an HDF5 file"):
        open_run(tmp_path)
    with pytest.raises(UsageError, match="already"):
        RunWriter.create(tmp_path, make_plan())


def test_newer_and_foreign_files_are_refused(filled: Path) -> None:
    """A file of a newer layout, or of another program, is refused politely."""
    with h5py.File(filled / RUN_FILE, "r+") as file:
        file.attrs["schema_version"] = 99
    with pytest.raises(UsageError, match=r"newer wavepack: layout 99"):
        open_run(filled)
    with pytest.raises(UsageError, match=r"newer wavepack: layout 99"):
        RunWriter.reopen(filled)
    with h5py.File(filled / RUN_FILE, "w") as file:
        file["other"] = 1
    with pytest.raises(UsageError, match="not the file of a run"):
        open_run(filled)


def test_plan_is_checked(make_plan: Plan) -> None:
    """A plan with an unknown series, other axes or an ill-fitting potential is refused."""
    with pytest.raises(ValueError, match="series spin"):
        make_plan(series=("spin",))
    with pytest.raises(ValueError, match="axes z"):
        make_plan(axes={"z": np.zeros(3)})
    with pytest.raises(ValueError, match="potential"):
        make_plan(potential=np.zeros(3))


@pytest.mark.parametrize("expected", [0, 1, 200, 10_000, 1_000_000])
@pytest.mark.parametrize("row_bytes", [8, 16, 30_000, 2**24, 2**28])
def test_chunks_are_few(expected: int, row_bytes: int) -> None:
    """Four times the rows expected fit into 64 chunks, unless a chunk would pass 2 GB."""
    rows = rows_per_chunk(expected, row_bytes)
    assert rows >= 1
    assert rows * row_bytes <= 2**31
    assert 4 * expected <= 64 * rows or (rows + 1) * row_bytes > 2**31
