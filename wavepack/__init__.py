"""Time-dependent wavepacket propagation from one TOML file."""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from wavepack.archive.reader import open_run
    from wavepack.scenario.load import load_scenario
    from wavepack.workflow import run

__all__ = ["__version__", "load_scenario", "open_run", "run"]

__version__ = "0.1.0"

#: Where each public name lives. It is imported on first use: `import wavepack`
#: and the help texts of the command line need no numerical library.
_HOMES = {
    "load_scenario": "wavepack.scenario.load",
    "open_run": "wavepack.archive.reader",
    "run": "wavepack.workflow",
}


def __getattr__(name: str) -> Any:  # noqa: ANN401 - what is asked for decides
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
