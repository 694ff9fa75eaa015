"""What the datasheet of a MOSFET prints, and the test circuits that measure it on the model.

Where printed figures contradict each other the model follows, in this order: the on-resistance at the gate voltages given,
the threshold, the gate-drain charge, the total gate charge, the capacitances. The proof of the others then shows by how
much they are missed.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import TYPE_CHECKING

from boardsim.parts.base import T_MODEL
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    CurrentDrive,
    Drive,
    Element,
    Inductor,
    Junction,
    Model,
    PowerMosfet,
    Resistor,
    Signal,
    VendorsPart,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.mosfet_channel import only_bounds, overdrive_at
from boardsim.parts.proof import AtEnd, Between, Proof, Ratio
from boardsim.quantities import Quantity, in_units

if TYPE_CHECKING:
    from boardsim.parts.mosfet import Mosfet, SwitchingTimes

_BREAKDOWN_CURRENT = 250e-6  # [A] at which V_(BR)DSS is specified, common practice
_SETTLED = 1e-3  # [s] after which the slowest circuit, 250 uA into the capacitances at the drain, stands still
_GATE_CURRENT = 1e-3  # [A] into the gate in the charge circuit; slow against the channel, common practice
_BLEEDER = 1e9  # [ohm] gives a gate that only a current drives a level to start from
_PLATEAU_STEP = 0.05  # [V] by which V_GS has risen again where its plateau is over; a matter of the eye
_SMALL = 0.1  # [V] swept before the test voltage of a capacitance: small against the voltages it changes over

_TYPICAL = "extraction meets typical points within 10 %"
_SHAPE = "one-term channel and gate-drain capacitance of the model, 10 %"
_GIVES_WAY = 0.20
_LAST = "the input capacitance gives way where it contradicts the total gate charge, 20 %"
_LEAST_EDGE = 0.1e-9  # [s], so that a generator's edge is never a jump
_SETTLING = 10.0  # times the slowest time constant of the switching circuit
_SMALL_SHARE = (
    0.01  # of the overdrive, by which the gates of the two devices of the transconductance differ from its middle
)
_TURN_ON, _TURN_OFF = 0.55, 0.25
_FIXTURE = (
    "nothing of it shapes the model; a channel of one term has its plateau at a lower gate voltage at high currents than a real "
    "one, which makes turn-on too short and turn-off too long; what layout and gate loop add is not printed"
)


def mosfet_proofs(part: Mosfet) -> tuple[Proof, ...]:
    """Every printed figure of a MOSFET with its test circuit.

    Notes
    -----
    On-resistance V_DS / I_D at the printed drain current, or at a tenth of the continuous rating where none is printed:
    there the channel is ohmic at every gate voltage and the figure hangs on no other. Threshold: gate tied to drain, at
    the test current. Breakdown: gate tied to source, 250 uA. Capacitances: a ramp of slope s, i = C s, read where the
    ramp reaches the test voltage. Charges: a constant current into the gate, the drain loaded with a constant current
    and held at the test voltage by an ideal diode; the plateau of V_GS reaches from where V_DS begins to fall to where
    V_GS rises again (method of JESD24-2, from memory). Transconductance: the difference of two devices in saturation whose
    gates are a hundredth of the overdrive below and above (of our own model only: a vendor's has another threshold). Body diode: a current from source to drain, gate at source.

    Times: resistive load, delay and edge together, since how the whole divides hangs on the knee of a curved edge; from 10 %
    (90 %) of the generator's edge to 10 % (90 %) of the drain's supply left. The generator's edges are part of the circuit,
    5 ns where none are printed: from 10 % on they add 2 to 4 ns. So are the inductances of the package, where they are
    printed, in the path of the load. The gate returns to the source at the chip's side of them: with all of 7.5 nH in the
    gate's loop, as TO-220 parts print for lead and bond wires, 20 A could not fall in the 15 ns that the same sheet prints,
    since they would induce 10 V. 25 degC, or where an on-resistance is printed for another temperature that.

    A P-channel part is measured in the mirror image of the same circuits.
    """
    found = _of_either(part)
    return tuple(mirror_image(proof) for proof in found) if part.mirrored else found


def mirror_image(proof: Proof) -> Proof:
    """The same circuit with every voltage and current of the opposite sign; its readings are the same magnitudes.

    Sources change their sign, diodes are turned round, and readings are taken of negated signals. The transistors are in it as
    they are.
    """
    elements: list[Element] = []
    for e in proof.elements:
        match e:
            case Drive() | CurrentDrive():
                elements.append(replace(e, points=tuple((t, -value) for t, value in e.points)))
            case Junction():
                elements.append(replace(e, anode=e.cathode, cathode=e.anode))
            case _:
                elements.append(e)
    reading = proof.reading
    match reading:
        case AtEnd():
            reading = AtEnd(scaled(-1.0, reading.signal))
        case Between():
            reading = replace(reading, first=scaled(-1.0, reading.first), second=scaled(-1.0, reading.second))
        case Ratio():  # of two that both change their sign
            pass
    return replace(proof, elements=tuple(elements), reading=reading)


def _of_either(part: Mosfet) -> tuple[Proof, ...]:
    return (
        *_on_resistances(part),
        _threshold(part),
        _breakdown(part),
        *_charges(part),
        *_capacitances(part),
        *_transconductance(part),
        *_body_diode(part),
        *(_times(part, part.switching) if part.switching is not None else ()),
    )


def _device(
    part: Mosfet, drain: str = "d", gate: str = "g", name: str = "dut", t: float = T_MODEL
) -> PowerMosfet | VendorsPart:
    if part.model is not None:
        vendors: VendorsPart = part.model.part(name, {"drain": drain, "gate": gate, "source": GROUND}, t)
        return vendors
    model = part.card("m", part.at_temperature(part.breakdown.typ, t))
    return PowerMosfet(name, drain, gate, GROUND, model)


def _steady(level: float, duration: float) -> tuple[tuple[float, float], ...]:
    return ((0.0, level), (duration, level))


def _ramped(level: float, rise: float, duration: float) -> tuple[tuple[float, float], ...]:
    return ((0.0, 0.0), (rise, level), (duration, level))


def _on_resistances(part: Mosfet) -> Iterator[Proof]:
    duration = _SETTLED
    for point in part.on_resistance:
        if point.current is not None:
            amperes = point.current.typ
        elif part.continuous_current is not None:
            amperes = 0.1 * part.continuous_current.typ
        else:
            # Where no rating is given: a drop of a hundredth of the drive, at which the channel is as ohmic.
            amperes = 0.01 * point.gate.typ / point.value.typ
        load = CurrentDrive("load", "d", GROUND, _ramped(amperes, 0.1 * duration, duration))
        drive = Drive("gate", "g", GROUND, _steady(point.gate.typ, duration))
        meter = Ammeter("drain_meter", "d", "di")
        at = "" if point.at is None else f", {point.at}"
        yield Proof(
            f"on-resistance at V_GS {in_units(point.gate.typ, 'V')}, {in_units(amperes, 'A')}{at}",
            "ohm",
            point.value,
            (_device(part, "di", t=point.kelvin), meter, drive, load),
            duration,
            Ratio(voltage("di"), current(meter)),
            why=_TYPICAL,
            temperature=point.kelvin,
        )


def _threshold(part: Mosfet) -> Proof:
    amperes = part.threshold_current.typ
    # 250 uA take some 10 us to charge a nanofarad; a smaller test current takes longer.
    duration = _SETTLED * max(1.0, _BREAKDOWN_CURRENT / amperes)
    load = CurrentDrive("load", "d", GROUND, _ramped(amperes, 0.1 * duration, duration))
    return Proof(
        f"threshold at {in_units(amperes, 'A')}, V_DS = V_GS",
        "V",
        part.threshold,
        (_device(part, "d", "d"), load),
        duration,
        AtEnd(voltage("d")),
        why=_TYPICAL,
    )


def _breakdown(part: Mosfet) -> Proof:
    load = CurrentDrive("load", "d", GROUND, _ramped(_BREAKDOWN_CURRENT, 0.1 * _SETTLED, _SETTLED))
    return Proof(
        f"breakdown at {in_units(_BREAKDOWN_CURRENT, 'A')}",
        "V",
        part.breakdown,
        (_device(part, "d", GROUND), load),
        _SETTLED,
        AtEnd(voltage("d")),
        why=_TYPICAL,
    )


def _charges(part: Mosfet) -> Iterator[Proof]:
    volts = part.charge_voltage.typ
    amperes = _charge_current(part)
    # The model's largest possible charge bounds how long the gate takes.
    p = part.parameters(part.breakdown.typ)
    top = part.charge_gate.typ if part.charge_gate is not None else part.threshold.typ + 3.0
    most = (p["CGS"] + p["CGDMAX"]) * (top + 1.0) + part.gate_drain_charge.max * 2
    begin = 0.02 * most / _GATE_CURRENT
    duration = begin + 1.2 * most / _GATE_CURRENT
    elements: tuple[Element, ...] = (
        _device(part),
        CurrentDrive(
            "gate", "g", GROUND, ((0.0, 0.0), (begin, 0.0), (begin * 1.001, _GATE_CURRENT), (duration, _GATE_CURRENT))
        ),
        Resistor("bleeder", "g", GROUND, _BLEEDER),
        Drive("supply", "rail", GROUND, _steady(volts, duration)),
        CurrentDrive("load", "d", "rail", _steady(amperes, duration)),
        Junction("hold", "d", "rail", Model("ideal", "D", {"IS": 1e-12, "N": 0.3, "CJO": 1e-13})),
    )
    at = f"V_DS {in_units(volts, 'V')}, {in_units(amperes, 'A')}"
    falling = 0.98 * volts  # where V_DS begins to fall
    started = 1e-3  # [V] above rest: where the charge begins to count
    v_ds, v_gs = voltage("d"), voltage("g")
    yield Proof(
        f"gate-drain charge at {at}",
        "C",
        part.gate_drain_charge,
        elements,
        duration,
        Between(v_ds, falling, "fall", v_gs, _PLATEAU_STEP, "rise", _GATE_CURRENT, relative=True),
        why="where a plateau ends is a matter of the eye, 10 %",
    )
    if part.gate_source_charge is not None:
        yield Proof(
            f"gate-source charge at {at}",
            "C",
            part.gate_source_charge,
            elements,
            duration,
            Between(v_gs, started, "rise", v_ds, falling, "fall", _GATE_CURRENT),
            why=_SHAPE,
            # It shapes nothing. A band with both ends holds no typical point, but is a bound.
            shapes=not part.gate_source_charge.min < part.gate_source_charge.typ < part.gate_source_charge.max,
        )
    if part.gate_charge is not None and part.charge_gate is not None:
        yield Proof(
            f"total gate charge to V_GS {in_units(part.charge_gate.typ, 'V')} at {at}",
            "C",
            part.gate_charge,
            elements,
            duration,
            Between(v_gs, started, "rise", v_gs, part.charge_gate.typ, "rise", _GATE_CURRENT),
            why=_SHAPE,
        )


def _charge_current(part: Mosfet) -> float:
    """Drain current of the charge circuit: the printed one, or a tenth of the continuous rating, or ten times the threshold's.

    The plateau's level, and little of its length, hang on it. [A]
    """
    if part.charge_current is not None:
        return part.charge_current.typ
    return 0.1 * part.continuous_current.typ if part.continuous_current is not None else 10 * part.threshold_current.typ


def _capacitances(part: Mosfet) -> Iterator[Proof]:
    volts, duration = part.capacitance_voltage.typ, 1e-6
    slope = _SMALL / duration  # [V/s]
    # Ramps go on beyond the end: a corner there would be what the last point shows.
    beyond = 0.1 * _SMALL
    to_drain = ((0.0, volts - _SMALL), (1.1 * duration, volts + beyond))
    gate_meter, drain_meter = Ammeter("gate_meter", "gs", "g"), Ammeter("drain_meter", "ds", "d")
    rising_gate = Drive("gate", "gs", GROUND, ((0.0, -_SMALL), (1.1 * duration, beyond)))
    resting_gate = Drive("gate", "gs", GROUND, _steady(0.0, duration))
    still = Drive("drain", "ds", GROUND, _steady(volts, duration))
    rising = Drive("drain", "ds", GROUND, to_drain)
    device = (_device(part), gate_meter, drain_meter)
    circuits: tuple[tuple[str, Quantity, tuple[Element, ...], Signal], ...] = (
        ("input", part.input_capacitance, (rising_gate, still), scaled(1 / slope, current(gate_meter))),
        ("output", part.output_capacitance, (resting_gate, rising), scaled(1 / slope, current(drain_meter))),
        ("reverse", part.reverse_capacitance, (resting_gate, rising), scaled(-1 / slope, current(gate_meter))),
    )
    for name, printed, sources, signal in circuits:
        yield Proof(
            f"{name} capacitance at V_DS {in_units(volts, 'V')}",
            "F",
            printed,
            (*device, *sources),
            duration,
            AtEnd(signal),
            tolerance=_GIVES_WAY if name == "input" and part.gate_charge is not None else 0.10,
            why=_LAST if name == "input" and part.gate_charge is not None else _TYPICAL,
        )


def _transconductance(part: Mosfet) -> Iterator[Proof]:
    printed, amperes, volts = part.transconductance, part.transconductance_current, part.transconductance_voltage
    if printed is None or amperes is None or volts is None:
        return
    if part.model is not None:
        return  # the gates' voltages would be those of our own model, and so the current not the printed one
    p = part.parameters(part.breakdown.typ)
    from_zero = 1 + p["THETA"] * p["VTO"]  # see `mobility`
    over = overdrive_at(p["KP"] / from_zero, p["THETA"] / from_zero, amperes.typ)
    step = _SMALL_SHARE * over
    duration = _SETTLED
    elements: list[Element] = [Drive("supply", "rail", GROUND, _steady(volts.typ, duration))]
    meters = []
    for name, sign in (("low", -1.0), ("high", 1.0)):
        meter = Ammeter(f"{name}_meter", "rail", f"{name}_d")
        meters.append(meter)
        gate = _steady(p["VTO"] + over + sign * step, duration)
        elements += [
            _device(part, f"{name}_d", f"{name}_g", name),
            meter,
            Drive(f"{name}_gate", f"{name}_g", GROUND, gate),
        ]
    share = 1 / (2 * step)
    yield Proof(
        f"transconductance at {amperes}, V_DS {volts}",
        "S",
        printed,
        tuple(elements),
        duration,
        AtEnd(plus(scaled(share, current(meters[1])), scaled(-share, current(meters[0])))),
        why=_TYPICAL,
        shapes=not only_bounds(printed),
    )


def _body_diode(part: Mosfet) -> Iterator[Proof]:
    """The channel is off, and the current flows from the source at ground to the drain below it."""
    printed, amperes = part.source_drain, part.source_drain_current
    if printed is None or amperes is None:
        return
    duration = _SETTLED
    load = CurrentDrive("load", "d", GROUND, _ramped(-amperes.typ, 0.1 * duration, duration))
    yield Proof(
        f"source-drain voltage at {amperes}",
        "V",
        printed,
        (_device(part, "d", GROUND), load),
        duration,
        AtEnd(voltage(GROUND, "d")),
        why=_TYPICAL,
        shapes=not only_bounds(printed),
    )


def _times(part: Mosfet, circuit: SwitchingTimes) -> Iterator[Proof]:
    volts, drive, ohms = circuit.supply.typ, circuit.drive.typ, circuit.gate_resistor.typ + part.gate_resistance.typ
    edge = max(circuit.edge.typ, _LEAST_EDGE)
    leads = sum(x.typ for x in (part.source_inductance, part.drain_inductance) if x is not None)
    # Long enough for the gate and the leads to settle.
    p = part.parameters(part.breakdown.typ)
    slowest = max(max(ohms, 1.0) * (p["CGS"] + p["CGDMAX"]), leads / circuit.load.typ)
    settle = _SETTLING * slowest + 4 * edge
    on, off = 0.1 * settle, 1.1 * settle
    duration = 2.1 * settle
    edges = ((0.0, 0.0), (on, 0.0), (on + edge, drive), (off, drive), (off + edge, 0.0), (duration, 0.0))
    elements: tuple[Element, ...] = (
        _device(part, "d" if leads == 0 else "chip"),
        Drive("generator", "p", GROUND, edges),
        Resistor("gate", "p", "g", max(circuit.gate_resistor.typ, 1e-3)),
        Drive("supply", "rail", GROUND, _steady(volts, duration)),
        Resistor("load", "rail", "d", circuit.load.typ),
        *(() if leads == 0 else (Inductor("leads", "d", "chip", leads),)),
    )
    generator, drain = voltage("p"), voltage("d")
    low, high = 0.1 * volts, 0.9 * volts
    wanted = (
        (
            "turn-on time",
            circuit.delay_on,
            circuit.rise,
            Between(generator, 0.1 * drive, "rise", drain, low, "fall"),
            _TURN_ON,
        ),
        (
            "turn-off time",
            circuit.delay_off,
            circuit.fall,
            Between(generator, 0.9 * drive, "fall", drain, high, "rise"),
            _TURN_OFF,
        ),
    )
    at = (
        f"{in_units(volts, 'V')}, {in_units(circuit.load.typ, 'ohm')}, R_G {in_units(circuit.gate_resistor.typ, 'ohm')}"
    )
    for name, delay, fall, reading, tolerance in wanted:
        if delay is not None and fall is not None:
            ends = (delay.typ + fall.typ, delay.min + fall.min, delay.max + fall.max)
            printed = Quantity(*ends, "s", delay.origin)
            what = f"{name} (delay and edge) at {at}, V_GS {in_units(drive, 'V')}"
            yield Proof(what, "s", printed, elements, duration, reading, tolerance, _FIXTURE)
