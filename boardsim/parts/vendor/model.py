"""A part's model as its vendor wrote it: which file, which subcircuit, and which of its pins is which terminal.

The record keeps its datasheet figures and ratings: they stay the limits, and what the model is proven against. The model
replaces ours in decks, at its own typical values: no corner can vary what is inside.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Any

from pydantic import AfterValidator, Field, PrivateAttr, ValidationInfo, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import T_MODEL, Assumption
from boardsim.parts.elements import Bipolar, Element, Junction, Mosfet, PowerMosfet, VendorsPart
from boardsim.parts.record import Record, nearest, said, shortened
from boardsim.parts.temperature import in_celsius
from boardsim.parts.vendor.cards import Library, ModelCard, Subcircuit, read_library
from boardsim.parts.vendor.devices import Worked
from boardsim.parts.vendor.flatten import SIDE, flat_model, flatten
from boardsim.parts.vendor.text import plain_name, read_statements, some_of
from boardsim.quantities import Quantity

A_MODEL = "the vendor's SPICE model, which replaces ours in decks; the figures stay the limits"
_TERMINALS = {
    "d": ("anode", "cathode"),
    "npn": ("collector", "base", "emitter"),
    "pnp": ("collector", "base", "emitter"),
    "vdmos": ("drain", "gate", "source"),
    "nmos": ("drain", "gate", "source"),
    "pmos": ("drain", "gate", "source"),
}


class VendorsModel(Record):
    """A subcircuit, or a plain .model, of a file beside the file that names it."""

    file: str = Field(description="of the vendor's models, relative to this file, in its folder or below")
    subcircuit: str | None = Field(None, description="name of the .subckt")
    model: str | None = Field(None, description="name of a plain .model, in place of a subcircuit")
    pins: dict[str, str] = Field(
        default_factory=dict,
        description="from the part's terminals to the subcircuit's own pins; none for a plain .model",
    )
    _library: Library = PrivateAttr(default_factory=Library)

    @model_validator(mode="after")
    def _readable(self, info: ValidationInfo) -> VendorsModel:
        if (self.subcircuit is None) == (self.model is None):
            raise QuantityError('give "subcircuit" or "model", the name of the one or of the other')
        if self.model is not None and self.pins:
            raise QuantityError('"pins" belong to a subcircuit; a plain .model has none')
        folder = (info.context or {}).get("folder")
        if folder is None:
            raise said("a model file is named by a board file or a library file of your own, in whose folder it lies")
        self._library = _read(self.file, folder)
        _ = self.definition
        return self

    @property
    def definition(self) -> Subcircuit | ModelCard:
        """The subcircuit or model that is meant.

        Raises
        ------
        QuantityError
            If the file has none of this name.
        """
        name = (self.subcircuit or self.model or "").lower()
        known: Mapping[str, Subcircuit | ModelCard]
        known = self._library.subcircuits if self.subcircuit is not None else self._library.models
        if name not in known:
            what = ".subckt" if self.subcircuit is not None else ".model"
            raise QuantityError(
                f'{shortened(self.file)} has no {what} "{shortened(name)}"{nearest(name, list(known))}; it has: '
                f"{some_of(known)}"
            )
        return known[name]

    def part(self, name: str, nodes: Mapping[str, str], kelvin: float) -> VendorsPart:
        """The model between nodes of a deck.

        Parameters
        ----------
        name : str
            Of the part in the deck.
        nodes : mapping of the part's terminals to nodes
        kelvin : float
            Junction temperature. [K]

        Raises
        ------
        ModelTextError
            If its text is not understood, or cannot be translated without a change of what it means.
        """
        return VendorsPart(name, plain_name(Path(self.file).name), self._made(name, nodes, kelvin)[0])

    def _made(self, name: str, nodes: Mapping[str, str], kelvin: float) -> tuple[tuple[Element, ...], tuple[str, ...]]:
        found, celsius = self.definition, in_celsius(kelvin)
        if isinstance(found, ModelCard):
            worked = flat_model(found, self._library, celsius)
            remarks = tuple(f"{found.place}: {r}" for r in worked.remarks)
            return (_device(found, worked, f"{name}_u", nodes),), remarks
        ends = {pin.lower(): nodes[terminal] for terminal, pin in self.pins.items()}
        flat = flatten(self._library, found, f"{name}_u", ends, celsius)
        return tuple(flat.elements), tuple(flat.remarks)

    def told(self, part: str) -> tuple[Assumption, ...]:
        """What reports say of the model beside the part's figures: that it is taken as it is, and what is left out of it."""
        terminals = {
            terminal: terminal for terminal in (*self.pins, *_TERMINALS.get(getattr(self.definition, "device", ""), ()))
        }
        _, remarks = self._made("x", terminals, T_MODEL)
        what = self.subcircuit or self.model or ""
        return (
            Assumption(
                part,
                "vendor's model",
                f"{what} of {plain_name(Path(self.file).name)}",
                "taken as it is, with its own temperature laws: no corner varies it; `boardsim parts prove` holds it against the datasheet",
            ),
            *(Assumption(part, "vendor's model", what, remark) for remark in remarks),
        )


