"""A coil of fixed inductance: winding, inductance, core loss, pull-in and release current; or what such numbers follow from."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, Part, Stamp, Surroundings, listed
from boardsim.parts.copper import resistance_at
from boardsim.parts.elements import (
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
from boardsim.parts.known_coil import MeasuredRise, inductance_from, resistance_from
from boardsim.parts.rules import IdleRule, Limit, PullInRule, ReleaseRule, Rule
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
    in_units,
)

_CORE_LOSS_FACTOR = 200
IDLE_SHARE = 0.1  # of the settled current, where no release current is given: below it nothing is held, from memory


def _without_default(schema: dict[str, Any]) -> None:
    """A number that follows from others where it was not given has no default of its own."""
    schema.pop("default", None)


class Coil(Part):
    """A solenoid, valve, relay or selector coil.

    Notes
    -----
    Winding resistance in series with (inductance parallel to a core-loss resistance). Resistance follows the
    winding's temperature as copper does. Ignores saturation and the plunger's motion.
    """

    role: ClassVar[str] = "coil"
    kind: Literal["coil"] = "coil"
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        None,
        description="of the winding; from two of the ratings, or from the winding, if absent",
        json_schema_extra=_without_default,
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
        json_schema_extra=_without_default,
    )  # type: ignore[assignment]  # never None once the coil is read
    measured_rise: MeasuredRise | None = Field(None, description="one point of its current after switching it on")
    core_loss: Annotated[Quantity, POSITIVE_RESISTANCE] | None = None
    pull_in: Annotated[Quantity, CURRENT] | None = None
    release: Annotated[Quantity, CURRENT] | None = None
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
        ohms = resistance_from(
            self.resistance if "resistance" in given else None,
            {"voltage": self.rated_voltage, "current": self.rated_current, "power": self.rated_power},
            self.winding,
            self.at.typ,
        )
        henries = inductance_from(
            self.inductance if "inductance" in given else None, self.measured_rise, self.winding, ohms
        )
        # Frozen for everybody else: these two follow from other fields, and every reader needs them.
        object.__setattr__(self, "resistance", ohms)
        object.__setattr__(self, "inductance", henries)
        return self

    @model_validator(mode="after")
    def _lets_go_below_pull_in(self) -> Coil:
        if self.pull_in is not None and self.release is not None and self.release.min >= self.pull_in.max:
            raise QuantityError(
                "release must be smaller than pull_in: a coil lets go at less current than it pulls in with"
            )
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
        """Core-loss resistance across the inductance; assumed where it was not given. [ohm]"""
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
    def return_time(self) -> float:
        """How long what it moves needs to come back once the current is gone; 0 where motion is not described. [s]"""
        return 0.0

    def held(self, amperes: float, corner: Corner) -> float:
        """The most that its field can hold at a current. [A] -> [J]"""
        return 0.5 * corner.take(self.inductance, "inductance") * amperes**2

    def field(self, name: str, a: str, b: str, corner: Corner) -> tuple[tuple[Element, ...], Signal | None]:
        """What lies behind the winding's resistance, beside the core loss, and its current.

        None where no element carries all of it: it is then what goes through the winding's resistance and not through the core loss.
        """
        coil = Inductor(f"{name}_l", a, b, corner.take(self.inductance, "inductance"))
        return (coil,), current(coil)

    def more_probes(self, name: str, corner: Corner) -> tuple[Probe, ...]:
        """What a kind reads beyond voltages and currents."""
        return ()

    def stored(self, corner: Corner) -> Stored | None:
        """What a kind stores, where that is not L i^2 / 2."""
        return None

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
                *self.more_rules(),
            ),
            assumptions=self._assumed(label),
        )

    def _assumed(self, label: str) -> tuple[Assumption, ...]:
        """What had to be supplied."""
        found = listed(
            f"coil {label}",
            temperature_of_the_given_resistance=self.at,
            core_loss_resistance=self.loss,
            temperature_rise_of_the_winding=self.rise,
        )
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
