"""Lays out a new ``run.h5`` from its plan: groups, datasets, scales, attributes."""

import json
from typing import Any, Final

import h5py
import numpy as np
import numpy.typing as npt

from wavepack.archive.layout import (
    ENERGY,
    FLUX,
    FRAMES,
    MOMENTUM,
    POSITIONS,
    POTENTIAL,
    PROBABILITY,
    SCENARIO_FILE,
    SCHEMA_VERSION,
    SERIES,
    SPECTRUM,
    TIME,
    WAVENUMBERS,
    Column,
    RunPlan,
    rows_per_chunk,
)
from wavepack.archive.results import jsonable

#: Text may be replaced by one longer by so much.
TEXT_ROOM: Final = 4096


def lay_out(file: h5py.File, plan: RunPlan) -> None:
    """Create all groups, datasets, scales and attributes; nothing is added afterwards."""
    _describe(file, plan)
    _static(file, plan)
    _frames(file, plan)
    series = (SERIES[name] for name in plan.series)
    _growing(file.create_group("series"), plan, plan.records, *series)
    regions, detectors = file.create_group("regions"), file.create_group("detectors")
    for name in plan.regions:
        _growing(regions.create_group(name), plan, plan.records, PROBABILITY)
    for name, energies in plan.detectors.items():
        group = detectors.create_group(name)
        _growing(group, plan, plan.samples, FLUX)
        if energies is not None:
            scale = _scale(group, ENERGY, plan, energies)
            for column in SPECTRUM.values():
                _unknown(group, column, plan, [scale])
    if plan.momentum:
        group = file.create_group("momentum")
        scales = [_scale(group, WAVENUMBERS[f"k{a}"], plan, k) for a, k in plan.momentum.items()]
        for column in MOMENTUM.values():
            _unknown(group, column, plan, scales)


def _describe(file: h5py.File, plan: RunPlan) -> None:
    file.attrs["title"] = plan.title
    file.attrs["schema_version"] = SCHEMA_VERSION
    file.attrs["wavepack_version"] = plan.wavepack_version
    # Of fixed length, so that it can change in place: text of variable length moves to a heap.
    file.attrs["scenario_sha256"] = np.bytes_(plan.scenario_sha256)
    for quantity in ("length", "energy", "time", "mass"):
        file.attrs[f"{quantity}_unit"] = plan.units[quantity]
    file.attrs["facts"] = json.dumps(jsonable(plan.facts), allow_nan=False)
    text = plan.scenario_text.encode()
    # Of fixed length with room to spare, so that it can change in place.
    fixed = h5py.string_dtype("utf-8", len(text) + TEXT_ROOM)
    scenario = file.create_dataset("scenario", data=text, dtype=fixed)
    scenario.attrs["long_name"] = f"scenario, as in {SCENARIO_FILE}"


def _static(file: h5py.File, plan: RunPlan) -> None:
    scales = [_scale(file, POSITIONS[name], plan, points) for name, points in plan.axes.items()]
    if plan.potential is not None:
        dataset = file.create_dataset("potential", data=plan.potential, dtype=np.float64)
        _label(dataset, POTENTIAL, plan)
        _attach(dataset, scales)


def _frames(file: h5py.File, plan: RunPlan) -> None:
    group, column = file.create_group("frames"), FRAMES[plan.frame_kind]
    scales = [_scale(group, POSITIONS[name], plan, points) for name, points in plan.axes.items()]
    times = _times(group, plan, plan.frames)
    rows = rows_per_chunk(plan.frames, plan.frame_bytes)
    dataset = group.create_dataset(
        column.name,
        shape=(0, *plan.frame_shape),
        maxshape=(None, *plan.frame_shape),
        chunks=(rows, *plan.frame_shape),
        dtype=plan.frame_dtype,
        # Else the first frame of a chunk would wait for zeros to be written for all of them.
        fill_time="never",
    )
    _index(dataset)
    _label(dataset, column, plan)
    _attach(dataset, [times, *scales])


def _growing(group: h5py.Group, plan: RunPlan, expected: int, *columns: Column) -> None:
    times = _times(group, plan, expected)
    for column in columns:
        dataset = _empty(group, column, plan, expected)
        _attach(dataset, [times])


def _times(group: h5py.Group, plan: RunPlan, expected: int) -> h5py.Dataset:
    times = _empty(group, TIME, plan, expected, fillvalue=np.nan)
    times.make_scale("time")
    return times


def _empty(
    group: h5py.Group, column: Column, plan: RunPlan, expected: int, fillvalue: float | None = None
) -> h5py.Dataset:
    chunk = rows_per_chunk(expected, column.dtype.itemsize)
    dataset = group.create_dataset(
        column.name,
        shape=(0,),
        maxshape=(None,),
        chunks=(chunk,),
        dtype=column.dtype,
        fillvalue=fillvalue,
    )
    _index(dataset)
    _label(dataset, column, plan)
    return dataset


def _index(dataset: h5py.Dataset) -> None:
    """Make HDF5 lay out the index of the chunks, which it would do at the first row.

    Done while the run is live, a kill could leave the dataset pointing to an
    index that never reached the disk.
    """
    dataset.resize(1, axis=0)
    dataset[0] = np.zeros(dataset.shape[1:], dataset.dtype)
    dataset.resize(0, axis=0)


def _unknown(group: h5py.Group, column: Column, plan: RunPlan, scales: list[h5py.Dataset]) -> None:
    shape = tuple(len(scale) for scale in scales)
    dataset = group.create_dataset(column.name, data=np.full(shape, np.nan))
    _label(dataset, column, plan)
    _attach(dataset, scales)


def _scale(
    group: h5py.Group, column: Column, plan: RunPlan, points: npt.NDArray[Any]
) -> h5py.Dataset:
    dataset = group.create_dataset(column.name, data=np.asarray(points, dtype=np.float64))
    _label(dataset, column, plan)
    dataset.make_scale(column.name)
    return dataset


def _label(dataset: h5py.Dataset, column: Column, plan: RunPlan) -> None:
    dataset.attrs["units"] = plan.unit(column)
    dataset.attrs["long_name"] = column.long_name


def _attach(dataset: h5py.Dataset, scales: list[h5py.Dataset]) -> None:
    for dimension, scale in zip(dataset.dims, scales, strict=True):
        dimension.attach_scale(scale)