def _read(file: str, folder: Path) -> Library:
    path = Path(file)
    if path.is_absolute() or not file.strip():
        raise QuantityError(f'"file" {shortened(file)!r} has to be relative to the file that names it')
    return read_library(read_statements(folder / path, folder))


def _device(card: ModelCard, worked: Worked, name: str, nodes: Mapping[str, str]) -> Element:
    ends = [nodes[t] for t in _TERMINALS[card.device]]
    model = replace(worked.model, name=name)
    if card.device == "d":
        return Junction(name, ends[0], ends[1], model)
    if card.device in ("npn", "pnp"):
        return Bipolar(name, ends[0], ends[1], ends[2], model)
    if card.device == "vdmos":
        return PowerMosfet(name, ends[0], ends[1], ends[2], model)
    size = {"l": SIDE, "w": SIDE, **dict(worked.size)}
    return Mosfet(name, ends[0], ends[1], ends[2], ends[2], model, tuple(size.items()))


def vendors_model(terminals: tuple[str, ...], *devices: str) -> Any:
    """A field that takes a vendor's model of a part with these terminals, or none.

    Parameters
    ----------
    terminals : tuple of str
        As the record's table `pins` names them; `devices` are types of a plain .model that fit, such as "d".
    """

    def fits(model: VendorsModel) -> VendorsModel:
        found = model.definition
        if isinstance(found, ModelCard):
            if found.device not in devices:
                raise QuantityError(
                    f'.model "{found.name}" is of type {found.device.upper()}; {" or ".join(devices).upper()} is needed here'
                )
        else:
            _refuse_pins(model.pins, found, terminals)
        model.told("")  # every line of it is understood, or refused now
        return model

    return Annotated[VendorsModel, AfterValidator(fits)] | None


def _refuse_pins(given: Mapping[str, str], circuit: Subcircuit, terminals: tuple[str, ...]) -> None:
    has = f'.subckt "{circuit.name}" has the pins {", ".join(circuit.pins)}; this part has the terminals {", ".join(terminals)}'
    if unknown := [t for t in given if t not in terminals]:
        raise QuantityError(
            f'pins: "{shortened(unknown[0])}" is no terminal{nearest(unknown[0], list(terminals))}; {has}'
        )
    if missing := [t for t in terminals if t not in given]:
        raise QuantityError(f"pins: {', '.join(missing)} missing; {has}")
    named = [pin.lower() for pin in given.values()]
    if unknown := [pin for pin in named if pin not in circuit.pins]:
        raise QuantityError(f'pins: there is no pin "{shortened(unknown[0])}"; {has}')
    if len(set(named)) != len(named):
        raise QuantityError(f"pins: two terminals have the same pin; {has}")
    if left := [pin for pin in circuit.pins if pin not in named]:
        raise QuantityError(f"pins: {', '.join(left)} would not be connected; {has}")


def typical(quantity: Quantity, model: VendorsModel | None) -> Quantity:
    """A figure as corners can vary it: not at all where a vendor's model has its own."""
    return quantity if model is None else replace(quantity, min=quantity.typ, max=quantity.typ)
