"""The box of a forecast: absorbers, where the packet starts, whether it can leave."""

import math
from collections.abc import Iterator
from typing import Final

import numpy as np

from wavepack.physics.packets import ChannelPacket, GaussianPacket
from wavepack.scenario.estimates import LayerForecast
from wavepack.scenario.survey import Survey
from wavepack.scenario.verdicts import Row, judged, up

#: The potential counts as uniform where it is off by less than this share of the kinetic energy.
UNIFORM: Final = 1e-3
#: Probability that may start where none should.
STRAY: Final = 1e-6


class BoxSurvey(Survey):
    """Looks at the ends of the grid and at the start."""

    def rows(self) -> Iterator[Row]:
        """Yield one row a topic."""
        yield from self._absorbers()
        yield from self._layers()
        yield self._clear_of_layers()
        if self.scatters and not self.prepared:
            yield self._clear_of_potential()
        yield from self._transmitted()
        yield from self._walls()
        yield self._departure()

    def _absorbers(self) -> Iterator[Row]:
        """Share that each layer gives back, over the energies expected."""
        self.quantities["reflection"] = {}
        for layer in self.estimates.layers:
            name = self.layer_name(layer)
            self.quantities["reflection"][name] = (layer.mean, layer.worst, layer.slow)
            verdict = self.verdict(layer.mean)
            found = f"gives back {layer.mean:.1g}, worst {layer.worst:.1g}"
            advice = self._wider(layer) if verdict != "good" else ""
            if layer.slow > self.limits[0]:
                verdict = "watch" if verdict == "good" else verdict
                advice = (
                    f"{layer.slow:.1g} of the packet is too slow or grazing for it; "
                    f"{advice or self._wider(layer)}"
                )
            yield Row(f"absorber, {name}", found, f"{self.limits[0]:.1g}", verdict, advice)

    def _wider(self, layer: LayerForecast) -> str:
        axis = self.setup.grid.axes[layer.layer.axis]
        width = self.estimates.wide_enough(layer, self.limits[0])
        if width is None:
            return (
                "take a much larger absorber.width: parts this slow no layer of twelve times "
                "the width absorbs"
            )
        spec = self.setup.scenario.absorber
        given = [
            f"absorber.{key}"
            for key in ("strength", "lowest_energy")
            if spec is not None and getattr(spec, key) is not None
        ]
        advice = f"take absorber.width = {up(width):g} {self.units.length} along {axis.name}"
        if width > axis.length / 3:
            advice += f", and widen grid.{axis.name} to make room"
        return advice + (f", and leave out {given[0]}" if given else "")

    def _layers(self) -> Iterator[Row]:
        """Whether V is constant through each layer along its normal."""
        for layer in self.estimates.layers:
            change = self.estimates.layer_slope(layer) / max(layer.kinetic, 1e-300)
            name = self.layer_name(layer)
            self.keep("layer_slope", name, change)
            verdict = judged(change, (0.02, 1.0))
            advice = ""
            axis = self.setup.grid.axes[layer.layer.axis]
            if verdict != "good":
                end = "to" if layer.layer.upper else "from"
                advice = (
                    "the potential varies through the layer, which was judged as if it did not; "
                    f"move grid.{axis.name}.{end} outward to where it is constant, or the pieces "
                    "inward"
                )
            elif self._driven_in(layer):
                verdict = "watch"
                advice = f"a driven piece reaches into the layer; limit its {axis.name}"
            yield Row(f"V through it, {name}", f"varies by {change:.1%}", "2%", verdict, advice)

    def _driven_in(self, layer: LayerForecast) -> bool:
        axis = layer.layer.axis
        for part in self.setup.landscape.driven:
            x = self.setup.grid.axes[axis].coordinates[part.box[axis]]
            inside = (x >= layer.layer.start) & (x <= layer.layer.stop)
            values = np.abs(np.moveaxis(part.values, axis, 0)[inside])
            if values.size and values.max() > UNIFORM * layer.kinetic:
                return True
        return False

    def _clear_of_layers(self) -> Row:
        """Whether the packet starts clear of the absorbers."""
        inside = self.estimates.start_in_layers
        self.quantities["start_in_layers"] = inside
        verdict = judged(inside, (STRAY, self.limits[0]))
        return Row(
            "start clear of absorbers",
            f"{inside:.1g} inside",
            f"{STRAY:g}",
            verdict,
            "that much of the packet starts in an absorber and is lost at once; move "
            "packet.center away from it, make absorber.width smaller, or widen the grid"
            if verdict != "good"
            else "",
        )

    def _clear_of_potential(self) -> Row:
        """Whether the packet starts where V is uniform."""
        touching = self._on_potential()
        self.quantities["start_on_potential"] = touching
        verdict = judged(touching, (1e-4, math.inf))
        return Row(
            "start clear of the potential",
            f"{touching:.1g} on it",
            "1e-4",
            verdict,
            "the packet starts where V varies: its energy is not that of its momenta, and no "
            "transmission by energy can be given; move packet.center away or make "
            "packet.sigma smaller"
            if verdict != "good"
            else "",
        )

    def _transmitted(self) -> Iterator[Row]:
        if not any(spec.role == "transmitted" for spec in self.setup.scenario.region):
            return
        whole = tuple(slice(0, n) for n in self.setup.grid.shape)
        there = float(self.setup.book.sums(whole, self.density)[0])
        self.quantities["start_transmitted"] = there
        verdict = judged(there, (self.limits[0] * 0.1, self.limits[1]))
        names = ", ".join(s.name for s in self.setup.scenario.region if s.role == "transmitted")
        yield Row(
            "start not yet transmitted",
            f"{there:.1g}",
            f"{self.limits[0] * 0.1:.1g}",
            verdict,
            f"that much starts in region {names} and counts as transmitted; move the region or "
            "the packet"
            if verdict != "good"
            else "",
        )

    def _walls(self) -> Iterator[Row]:
        """Packets cut off by the ends of the grid."""
        beyond: dict[str, float] = {}
        for packet in self.setup.scenario.packet:
            if not isinstance(packet, GaussianPacket | ChannelPacket):
                continue
            for line in self.setup.grid.axes:
                sigma, centre = packet.sigma.get(line.name), packet.center.get(line.name)
                if sigma is None or centre is None:
                    continue
                near = min(centre - line.start, line.stop - centre) / sigma
                share = math.erfc(near / math.sqrt(2)) / 2
                beyond[line.name] = max(beyond.get(line.name, 0.0), share)
        for name, share in beyond.items():
            self.keep("start_beyond", name, share)
            verdict = judged(share, (STRAY, 1e-2))
            yield Row(
                f"start inside the grid, {name}",
                f"{share:.1g} beyond",
                f"{STRAY:g}",
                verdict,
                f"the packet is cut by an end of the grid; move packet.center.{name} away from "
                f"it or widen grid.{name}"
                if verdict != "good"
                else "",
            )

    def _departure(self) -> Row:
        """Whether the slow part can leave before the end."""
        slow, needed = self.estimates.departure(self.limits[0] / 2)
        end = self.estimates.end
        self.quantities |= {"slow_share": slow, "time_needed": needed}
        if self.estimates.resting or self.prepared:
            return Row("time to leave", f"end {end:g} {self.units.time}", "not known", "good")
        if not needed:
            return Row("time to leave", "no absorbing end ahead", "any", "good")
        verdict = self.verdict(slow)
        unit = self.units.time
        advice = ""
        if verdict != "good":
            advice = (
                f"{slow:.1g} of the packet is still on its way then and stays unfinished; take "
                f"time.end = {up(needed):g} {unit} or more (what a resonance holds takes longer)"
            )
        return Row("time to leave", f"end {end:g} {unit}", f"{needed:.3g} {unit}", verdict, advice)

    def _on_potential(self) -> float:
        """Probability where V differs along the travel from V where the packet is centred."""
        axis, _ = self.estimates.travel
        tolerance = UNIFORM * self.setup.content.kinetic
        channel = any(isinstance(p, ChannelPacket) for p in self.setup.scenario.packet)
        static = np.moveaxis(self.setup.landscape.static, axis, 0)
        line = self.setup.grid.axes[axis]
        here = int(np.argmin(np.abs(line.coordinates - self.setup.content.centre[axis])))
        if channel or self.setup.grid.ndim == 1:
            changed = np.abs(static - static[here]) > tolerance
        else:
            centre = tuple(
                int(np.argmin(np.abs(a.coordinates - c)))
                for a, c in zip(self.setup.grid.axes, self.setup.content.centre, strict=True)
            )
            changed = np.abs(static - self.setup.landscape.static[centre]) > tolerance
        changed = np.moveaxis(changed, 0, axis)
        for part in self.setup.landscape.driven:
            largest = part.drive.largest(self.estimates.end)
            changed[part.box] |= largest * np.abs(part.values) > tolerance
        return float(self.density[changed].sum())
