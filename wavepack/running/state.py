"""What stands in a checkpoint besides the field and the books."""

import json
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from wavepack.arrays import RealArray
from wavepack.grid import spectral
from wavepack.observing.incident import Incident
from wavepack.scenario.build import Choices


@dataclass(frozen=True)
class Record:
    """What was settled at the start of a run and how far it has come.

    Attributes
    ----------
    choices : Choices
        What was chosen from the initial state.
    incidents : mapping
        Incident weight by energy of each detector.
    central_energy : float
        Total energy of the central momentum [energy], for sidebands.
    found : float or None
        Probability kept where the initial state was cut.
    before : tuple of real arrays
        Momentum distribution of the initial state along each axis.
    threads : int
        Threads of the transforms.
    knowledge : bytes
        What the transform planner knew.
    planner : str
        The transform library, for which that knowledge holds.
    step : int
        The step of the state.
    wall_seconds : float
        Time spent so far.
    end : float
        When the run is to end [time].
    former_ends : tuple of float
        Ends of the run before it was extended [time].
    tables : mapping
        SHA-256 of each table by its name from the run folder.
    """

    choices: Choices
    incidents: Mapping[str, Incident]
    central_energy: float
    found: float | None
    before: tuple[RealArray, ...]
    threads: int
    knowledge: bytes
    planner: str
    end: float
    step: int = 0
    wall_seconds: float = 0.0
    former_ends: tuple[float, ...] = ()
    tables: Mapping[str, str] = field(default_factory=dict)

    def at(self, step: int, wall_seconds: float) -> "Record":
        """Return the record at a later step."""
        return replace(self, step=step, wall_seconds=wall_seconds)

    def until(self, end: float) -> "Record":
        """Return the record with another end; the one it had is kept among the former."""
        if end == self.end:
            return self
        return replace(self, end=end, former_ends=(*self.former_ends, self.end))

    def save(self) -> dict[str, Any]:
        """Return plain values and arrays for a checkpoint."""
        facts = {
            "choices": self.choices.as_dict(),
            "central_energy": self.central_energy,
            "found": self.found,
            "threads": self.threads,
            "planner": self.planner,
            "step": self.step,
            "wall_seconds": self.wall_seconds,
            "end": self.end,
            "former_ends": self.former_ends,
            "tables": dict(self.tables),
            "reasons": {name: i.reason for name, i in self.incidents.items()},
            "phase_reasons": {name: i.phase_reason for name, i in self.incidents.items()},
        }
        state: dict[str, Any] = {"record": json.dumps(facts), "knowledge": self.knowledge}
        for name, incident in self.incidents.items():
            state[f"incident/{name}"] = np.array([incident.density, incident.away])
            if incident.free is not None:
                state[f"free/{name}"] = incident.free
        for i, density in enumerate(self.before):
            state[f"before/{i}"] = density
        return state

    @classmethod
    def restored(cls, state: Mapping[str, Any]) -> "Record":
        """Return the record that `save` described."""
        facts = json.loads(state["record"])
        phase_reasons = facts.pop("phase_reasons")
        incidents = {
            name: Incident(
                state[f"incident/{name}"][0],
                state[f"incident/{name}"][1],
                reason,
                state.get(f"free/{name}"),
                phase_reasons[name],
            )
            for name, reason in facts.pop("reasons").items()
        }
        count = sum(key.startswith("before/") for key in state)
        return cls(
            choices=Choices.from_dict(facts.pop("choices")),
            incidents=incidents,
            before=tuple(state[f"before/{i}"] for i in range(count)),
            knowledge=state["knowledge"],
            former_ends=tuple(facts.pop("former_ends")),
            **facts,
        )

    @property
    def plans_alike(self) -> bool:
        """Whether this process plans its transforms as the first one did."""
        return self.planner == spectral.planner_version()
