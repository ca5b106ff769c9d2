"""Tables: three forms of file, round trips, and what is refused."""

import os
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest

from wavepack.fields import Span
from wavepack.grid.axis import Axis
from wavepack.grid.grid import Grid
from wavepack.physics.particle import Particle
from wavepack.physics.potentials import Table, sample
from wavepack.physics.tables import interpolated, outside, read_samples

ELECTRON = Particle(1.0, -1.0, 1.0, 1.0, 1.0)
X = np.linspace(-3.0, 5.0, 17)
Y = np.linspace(0.0, 2.0, 9)
LINE = X**3 - X
PLANE = X[:, None] ** 2 * Y[None, :] + Y[None, :] ** 3
ANYWHERE = (Span(), Span())


def columns(*, wave: bool = False) -> np.ndarray:
    """Return rows x, y, V (and an imaginary part) of the plane, shuffled."""
    x, y = np.broadcast_arrays(X[:, None], Y[None, :])
    parts = [x.ravel(), y.ravel(), PLANE.ravel()] + ([-PLANE.ravel()] if wave else [])
    return np.random.default_rng(0).permutation(np.stack(parts, axis=1))


def write_csv(folder: Path) -> str:
    """Write the plane as CSV with titles and a comment."""
    file = folder / "plane.csv"
    rows = "\n".join(",".join(repr(float(v)) for v in row) for row in columns())
    file.write_text(f"# a plane\nx, y, V\n{rows}\n")
    return str(file)


def write_npy(folder: Path) -> str:
    """Write the plane as columns in NPY."""
    np.save(folder / "plane.npy", columns())
    return str(folder / "plane.npy")


def write_hdf5(folder: Path) -> str:
    """Write the plane as HDF5."""
    with h5py.File(folder / "plane.h5", "w") as file:
        file["x"], file["y"], file["energy"] = X, Y, PLANE
    return str(folder / "plane.h5")


@pytest.mark.parametrize("write", [write_csv, write_npy, write_hdf5])
def test_a_plane_comes_back(tmp_path: Path, write: Callable[[Path], str]) -> None:
    """Each form gives the same positions and values."""
    samples = read_samples(write(tmp_path), 2, ANYWHERE)
    assert samples.positions[0].tolist() == X.tolist()
    assert samples.positions[1].tolist() == Y.tolist()
    assert np.array_equal(samples.values, PLANE)


def test_bare_values_take_positions_from_beside(tmp_path: Path) -> None:
    """A NPY file of values alone is spread over the given spans."""
    np.save(tmp_path / "bare.npy", PLANE)
    samples = read_samples(str(tmp_path / "bare.npy"), 2, (Span(-3, 5), Span(0, 2)))
    assert samples.positions[0] == pytest.approx(X)
    assert np.array_equal(samples.values, PLANE)


def test_splines_keep_cubic_polynomials(tmp_path: Path) -> None:
    """Between the samples a cubic comes back to rounding, on meshes and on points alike."""
    np.save(tmp_path / "line.npy", np.stack([X, LINE], axis=1))
    line = read_samples(str(tmp_path / "line.npy"), 1, (Span(),))
    x = np.linspace(-3, 5, 101)
    assert interpolated(line, (x,)) == pytest.approx(x**3 - x, abs=1e-11)
    plane = read_samples(write_npy(tmp_path), 2, ANYWHERE)
    y = np.linspace(0, 2, 101)
    on_mesh = interpolated(plane, (x[:, None], y[None, :]))
    assert on_mesh == pytest.approx(x[:, None] ** 2 * y + y**3, abs=1e-10)
    assert interpolated(plane, (x, y)) == pytest.approx(np.diag(on_mesh), abs=1e-12)
    backwards = interpolated(plane, (x[::-1, None], y[None, :]))
    assert backwards == pytest.approx(on_mesh[::-1], abs=1e-12)


