"""A run's own copies of its tables: made at the start, proven at every resume."""

import hashlib
from collections.abc import Mapping
from pathlib import Path

from wavepack.archive.disk import machine_errors, write_atomically
from wavepack.errors import UsageError
from wavepack.scenario.schema import Scenario
from wavepack.scenario.tables import digest, digests, relative_to, tables, with_copies


def copy_tables(scenario: Scenario, folder: Path, expected: Mapping[str, str]) -> None:
    """Copy every table of a scenario into the run folder.

    ``expected`` holds the SHA-256 that each had when it was used.

    Raises
    ------
    UsageError
        If a file cannot be read, or has changed since.
    MachineError
        If the folder cannot be written.
    """
    for name, file in tables(scenario).items():
        try:
            content = Path(file).read_bytes()
        except OSError as error:
            raise UsageError(f"{file}: cannot be read: {error.strerror}") from error
        if hashlib.sha256(content).hexdigest() != expected[name]:
            raise UsageError(f"{file}: changed while the run was made ready; run it again")
        target = folder / name
        if target.resolve() == Path(file).resolve():
            continue
        with machine_errors(target.parent, folder):
            target.parent.mkdir(exist_ok=True)
        write_atomically(target, content)


def check_tables(scenario: Scenario, folder: Path, expected: Mapping[str, str]) -> None:
    """Refuse to go on with other tables than a run was started with.

    Raises
    ------
    UsageError
        Naming the file that is another, missing, or outside the folder.
    """
    for file in tables(relative_to(scenario, folder)).values():
        if file not in expected:
            raise UsageError(
                f"{folder}: the scenario in it reads {file}, which is not a table the run was "
                f"started with ({', '.join(expected)}); name that one again"
            )
    for name, wanted in expected.items():
        path = folder / name
        if digest(path) != wanted:
            raise UsageError(
                f"{path}: is not the table the run was started with; put that one back, or start "
                "a new run with this one"
            )


def as_kept(scenario: Scenario, folder: Path) -> Scenario:
    """Return a scenario with the run folder's tables in the place of its own, if they are equal."""
    kept = with_copies(scenario)
    try:
        same = all(digest(folder / name) == own for name, own in digests(scenario).items())
    except UsageError:
        return scenario
    return kept if same else scenario
