"""The files of numbers a scenario is made of, and what a run calls its copies."""

import hashlib
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Final, TypeAlias

from wavepack.errors import UsageError
from wavepack.physics.packet_free import TablePacket
from wavepack.physics.shapes_free import Table
from wavepack.scenario.schema import Scenario

#: Where a run folder keeps its copies.
TABLES: Final = "tables"

FromFile: TypeAlias = Table | TablePacket


def tables(scenario: Scenario) -> dict[str, str]:
    """Return the file of each table by the name of its copy, from the run folder."""
    return {_kept_name(kind, item): item.file for kind, item in _from_files(scenario)}


def digests(scenario: Scenario) -> dict[str, str]:
    """Return the SHA-256 of each table by the name of its copy.

    Raises
    ------
    UsageError
        If a file cannot be read.
    """
    return {name: digest(file) for name, file in tables(scenario).items()}


def digest(file: str | Path) -> str:
    """Return the SHA-256 of a file's content.

    Raises
    ------
    UsageError
        If it cannot be read.
    """
    try:
        with Path(file).open("rb") as opened:
            return hashlib.file_digest(opened, "sha256").hexdigest()
    except OSError as error:
        raise UsageError(f"{file}: cannot be read: {error.strerror}") from error


def with_copies(scenario: Scenario) -> Scenario:
    """Return the scenario with every table named as the run's copy of it."""
    return _renamed(scenario, _kept_name)


def relative_to(scenario: Scenario, folder: Path) -> Scenario:
    """Return the scenario with tables inside a folder named from there."""
    inside = folder.resolve()

    def name(kind: str, item: FromFile) -> str:
        del kind
        file = Path(item.file)
        return file.relative_to(inside).as_posix() if file.is_relative_to(inside) else item.file

    return _renamed(scenario, name)


def _kept_name(kind: str, item: FromFile) -> str:
    # Names hold no dot and are unique within their kind.
    return f"{TABLES}/{kind}.{item.name}{Path(item.file).suffix}"


def _from_files(scenario: Scenario) -> Iterator[tuple[str, FromFile]]:
    for kind in ("potential", "packet"):
        for item in getattr(scenario, kind):
            if isinstance(item, FromFile):
                yield kind, item


def _renamed(scenario: Scenario, name: Callable[[str, FromFile], str]) -> Scenario:
    pieces = tuple(
        replace(item, file=name("potential", item)) if isinstance(item, Table) else item
        for item in scenario.potential
    )
    packets = tuple(
        replace(item, file=name("packet", item)) if isinstance(item, TablePacket) else item
        for item in scenario.packet
    )
    return replace(scenario, potential=pieces, packet=packets)
