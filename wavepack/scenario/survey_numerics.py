"""The numerics of a forecast: grid and step."""

import math
from collections.abc import Iterator

import numpy as np

from wavepack.scenario.survey import Survey
from wavepack.scenario.verdicts import Row, Verdict, down, judged


class NumericsSurvey(Survey):
    """Looks at the spacing, the step and the detectors' sampling."""

    def rows(self) -> Iterator[Row]:
        """Yield one row a topic."""
        yield from self._momentum()
        yield from self._wavelength()
        yield from self._resonance()
        yield self._phase()
        yield self._step_error()
        yield from self._order()
        yield self._spacing_error()
        yield from self._detectors()

    def _momentum(self) -> Iterator[Row]:
        """Largest momentum of the packet anywhere against the grid's."""
        for i, line in enumerate(self.setup.grid.axes):
            limit, need = line.largest_wavenumber, self.estimates.steepest[i]
            self.keep("momentum", line.name, need / limit)
            verdict: Verdict = "good" if need < 0.9 * limit else "watch"
            advice = ""
            lost = self.estimates.near_limit(i) > self.limits[0]
            if self.estimates.fastest[i] > limit or need > 1.2 * limit or lost:
                verdict = "bad"
            if verdict != "good":
                points = self.points(line, need / (0.8 * limit))
                advice = (
                    f"the packet reaches {need:.3g} in the deepest part of the potential; take "
                    f"grid.{line.name}.points = {points} or more"
                )
            yield Row(
                f"largest momentum, {line.name}",
                f"grid {limit:.3g} {self.units.symbol('wavenumber')}",
                f"packet {need:.3g}",
                verdict,
                advice,
            )

    def _wavelength(self) -> Iterator[Row]:
        """Points for each of the shortest waves."""
        if self.setup.spectral:
            least, enough = 2.0, 2.5
        elif self.setup.scenario.propagator.space_order == 4:
            least, enough = 4.0, 6.0
        else:
            least, enough = 6.0, 10.0
        for i, line in enumerate(self.setup.grid.axes):
            points = 2 * math.pi / (self.estimates.steepest[i] * line.spacing)
            self.keep("points_per_wavelength", line.name, points)
            verdict = judged(-points, (-enough, -least))
            advice = ""
            if verdict != "good":
                advice = (
                    f"take grid.{line.name}.points = {self.points(line, enough / points)} or more"
                )
            yield Row(
                f"points per wave, {line.name}", f"{points:.3g}", f"{enough:g}", verdict, advice
            )

    def _resonance(self) -> Iterator[Row]:
        """Step resonance of sharp edges."""
        if not self.setup.spectral:
            return
        phase, spurious = self.estimates.phase, self.estimates.resonance
        self.quantities |= {"grid_phase": phase, "resonance": spurious}
        found, needed = f"{phase:.3g}", "any: V is smooth"
        verdict: Verdict = "good"
        advice = ""
        if any(self.estimates.edged):
            needed = f"below {2 * math.pi:.3g}"
            if phase >= 2 * math.pi:
                found += f", resonant part {spurious:.1g}"
                verdict = judged(spurious, (self.limits[0] / 100, self.limits[1]))
        if verdict != "good":
            step = down(2 * math.pi * self.hbar / self.estimates.fastest_kicked)
            advice = (
                "sharp edges kick the packet to waves that the step cannot tell apart, which "
                "disturb most what a detector tells by energy; take propagator.step = "
                f"{step:g} {self.units.time} or less, or propagator.method = "
                '"crank-nicolson"'
            )
        yield Row("phase per step, grid", found, needed, verdict, advice)

    def _phase(self) -> Row:
        """How far the packet itself turns in a step."""
        phase = self.estimates.own_phase
        self.quantities["own_phase"] = phase
        if self.estimates.uniform:
            return Row("phase per step, packet", f"{phase:.3g}", "any: V is uniform", "good")
        step = down(self.setup.dt / phase)
        advice = f"take propagator.step = {step:g} {self.units.time} or less"
        verdict = judged(phase, (1.0, math.pi))
        return Row(
            "phase per step, packet",
            f"{phase:.3g}",
            "1",
            verdict,
            advice if verdict != "good" else "",
        )

    def _step_error(self) -> Row:
        error = self.estimates.step_error
        self.quantities["step_error"] = error
        verdict = self.verdict(error)
        order = 4 if self.setup.scenario.propagator.order == 4 and self.setup.spectral else 2
        advice = ""
        if verdict != "good":
            step = down(self.setup.dt * (self.limits[0] / error) ** (1 / order))
            advice = f"take propagator.step = {step:g} {self.units.time} or less"
            if order == 2 and self.setup.spectral and not any(self.estimates.edged):
                advice += ", or propagator.order = 4"
        return self.error_row("error of the step", error, verdict, advice)

    def _order(self) -> Iterator[Row]:
        """Order 4 at sharp edges."""
        propagator = self.setup.scenario.propagator
        if not (self.setup.spectral and propagator.order == 4 and any(self.estimates.edged)):
            return
        edges = self.estimates.spacing_error + self.estimates.resonance
        step = self.estimates.second_order
        if step > edges:
            yield Row("order at sharp edges", "4", "2 would be worse", "good")
            return
        yield Row(
            "order at sharp edges",
            "4",
            "2",
            "watch",
            f"order 4 brings nothing: the sharp edges leave an error of about {edges:.1g}, the "
            f"step at order 2 of {step:.1g}; propagator.order = 2 takes half the time",
        )

    def _spacing_error(self) -> Row:
        error = self.estimates.spacing_error
        self.quantities["spacing_error"] = error
        verdict = self.verdict(error)
        advice = ""
        if verdict != "good":
            fourth = self.setup.scenario.propagator.space_order == 4
            # Smoothed edges: order 2.7 measured, but no more than 2 on coarse grids.
            order = 4 if fourth else 2
            factor = (error / self.limits[0]) ** (1 / order)
            wanted = " and ".join(
                f"grid.{line.name}.points = {self.points(line, factor)}"
                for i, line in enumerate(self.setup.grid.axes)
                if not self.setup.spectral
                or self.estimates.jump[i] > 0
                or self.setup.grid.ndim == 1
            )
            advice = f"take {wanted} or more"
        return self.error_row("error of the spacing", error, verdict, advice)

    def _detectors(self) -> Iterator[Row]:
        """Whether the sampling in time tells all energies of the packet apart."""
        if not self.setup.spectral:
            return
        band = self.setup.band
        for spec in self.setup.scenario.detector:
            axis = self.setup.grid.index(spec.axis)
            need = self._kinetic_at(axis, spec.at)
            self.keep("detector_band", spec.name, band / need)
            verdict = judged(-band / need, (-1.2, -1.0))
            advice = ""
            if verdict != "good":
                step = down(math.pi * self.hbar / (1.3 * need))
                advice = f"take propagator.step = {step:g} {self.units.time} or less"
                if self.setup.choices.read_every > 1:
                    every = down(math.pi * self.hbar / (1.3 * need))
                    advice = f"take output.record_every = {every:g} {self.units.time} or less"
            yield Row(
                f"detector {spec.name}",
                f"band {band:.3g} {self.units.energy}",
                f"packet {need:.3g}",
                verdict,
                advice,
            )

    def _kinetic_at(self, axis: int, position: float) -> float:
        """Largest kinetic energy of the packet along an axis at a plane [energy]."""
        line = self.setup.grid.axes[axis]
        plane = np.moveaxis(self.setup.landscape.static, axis, 0)[
            int(np.argmin(np.abs(line.coordinates - position)))
        ]
        content = self.setup.content
        gain = max(content.launch - float(np.min(plane)), 0.0)
        photons = 10 * max(content.photons, default=0.0)
        return self.setup.particle.stiffness * self.estimates.fastest[axis] ** 2 + gain + photons