def test_constant_outside(tmp_path: Path) -> None:
    """Beyond the samples a table keeps its last value, and `outside` tells where."""
    np.save(tmp_path / "line.npy", np.stack([X, LINE], axis=1))
    line = read_samples(str(tmp_path / "line.npy"), 1, (Span(),))
    x = np.array([-9.0, 0.0, 9.0])
    assert interpolated(line, (x,)) == pytest.approx([LINE[0], 0.0, LINE[-1]])
    assert outside(line, (x,)).tolist() == [True, False, True]


def test_complex_values(tmp_path: Path) -> None:
    """A wavefunction reads from two columns, from complex NPY and from HDF5."""
    wave = LINE + 1j * X
    rows = "\n".join(
        f"{a!r} {b!r} {c!r}" for a, b, c in zip(X.tolist(), LINE.tolist(), X.tolist(), strict=True)
    )
    (tmp_path / "wave.txt").write_text(rows)
    np.save(tmp_path / "wave.npy", wave)
    with h5py.File(tmp_path / "wave.h5", "w") as file:
        file["x"], file["values"] = X, wave
    for name, span in (("wave.txt", Span()), ("wave.npy", Span(-3, 5)), ("wave.h5", Span())):
        samples = read_samples(str(tmp_path / name), 1, (span,), wave=True)
        assert samples.values == pytest.approx(wave)
        middle = interpolated(samples, (np.array([0.3]),))
        assert middle == pytest.approx([0.027 - 0.3 + 0.3j], abs=1e-12)


def test_a_line_is_uniform_across_a_plane(tmp_path: Path) -> None:
    """A potential of x alone extends along y."""
    np.save(tmp_path / "line.npy", np.stack([X, LINE], axis=1))
    grid = Grid((Axis("x", -3.0, 5.0, 20), Axis("y", 0.0, 1.0, 7)))
    values = sample(Table(file=str(tmp_path / "line.npy")), grid, ELECTRON)
    x = grid.axes[0].coordinates
    assert values == pytest.approx(np.repeat((x**3 - x)[:, None], 7, axis=1), abs=1e-11)


@pytest.mark.parametrize(
    ("name", "content", "message"),
    [
        ("a.csv", "", "rows of numbers"),
        ("a.csv", "x,V\nno,thing\n", "rows of numbers"),
        ("a.csv", "0 1\n1 oops\n", "line 2: need numbers"),
        ("a.csv", "0 1\n1 2 3\n", "line 2: need 2 columns"),
        ("a.csv", "0 1\n2 1\n1 1\n", "need rising x, got 2 before 1"),
        ("a.csv", "0 1\n1 nan\n2 1\n", "need finite values, got nan at 1"),
        ("a.csv", "0 1\ninf 3\n", "need finite positions"),
        ("a.csv", "0 1\n", "at least 2 positions"),
        ("a.csv", "0 0 1\n0 1 1\n1 0 1\n", "each of 2 x with each of 2 y once, got 3"),
        ("a.csv", "0 0 1\n0 1 1\n1 0 1\n0 1 2\n", "each of 2 x with each of 2 y once"),
        ("a.csv", "0 1 2 3 4\n", "need columns"),
        ("a.xls", "0 1\n1 1\n", "need a file"),
        ("a.npy", "not an array", "need an array"),
        ("a.h5", "not HDF5", "need an HDF5 file"),
    ],
)
def test_bad_files_are_refused(tmp_path: Path, name: str, content: str, message: str) -> None:
    """A file that is no table says what is wanted and what was found, and its name."""
    (tmp_path / name).write_text(content)
    with pytest.raises(ValueError, match=message) as caught:
        read_samples(str(tmp_path / name), 2, ANYWHERE)
    assert str(caught.value).startswith(name)


def test_pickled_arrays_are_refused(tmp_path: Path) -> None:
    """A NPY file that would run code is not loaded."""
    np.save(tmp_path / "objects.npy", np.array([{}, {}]), allow_pickle=True)
    with pytest.raises(ValueError, match="need an array of numbers"):
        read_samples(str(tmp_path / "objects.npy"), 1, (Span(),))


