"""A leg of a bridge: a transistor to the rail and one to ground, which a gate driver turns on in turns."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, ClassVar, Literal

from pydantic import model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Corner, Part, Stamp, listed, named_part
from boardsim.parts.elements import GROUND, Ammeter, Element, Probe, Resistor, VoltageLaw, scaled, voltage
from boardsim.parts.gate_driver import GateDriver
from boardsim.parts.gate_spread import RESISTANCES, charge_spread, paced, resistance_spread, times_in
from boardsim.parts.mosfet import Mosfet, NMosfet
from boardsim.parts.mosfet_stamp import Place, mosfet_stamp
from boardsim.parts.p_mosfet import PMosfet
from boardsim.parts.rules import FloorRule, MeanRule, PeakRule, Rule, ShootThroughRule
from boardsim.quantities import RESISTANCE, Quantity

_TOO_HIGH = "a driver with a lower supply, or a gate rating that stands it"
_TOO_LOW = "a driver with a higher supply, or a transistor that is specified at this gate voltage"
_STOPS = 16  # while a gate follows the driver; each costs a run some short steps, whatever its tolerance


class Leg(Part):
    """Two transistors between rail and ground with a load at their middle; what a half bridge is, and a full one has twice.

    Notes
    -----
    Whichever transistor is on carries the load's current in either direction, so that currents are held against ratings by their
    magnitudes. In the dead time the current flows through a body diode. An N-channel transistor at the high side takes a driver
    whose supply floats on the leg.
    """

    side: ClassVar[Literal["low", "high"]] = "high"
    high: named_part(PMosfet, NMosfet)  # type: ignore[valid-type]
    low: named_part(NMosfet)  # type: ignore[valid-type]
    gate: Annotated[Quantity, RESISTANCE]
    driver: GateDriver

    @model_validator(mode="after")
    def _of_ours(self) -> Leg:
        for end in (self.high, self.low):
            if end.model is not None:
                raise QuantityError(
                    "a bridge takes no vendors' models: what is read is the voltage at the chip's gate, which lies inside them"
                )
        return self

    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    @property
    def part(self) -> Mosfet:
        """The transistor that turns the coil on."""
        found: Mosfet = self.high
        return found

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary: breakdown, on-resistance and threshold, the driver's supply, and how quickly gates follow it."""
        return {
            "breakdown": self.high.breakdown,
            "on_resistance": self.high.spread,
            "threshold": self.high.threshold,
            "gate_supply": self.driver.supply,
            "charge_high": charge_spread(self.high),
            "charge_low": charge_spread(self.low),
            RESISTANCES: self._resistance_spread(),
        }

    def tolerances_too(self) -> tuple[tuple[str, Quantity], ...]:
        """The low transistor's, as the high one's."""
        low: Mosfet = self.low
        return ("breakdown", low.breakdown), ("on_resistance", low.spread), ("threshold", low.threshold)

    def taken_at_ends(self) -> tuple[Quantity, ...]:
        """The least dead time, the longest delay and either end of the threshold count; charges, resistances and on-resistances lie within what is varied."""
        found = [
            self.driver.dead_time,
            self.driver.delay,
            self.driver.threshold,
            self.driver.output_resistance,
            self.gate,
        ]
        for part in (self.high, self.low):
            found += [part.gate_drain_charge, part.gate_resistance, *(p.value for p in part.on_resistance)]
            found += [part.gate_charge] if part.gate_charge is not None else []
        return tuple(found)

    def _resistance_spread(self) -> Quantity:
        ways = ((self.driver.output_resistance, self.gate, part.gate_resistance) for part in (self.high, self.low))
        return resistance_spread(*ways)

    def steady_input(self, volts: float, resistance: float) -> float:
        """Through the driver's pull-down. [V], [ohm] -> [A]"""
        return 0.0 if self.driver.pulldown is None else volts / (resistance + self.driver.pulldown.min)

    def input_threshold(self) -> Quantity | None:
        """The driver's."""
        return self.driver.threshold

    def held_off(self) -> bool:
        """Whether the driver's input has a pull-down."""
        return self.driver.pulldown is not None

    def delays(self) -> tuple[float, float]:
        """The driver's delay, with the dead time before turning on. [s]"""
        return self.driver.delay.max + self.driver.dead_time.max, self.driver.delay.max

    def steady_for(self) -> float:
        """Seven times delay and dead time, see `GateDriver`. [s]"""
        return 7 * (self.driver.delay.typ + self.driver.dead_time.min)

    def moments(self) -> tuple[float, ...]:
        """Over both of the driver's edges, and from each on until the gates have followed: five times (R_o + R + R_g) Q / V. [s]

        What charges a gate to the driver's supply V is taken as C_iss V + Q_gd.
        """
        first = self.driver.delay.typ
        edge, both = self.driver.edge.typ, first + self.driver.dead_time.min
        last = max(self._settles(part) for part in (self.high, self.low))
        # The lags start where the register's edge crosses the threshold, somewhat before its end.
        after = (*(0.5 * edge * k for k in range(-4, 3)), *(last * k / _STOPS for k in range(1, _STOPS + 1)))
        return tuple(start + step for start in dict.fromkeys((first, both)) for step in after if start + step > 0)

    def _settles(self, part: Mosfet) -> float:
        """Five times what the driver takes for a gate's charge. [s]"""
        ohms = self.driver.output_resistance.max + self.gate.max + part.gate_resistance.max
        return 5 * ohms * (part.input_capacitance.max + part.gate_drain_charge.max / self.driver.supply.min)

    def control(self, name: str) -> str:
        """The high transistor's gate."""
        return f"{name}_gh"

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The leg between rail and ground, driven from `pin`, with its middle at the coil's node `load`."""
        driver, up, down = self.driver.elements(name, pin, rail, corner)
        sources, outs = self._sources(load, rail), self._outs(name)
        elements: list[Element] = [*driver]
        for end, part, law in (("h", self.high, up), ("l", self.low, down)):
            sign, gate, out = (-1.0 if part.mirrored else 1.0), f"{name}_g{end}", outs[end]
            slow, quick = times_in(corner, end, charge_spread(part), self._resistance_spread())
            wanted, held = f"V({name}_w{end})", f"{sign!r}*(V({gate})-V({sources[end]}))"
            elements += [
                VoltageLaw(f"{name}_w{end}", f"{name}_w{end}", GROUND, law),
                VoltageLaw(out, out, sources[end], f"{sign!r}*({paced(wanted, held, slow, quick)})"),
            ]
        return self._built(name, load, corner, rail, elements)

    def resting(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The same leg where its pin stays low all the time: its driver then holds the high transistor off and the low one on.

        What the driver's lags and edges come to when nothing ever moves, without them: of many legs that rest while few are fired
        they would be most of what a run computes.
        """
        sources, outs = self._sources(load, rail), self._outs(name)
        elements: list[Element] = [
            Ammeter(outs["h"], outs["h"], sources["h"]),
            VoltageLaw(outs["l"], outs["l"], sources["l"], self.driver.level(rail, corner)),
            *self.driver.load(name, pin),
        ]
        return self._built(name, load, corner, rail, elements)

    def _sources(self, load: str, rail: str) -> dict[str, str]:
        """Where the sources of the high and the low transistor are."""
        return {"h": rail if self.high.mirrored else load, "l": GROUND}

    def _outs(self, name: str) -> dict[str, str]:
        """The driver's output for each of them."""
        return {"h": f"{name}_oh", "l": f"{name}_ol"}

    def _built(self, name: str, load: str, corner: Corner, rail: str, elements: list[Element]) -> Stamp:
        """Both transistors behind what drives their gates, and what judges them."""
        sources, outs = self._sources(load, rail), self._outs(name)
        stamps: dict[str, Stamp] = {}
        for end, part, who in (("h", self.high, "high transistor"), ("l", self.low, "low transistor")):
            sign, gate, out = (-1.0 if part.mirrored else 1.0), f"{name}_g{end}", outs[end]
            ohms = self.driver.output_resistance.typ + self.gate.typ + part.gate_resistance.typ
            elements += [Resistor(f"{name}_r{end}", out, gate, ohms)]
            into = scaled(sign / ohms, voltage(out, gate))
            drain = load if part.mirrored or end == "l" else rail
            place = Place(drain, gate, sources[end], who, "" if end == "h" else "_low", _TOO_HIGH, _TOO_LOW)
            stamps[end] = either_way(
                mosfet_stamp(part, f"{name}_{end}", place, into, corner, bare=True), place, f"{name}_{end}"
            )
        found = stamps["h"]
        shoot = ShootThroughRule(
            "shoot-through",
            ("v_gs", "v_gs_low"),
            ("i_d", "i_d_low"),
            (turns_on(self.high, corner), turns_on(self.low, corner)),
            self.driver.dead_time.min,
            str(self.driver.dead_time.origin),
        )
        numbers = listed(
            "gate driver",
            delay=self.driver.delay,
            edge=self.driver.edge,
            output_resistance=self.driver.output_resistance,
            input_threshold=self.driver.threshold,
        )
        return replace(
            found,
            elements=(*found.elements, *elements),
            rules=(*found.rules, shoot),
            assumptions=(*found.assumptions, *numbers),
            inside=((self.low.title or "low transistor", stamps["l"]),),
        )


def either_way(stamp: Stamp, place: Place, name: str) -> Stamp:
    """A transistor that carries current in both directions, held against its ratings by the magnitude of that current.

    Notes
    -----
    Averages of a current that goes to and fro cancel, and one that only runs backwards is below every limit: what counts is
    the average of |i_d|, which takes a node of its own. The channel carries a reverse current as well as a forward one, and
    the body diode is rated as the channel is (common practice of data sheets: "continuous source current"). The driver's
    supply does not hang on the logic rail, so that any pulse speaks for the drive of all.
    """
    i_d, size = place.of("i_d"), place.of("i_d_size")
    law = VoltageLaw(f"{name}_size", f"{name}_size", GROUND, f"abs(I(V{name}_d))")
    return replace(
        stamp,
        elements=(*stamp.elements, law),
        probes=(*stamp.probes, Probe(size, voltage(f"{name}_size"), "A")),
        rules=tuple(_either_way(rule, i_d, size) for rule in stamp.rules),
    )


def _either_way(rule: Rule, i_d: str, size: str) -> Rule:
    match rule:
        case PeakRule(quantity=quantity) if quantity == i_d:
            return replace(rule, magnitude=True)
        case MeanRule(quantities=quantities) if quantities == (i_d,):
            return replace(rule, quantities=(size,))
        case FloorRule():
            return replace(rule, any_time=True)
        case _:
            return rule


def turns_on(part: Mosfet, corner: Corner) -> float:
    """The gate voltage at which a transistor begins to conduct in a corner: its threshold there. [V]"""
    return corner.take(part.threshold, "threshold") + corner.drifted(part.drift_of_threshold.typ)
