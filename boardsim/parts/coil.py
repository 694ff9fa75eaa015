"""A coil of fixed inductance: winding, inductance, core loss, pull-in and release current; or what such numbers follow from."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, Part, Stamp, Surroundings, listed
from boardsim.parts.copper import resistance_at
from boardsim.parts.elements import (
    CurrentLaw,
    Element,
    Inductor,
    Port,
    Probe,
    Resistor,
    Signal,
    Stored,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.known_coil import MeasuredLoss, MeasuredRise, inductance_from, loss_of_quality, resistance_from
from boardsim.parts.rules import HoldRule, IdleRule, Limit, MotionRule, PullInRule, ReleaseRule, Rule
from boardsim.parts.saturation import AIR_SHARE, Curve, Saturation
from boardsim.parts.winding import ENAMEL_SOURCE, Winding
from boardsim.quantities import (
    CURRENT,
    INDUCTANCE,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    POWER,
    RESISTANCE,
    TEMPERATURE,
    TEMPERATURE_RISE,
    VOLTAGE,
    Quantity,
    assume,
    computed,
    in_units,
)

_CORE_LOSS_FACTOR = 200
IDLE_SHARE = 0.1  # of the settled current, where no release current is given: below it nothing is held, from memory

HELD_BY_RELEASE = "no hold current given: its release current, above which it does not let go"


def without_default(schema: dict[str, Any]) -> None:
    """A number that follows from others where it was not given has no default of its own."""
    schema.pop("default", None)


class Coil(Part):
    """A solenoid, valve, relay or selector coil.

    Notes
    -----
    Winding resistance in series with (inductance parallel to a core-loss resistance). Resistance follows the
    winding's temperature as copper does. Its iron saturates where `saturation` says so; ignores the plunger's motion.
    """

    role: ClassVar[str] = "coil"
    saturates: ClassVar[bool] = True  # each kind says so itself: one whose field leaves it out must not take the key
    kind: Literal["coil"] = "coil"
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        None,
        description="of the winding; from two of the ratings, or from the winding, if absent",
        json_schema_extra=without_default,
    )  # type: ignore[assignment]  # never None once the coil is read
    rated_voltage: Annotated[Quantity, VOLTAGE] | None = Field(None, description="voltage on its nameplate")
    rated_current: Annotated[Quantity, CURRENT] | None = Field(None, description="current at the rated voltage")
    rated_power: Annotated[Quantity, POWER] | None = Field(None, description="power at the rated voltage")
    winding: Winding | None = Field(None, description="turns, wire and bobbin, of one that is wound to order")
    at: Annotated[Quantity, TEMPERATURE] = assume(
        "20 degC", TEMPERATURE, "coil data are given at 20 degC, common practice"
    )
    inductance: Annotated[Quantity, INDUCTANCE] = Field(
        None,
        description="or a band such as '8 to 14 mH'; from measured_rise or from the winding if absent",
        json_schema_extra=without_default,
    )  # type: ignore[assignment]  # never None once the coil is read
    measured_rise: MeasuredRise | None = Field(None, description="one point of its current after switching it on")
    core_loss: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(
        None, description="resistance across the inductance that stands for it; or measured_loss"
    )
    measured_loss: MeasuredLoss | None = Field(
        None, description="quality of the coil at a frequency, or how it rings with a capacitor"
    )
    saturation: Saturation | None = Field(None, description="how much of its inductance is left at a current")
    pull_in: Annotated[Quantity, CURRENT] | None = None
    release: Annotated[Quantity, CURRENT] | None = None
    hold: Annotated[Quantity, CURRENT] | None = Field(
        None, description="least current that keeps it in while it is held; its release current if absent"
    )
    longest_on: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="longest time that the firmware may leave it on at once"
    )
    least_off: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="least time that the firmware has to leave it off before the next pulse"
    )
    rise: Annotated[Quantity, TEMPERATURE_RISE] = assume(
        "0 K",
        TEMPERATURE_RISE,
        "no temperature rise of the winding given: hot means the highest ambient only",
    )

    @model_validator(mode="after")
    def _from_what_is_known(self) -> Coil:
        given = self.model_fields_set
        told = self.told_inductance()
        ohms = resistance_from(
            self.resistance if "resistance" in given else None,
            {"voltage": self.rated_voltage, "current": self.rated_current, "power": self.rated_power},
            self.winding,
            self.at.typ,
        )
        henries = inductance_from(told, self.measured_rise, self.winding, ohms)
        # Frozen for everybody else: these two follow from other fields, and every reader needs them.
        object.__setattr__(self, "resistance", ohms)
        object.__setattr__(self, "inductance", henries)
        if self.core_loss is not None and self.measured_loss is not None:
            raise QuantityError("core_loss and measured_loss both tell the core loss; give one of them")
        _ = self.loss  # a quality that cannot be is refused here
        return self

    def told_inductance(self) -> Quantity | None:
        """The inductance that the file itself gives, if it does. [H]"""
        return self.inductance if "inductance" in self.model_fields_set else None

    @model_validator(mode="after")
    def _saturates(self) -> Coil:
        if self.saturation is None:
            return self
        if "saturates" not in type(self).__dict__:
            raise QuantityError(f'saturation is not part of the model of a coil of kind "{self.kind}"; leave it out')
        for henries in (self.full_inductance.min, self.full_inductance.typ, self.full_inductance.max):
            self.saturation.curve(henries, self.air_core.typ)
        return self

    @model_validator(mode="after")
    def _lets_go_below_pull_in(self) -> Coil:
        if self.pull_in is not None and self.release is not None and self.release.min >= self.pull_in.max:
            raise QuantityError(
                "release must be smaller than pull_in: a coil lets go at less current than it pulls in with"
            )
        if self.hold is not None and self.pull_in is not None and self.hold.min > self.pull_in.max:
            raise QuantityError("hold must not be larger than pull_in: what pulls it in keeps it in as well")
        if self.hold is not None and self.release is not None and self.hold.max < self.release.min:
            raise QuantityError("hold must not be smaller than release: below that it lets go")
        return self

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part."""
        return {"coil_resistance": self.resistance, "inductance": self.inductance}

    def ohms(self, corner: Corner, around: Surroundings | None) -> float:
        """Winding resistance in a corner. [ohm]"""
        r = corner.take(self.resistance, "coil_resistance")
        if around is None or corner.winding == "reference":
            return r
        t = around.ambient_low if corner.winding == "cold" else around.ambient_high + self.rise.typ
        return resistance_at(r, self.at.typ, t)

    @property
    def loss(self) -> Quantity:
        """Core-loss resistance across the inductance; assumed where nothing tells it. [ohm]"""
        if self.measured_loss is not None:
            q, f = self.measured_loss.quality, self.measured_loss.frequency.typ
            found = loss_of_quality(q, f, self.inductance.typ, self.resistance.typ)
            return computed(found, "ohm", "from its measured quality")
        return self.core_loss or assume(
            f"{_CORE_LOSS_FACTOR * self.resistance.typ:.6g} ohm",
            RESISTANCE,
            f"{_CORE_LOSS_FACTOR} times the winding resistance, from memory; solid iron loses more",
        )

    @property
    def inductances(self) -> tuple[float, float]:
        """The least and the largest that it has. [H]"""
        return self.inductance.min, self.inductance.max

    harmless_name: ClassVar[str] = "release current"
    """What reports call the current that it may carry while nobody commands it."""

    @property
    def harmless(self) -> Quantity | None:
        """What it may carry for ever while nobody commands it; None where that was not given. [A]"""
        return self.release

    @property
    def full_inductance(self) -> Quantity:
        """That which its saturation counts from: with the iron as closed as it gets. [H]"""
        return self.inductance

    @property
    def air_core(self) -> Quantity:
        """What is left of the inductance beyond saturation. [H]"""
        if self.saturation is not None and self.saturation.air_core is not None:
            return self.saturation.air_core
        if self.winding is not None:
            return computed(self.winding.wound().inductance, "H", "of the winding without iron, Wheeler's formula")
        return assume(
            f"{AIR_SHARE * self.full_inductance.typ:.6g} H",
            INDUCTANCE,
            f"{AIR_SHARE:.0%} of the inductance is left once the iron has saturated, from memory; give air_core",
        )

    def curve(self, corner: Corner) -> Curve | None:
        """Its flux linkage over current, where it saturates."""
        if self.saturation is None:
            return None
        return self.saturation.curve(corner.take(self.full_inductance, "inductance"), self.air_core.typ)

    def least_inductance(self, volts: float) -> float:
        """The least flux linkage per current, with this voltage across it at most: how fast its current comes and goes. [V] -> [H]

        Of iron that saturates, in series with the gap that is left where the least inductance is not that of closed iron. That for small
        changes is less, but only until the current has left the knee: steps that follow it cost three times the points on a board of
        24, and those that follow this one meet release times and clamp energies within 0.3 % in the second run.
        """
        least, full = self.inductances[0], self.full_inductance.min
        if self.saturation is None:
            return least
        most = volts / self.resistance.min
        left = self.saturation.curve(full, self.air_core.typ).flux_at(most) / most
        return 1 / (1 / least - 1 / full + 1 / left)

    @property
    def return_time(self) -> float:
        """How long what it moves needs to come back once the current is gone; 0 where motion is not described. [s]"""
        return 0.0

    def held(self, amperes: float, corner: Corner) -> float:
        """The most that its field can hold at a current. [A] -> [J]"""
        curve = self.curve(corner)
        if curve is not None:
            return float(curve.energy(curve.flux_at(amperes)))
        return 0.5 * corner.take(self.inductance, "inductance") * amperes**2

    def field(self, name: str, a: str, b: str, corner: Corner) -> tuple[tuple[Element, ...], Signal | None]:
        """What lies behind the winding's resistance, beside the core loss, and its current.

        None where no element carries all of it: it is then what goes through the winding's resistance and not through the core loss.
        """
        coil = Inductor(f"{name}_l", a, b, corner.take(self.inductance, "inductance"))
        curve = self.curve(corner)
        if curve is None:
            return (coil,), current(coil)
        # Beside it flows what its iron takes more; its own current tells the flux linkage.
        return (coil, CurrentLaw(coil.name, b, a, curve.expression(f"I(L{coil.name})", coil.henries))), None

    def more_probes(self, name: str, corner: Corner) -> tuple[Probe, ...]:
        """What a kind reads beyond voltages and currents."""
        if self.saturation is None:
            return ()
        return (Probe("flux", ((corner.take(self.inductance, "inductance"), f"i(l{name}_l)"),), "Wb"),)

    def stored(self, corner: Corner) -> Stored | None:
        """What a kind stores, where that is not L i^2 / 2."""
        curve = self.curve(corner)
        return None if curve is None else Stored(("flux",), curve.energy)

    def more_rules(self) -> tuple[Rule, ...]:
        """What a kind is held against beyond pull-in and release."""
        return ()

    def more_assumed(self, label: str) -> tuple[Assumption, ...]:
        """What a kind had to suppose beyond what every coil does."""
        return ()

    def stamp(self, name: str, label: str, a: str, b: str, corner: Corner, around: Surroundings | None) -> Stamp:
        """The coil from node `a`, where its current enters while it is on, to node `b`."""
        mid = f"{name}_w"
        elements, inner = self.field(name, mid, b, corner)
        ohms, lost = self.ohms(corner, around), scaled(1 / self.loss.typ, voltage(mid, b))
        through = plus(inner, lost) if inner is not None else scaled(1 / ohms, voltage(a, mid))
        inner = inner if inner is not None else plus(through, scaled(-1, lost))
        pairs, more = (("v_coil", "i_coil"),), self.stored(corner)
        store = ("i_l", corner.take(self.inductance, "inductance")) if more is None else None
        port = Port("coil", pairs, store=store, energy=more)
        pull_in = Limit.of(self.pull_in, "pull-in current", "A", None, self.pull_in.max if self.pull_in else None)
        release = Limit.of(self.release, "release current", "A", None, self.release.min if self.release else None)
        return Stamp(
            elements=(
                Resistor(f"{name}_r", a, mid, ohms),
                *elements,
                Resistor(f"{name}_core", mid, b, self.loss.typ),
            ),
            probes=(
                Probe("v_coil", voltage(a, b), "V"),
                Probe("i_coil", through, "A"),
                Probe("i_l", inner, "A"),
                *self.more_probes(name, corner),
            ),
            ports=(port,),
            rules=(
                PullInRule("pull-in", "i_coil", pull_in),
                ReleaseRule("overlap", "i_coil", release),
                IdleRule("uncommanded", "i_coil", release, IDLE_SHARE),
                *self._hold_rule(),
                *self.more_rules(),
            ),
            assumptions=self._assumed(label),
        )

    def _hold_rule(self) -> tuple[Rule, ...]:
        """The current that keeps it in; none of a coil whose motion says so itself."""
        if self.hold is not None:
            limit = Limit.of(self.hold, "hold current", "A", None, self.hold.max)
        elif any(isinstance(rule, MotionRule) for rule in self.more_rules()):
            return ()
        elif self.release is not None:
            limit = Limit(self.release.max, "A", None, f"assumed: {HELD_BY_RELEASE}", "hold current")
        else:
            limit = Limit.of(None, "hold current", "A", None)
        return (HoldRule("hold", "i_coil", limit),)

    def _assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied."""
        found = listed(
            f"coil {label}",
            temperature_of_the_given_resistance=self.at,
            core_loss_resistance=self.loss,
            temperature_rise_of_the_winding=self.rise,
        )
        if self.saturation is not None:
            found += listed(f"coil {label}", inductance_without_iron=self.air_core)
            found += self.saturation.assumed(f"coil {label}")
        if self.harmless is None:
            why = f"no {self.harmless_name} given: what a coil that is off may carry, from memory"
            found += (Assumption(f"coil {label}", "harmless current", f"{IDLE_SHARE:.0%} of the settled one", why),)
        return (*found, *self._of_the_winding(label), *self.more_assumed(label))

    def _of_the_winding(self, label: str) -> tuple[Assumption, ...]:
        """What a winding comes out as, and what had to be supplied for it."""
        if self.winding is None:
            return ()
        wound = Assumption(
            f"coil {label}", "winding", str(self.winding.wound()), "computed from turns, wire and bobbin"
        )
        if self.winding.over_enamel is not None:
            return (wound,)
        over = in_units(self.winding.diameter, "m")
        return wound, Assumption(f"coil {label}", "diameter over the enamel", over, ENAMEL_SOURCE)