def test_text_that_is_no_text_is_refused(tmp_path: Path) -> None:
    """A binary file called CSV is refused."""
    (tmp_path / "a.csv").write_bytes(b"\xff\xfe\x00\x01")
    with pytest.raises(ValueError, match="text of numbers"):
        read_samples(str(tmp_path / "a.csv"), 1, (Span(),))


def test_files_too_big_are_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Size is looked at before a file is read."""
    monkeypatch.setattr("wavepack.physics.tables.MOST_VALUES", 10)
    monkeypatch.setattr("wavepack.physics.tables.MOST_BYTES", 10)
    with pytest.raises(ValueError, match="at most 10 values"):
        read_samples(write_npy(tmp_path), 2, ANYWHERE)
    with pytest.raises(ValueError, match="at most 10 values"):
        read_samples(write_hdf5(tmp_path), 2, ANYWHERE)
    with pytest.raises(ValueError, match="MB of text"):
        read_samples(write_csv(tmp_path), 2, ANYWHERE)


def test_wrong_shapes_are_refused(tmp_path: Path) -> None:
    """Values that do not fit their positions, or too many axes, are refused."""
    with h5py.File(tmp_path / "bad.h5", "w") as file:
        file["x"], file["values"] = X, LINE[:-1]
    with pytest.raises(ValueError, match="values of shape"):
        read_samples(str(tmp_path / "bad.h5"), 1, (Span(),))
    with h5py.File(tmp_path / "none.h5", "w") as file:
        file["values"] = LINE
    with pytest.raises(ValueError, match="datasets x"):
        read_samples(str(tmp_path / "none.h5"), 1, (Span(),))
    with pytest.raises(ValueError, match="need 1 axes of positions, got 2"):
        read_samples(write_hdf5(tmp_path), 1, (Span(),))
    np.save(tmp_path / "wave.npy", LINE + 0j)
    with pytest.raises(ValueError, match="real values"):
        read_samples(str(tmp_path / "wave.npy"), 1, (Span(-3, 5),))
    with pytest.raises(ValueError, match="need 2 axes as given"):
        read_samples(str(tmp_path / "wave.npy"), 2, (Span(-3, 5), Span(0, 1)))
    with pytest.raises(ValueError, match="from, to"):
        read_samples(str(tmp_path / "wave.npy"), 1, (Span(lower=-3),))
    with pytest.raises(ValueError, match="got both"):
        read_samples(write_csv(tmp_path), 1, (Span(-3, 5),))


def test_a_missing_file_is_a_fault(tmp_path: Path) -> None:
    """A piece whose file is missing reports the key and the path."""
    missing = str(tmp_path / "missing.csv")
    ((key, message),) = Table(file=missing).faults(("x",))
    assert key == "file"
    assert missing in message


def test_a_changed_file_is_read_anew(tmp_path: Path) -> None:
    """The same path with other content gives the other content."""
    file = tmp_path / "a.csv"
    file.write_text("0 1\n1 2\n")
    assert read_samples(str(file), 1, (Span(),)).values.tolist() == [1, 2]
    file.write_text("0 1\n1 2\n2 5\n")
    assert read_samples(str(file), 1, (Span(),)).values.tolist() == [1, 2, 5]


def test_a_replaced_file_is_read_again(tmp_path: Path) -> None:
    """Another content of the same size and time of change is noticed."""
    path = tmp_path / "line.csv"
    path.write_text("0, 1\n1, 2\n")
    status = path.stat()
    assert read_samples(str(path), 1, (Span(),)).values.tolist() == [1, 2]
    other = tmp_path / "other.csv"
    other.write_text("0, 3\n1, 4\n")
    os.utime(other, ns=(status.st_atime_ns, status.st_mtime_ns))
    other.replace(path)
    assert read_samples(str(path), 1, (Span(),)).values.tolist() == [3, 4]
