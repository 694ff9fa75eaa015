"""Device models of vendors: which parameters ngspice knows, which mean the same to it, and which are worked out here.

ngspice leaves a parameter that it does not know out, with a warning only; and some it knows by another law than the
programs that vendors write for. So a parameter is taken because it stands here, or refused by name.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

from boardsim.parts.elements import Model
from boardsim.parts.record import nearest, shortened
from boardsim.parts.temperature import LEAST_SATURATION
from boardsim.parts.vendor.cards import ModelCard
from boardsim.parts.vendor.expressions import Expression, parse

TNOM = 27.0  # [degC], SPICE's own, at which a model's figures count that does not say another
MEASURED = {"t_measured": "tnom", "tref": "tnom"}
_DISPLAY = {
    "mfg",
    "type",
    "vds",
    "ron",
    "qg",
    "iave",
    "vpk",
    "vceo",
    "icrating",
    "irms",
    "vrms",
}  # shown in lists, no more
_MOST_FC = 0.95  # above it ngspice takes this with a remark only
_MOST_GRADING = 0.9  # the same of a diode's M
_STEEPEST = 0.99  # of other junctions: their charge has 1 - M below a fraction


@dataclass(frozen=True)
class Device:
    """What is taken of one type of device.

    Attributes
    ----------
    type : str
        ngspice's name.
    known : frozenset of str
        Parameters that are passed on.
    aliases : mapping
        Other names of these.
    bounds : mapping of name to (least, most)
        Beyond which ngspice would take another value without failing, or a part would give out energy.
    zero_is_off : frozenset of str
        Where 0 stands for "leave this effect out", which is what leaving out the parameter does.
    refused : mapping of name to why
    remarks : mapping of name to what ngspice does differently
    needs : tuple of str
        Without which programs go on with values of their own.
    """

    type: str
    known: frozenset[str]
    aliases: Mapping[str, str]
    bounds: Mapping[str, tuple[float, float]]
    zero_is_off: frozenset[str] = frozenset()
    refused: Mapping[str, str] | None = None
    remarks: Mapping[str, str] | None = None
    needs: tuple[str, ...] = ()


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


def _least(names: str, least: float = 0.0, most: float = math.inf) -> dict[str, tuple[float, float]]:
    """The same bounds for several parameters."""
    return dict.fromkeys(names.split(), (least, most))


# What is below nothing is no part: a resistance, capacitance, charge or time that gives out energy. ngspice takes most of these.
_NONE = 1e-30  # what has to be above 0 in the units of a model, which are SI's
_EVER = {**_least("tnom", -273.0), **_least("kf af")}
_JUNCTION = {
    **_EVER,
    **_least("is", LEAST_SATURATION),
    **_least("n", 1e-3),
    **_least("fc", 0.0, _MOST_FC),
    **_least("eg", 0.1),
    **_least("rs tt cjo ibv"),
    **_least("bv nbv vj", 1e-3),
    **_least("m", 0.0, _MOST_GRADING),
}

_DIODE = Device(
    "D",
    _words("is tnom rs trs1 trs2 n tt cjo vj m tm1 tm2 ikf nbv eg xti kf af fc bv ibv tcv isr nr"),
    {**MEASURED, "js": "is", "cj0": "cjo", "cj": "cjo", "pb": "vj", "mj": "m", "ik": "ikf", "vb": "bv", "ib": "ibv", "trs": "trs1"},
    {**_JUNCTION, **_least("ikf isr"), **_least("nr", 1e-3)},
    _words("ikf isr cjo tt rs"),
    {
        "ibvl": "ngspice has no soft knee below breakdown",
        "nbvl": "ngspice has no soft knee below breakdown",
        **dict.fromkeys(("vfwd", "roff", "vrev", "rrev", "ilimit", "revilimit", "epsilon", "revepsilon"), "a law of straight lines"),
    },
    {
        "ikf": "at high injection ngspice takes I / (1 + sqrt(I / IKF)), other programs I / sqrt(1 + I / IKF): up to 0.35 N V_T apart "
        "in voltage, most at I = IKF",
        "isr": "the recombination current's temperature follows ngspice",
    },
)  # fmt: skip
_BIPOLAR = Device(
    "NPN",
    _words(
        "is bf nf vaf ikf ise ne br nr var ikr isc nc rb irb rbm re rc cje vje mje tf xtf vtf itf ptf cjc vjc mjc xcjc tr cjs vjs mjs "
        "xtb eg xti fc kf af nkf iss ns tnom trb1 trb2 trm1 trm2 trc1 trc2 tre1 tre2"
    ),
    {
        **MEASURED, "va": "vaf", "ik": "ikf", "vb": "var", "pe": "vje", "me": "mje", "pc": "vjc", "mc": "mjc", "ccs": "cjs",
        "csub": "cjs", "ps": "vjs", "ms": "mjs", "nk": "nkf", "pt": "xti",
    },
    {
        **_EVER,
        **_least("is", 1e-40),
        **_least("fc", 0.0, _MOST_FC),
        **_least("bf nf nr ne nc ns vje vjc vjs", 1e-3),
        **_least("br", 1e-6),
        **_least("eg", 0.1),
        **_least("vaf ikf ise var ikr isc rb irb rbm re rc cje tf xtf vtf itf cjc tr cjs iss nkf"),
        **_least("xcjc", 0.0, 1.0),
        **_least("mje mjc mjs", 0.0, _STEEPEST),
    },
    _words("ikf ikr vaf var irb itf vtf ise isc iss"),
    {
        **dict.fromkeys(("rco", "qco", "vo", "gamma"), "quasi-saturation is switched on by ngspice otherwise than by others"),
        **dict.fromkeys(("c2", "c4"), "an old way to write ISE and ISC; write these"),
    },
)  # fmt: skip
_POWER = Device(
    "VDMOS",
    _words(
        "vto kp phi lambda theta rd rs rg tnom kf af mtriode tcvth mu texp0 texp1 trd1 trd2 trg1 trg2 trs1 trs2 trb1 trb2 ksubthres "
        "tksubthres1 tksubthres2 subshift bv ibv nbv rds rb n tt eg xti is vj cjo m fc cgdmin cgdmax a cgs rq vq"
    ),
    {**MEASURED, "vt0": "vto", "vth0": "vto", "vtotc": "tcvth", "bex": "mu"},
    {
        **_JUNCTION,
        **_least("kp", 1e-9),
        **_least("rds", 1.0),
        **_least("phi", 1e-3),
        **_least("cgs a mtriode", _NONE),
        **_least("lambda theta rd rg rb cgdmin cgdmax ksubthres rq vq"),
    },
    frozenset(),
    {"subthres": "ngspice rounds the threshold by KSUBTHRES (in volts) only; give this in its place"},
    None,
    ("vto", "kp", "cgs", "cgdmin", "cgdmax", "cjo", "is"),
)
_COMMON_MOS = "vto kp gamma phi lambda rd rs cbd cbs is pb cgso cgdo cgbo rsh cj mj cjsw mjsw js tox ld uo fc nsub tpg nss tnom kf af"
_MOS_ALIASES = {**MEASURED, "vt0": "vto", "u0": "uo"}
_MOS_REFUSED = {
    **dict.fromkeys(("rg", "rds", "rb"), "ngspice has no such resistance in this model; write it as an element"),
    "n": "ngspice's bulk diodes have no emission coefficient in this model",
}
_MOS_BOUNDS = {
    **_EVER,
    **_least("fc", 0.0, _MOST_FC),
    **_least("kp gamma lambda rd rs cbd cbs is cgso cgdo cgbo rsh cj cjsw js ld nsub vmax xj nfs theta kappa"),
    **_least("phi pb", 1e-3),
    **_least("mj mjsw", 0.0, _STEEPEST),
    **_least("tox uo", _NONE),
}
_MOS1 = Device("NMOS", _words(_COMMON_MOS), _MOS_ALIASES, _MOS_BOUNDS, _words("js nsub"), _MOS_REFUSED)
_MOS3 = Device(
    "NMOS",
    _words(_COMMON_MOS + " delta vmax xj nfs eta theta kappa") - {"lambda"},
    _MOS_ALIASES,
    _MOS_BOUNDS,
    _words("js nsub nfs"),
    _MOS_REFUSED,
    {"kappa": "channel length modulation of level 3 follows ngspice, of which programs have variants"},
)
_DEVICES = {"d": _DIODE, "npn": _BIPOLAR, "pnp": _BIPOLAR, "vdmos": _POWER}
_SCALED = ("res", "cap", "ind")  # of resistors, capacitors and inductors; worked out in `passive`
_TEMPERATURE = ("tbv1", "tbv2", "tikf")  # of a diode; ngspice has none of this name, and they are worked out here


@dataclass(frozen=True)
class Worked:
    """A device model at one temperature: what ngspice takes, what is told about it, and the size that a MOSFET's names."""

    model: Model
    remarks: tuple[str, ...] = ()
    size: tuple[tuple[str, float], ...] = ()


def device_model(card: ModelCard, number: Callable[[Expression], float], celsius: float) -> Worked:
    """A model's card as ngspice takes it.

    Parameters
    ----------
    card : ModelCard
    number : callable
        What an expression comes to where the card stands.
    celsius : float
        Junction temperature. [degC]

    Raises
    ------
    ModelTextError
        If a parameter is not known, would be taken differently, or is beyond what ngspice takes as it stands.

    Notes
    -----
    A model without a temperature of its own counts at 27 degC, SPICE's own, whatever the deck says for others. NBV of a diode
    with a breakdown is 1 where it is not given, as in SPICE and unlike ngspice. BV(T) = BV (1 + TBV1 dT + TBV2 dT^2) and IKF(T) =
    IKF (1 + TIKF dT) are worked out here.
    """
    device, level = _device(card, number)
    found, remarks, size = _numbers(card, device, number)
    if card.device in ("nmos", "pmos"):
        found["level"] = level
    shift = celsius - found.get("tnom", TNOM)
    if device is _DIODE:
        _breakdown(card, found, shift)
    for name, (least, most) in device.bounds.items():
        if name in found and not least <= found[name] <= most:
            what = f"at least {least:g}" if found[name] < least else f"at most {most:g}"
            raise card.place.refuse(
                f"{name.upper()} of {found[name]:g} is not what ngspice would take, or no part has it: {what} is allowed"
            )
    if missing := [name.upper() for name in device.needs if name not in found]:
        raise card.place.refuse(
            f"{', '.join(missing)} missing; programs go on with values of their own, so they have to be given"
        )
    if device is _POWER and "ksubthres" not in found:
        remarks.append("KSUBTHRES is not given: near the threshold ngspice rounds by its own 0.1 V")
    if device is _POWER and "vj" not in found and found["cjo"]:
        remarks.append("VJ is not given: ngspice's own 0.8 V shapes the output capacitance")
    if device is _POWER and not {"mu", "texp0"} <= found.keys():
        remarks.append(
            "MU or TEXP0 is not given: with temperature K_P and RD move by ngspice's own exponents, -1.5 and 1.5"
        )
    found.setdefault("tnom", TNOM)
    kind = {"pnp": "PNP", "pmos": "PMOS"}.get(card.device, device.type)
    return Worked(Model(card.name, kind, {k.upper(): v for k, v in found.items()}), tuple(remarks), size)


def _device(card: ModelCard, number: Callable[[Expression], float]) -> tuple[Device, float]:
    level = number(parse(card.parameters["level"], card.place)) if "level" in card.parameters else 1.0
    if card.device in ("nmos", "pmos"):
        if level not in (1.0, 3.0):
            raise card.place.refuse(f"MOSFETs of level {level:g} are not translated; levels 1 and 3 and VDMOS are")
        return (_MOS1 if level == 1.0 else _MOS3), level
    if card.device not in _DEVICES:
        known = ", ".join(sorted(w.upper() for w in (*_DEVICES, *_SCALED, "nmos", "pmos")))
        raise card.place.refuse(f"a model of type {shortened(card.device).upper()} is not translated; known: {known}")
    if level != 1.0:
        raise card.place.refuse(f"{card.device.upper()} of level {level:g} is not translated; level 1 is")
    return _DEVICES[card.device], level


def _numbers(
    card: ModelCard, device: Device, number: Callable[[Expression], float]
) -> tuple[dict[str, float], list[str], tuple[tuple[str, float], ...]]:
    """Parameters by ngspice's names, remarks, and the size of a MOSFET that stands in its model."""
    found: dict[str, float] = {}
    remarks: list[str] = []
    size: list[tuple[str, float]] = []
    for flag in card.flags:
        if device is not _POWER or flag != "nchan":
            raise card.place.refuse(f"{shortened(flag)!r} is not understood in a model; name = value is needed")
    for key, text in card.parameters.items():
        if key == "level":
            continue
        if key in _DISPLAY:
            remarks.append(f"{key.upper()} only shows in lists of other programs and is left out")
            continue
        name = device.aliases.get(key, key)
        if device.refused and name in device.refused and name not in device.known:
            value = number(parse(text, card.place))
            if value:
                raise card.place.refuse(f"{key.upper()} is not translated: {device.refused[name]}")
            continue
        moved = device is _DIODE and name in _TEMPERATURE
        if name not in device.known and not moved and not (device.type == "NMOS" and name in ("l", "w")):
            known = sorted(device.known)
            raise card.place.refuse(
                f'parameter "{shortened(key).upper()}" is not known to ngspice for {card.device.upper()}, which would leave it out'
                f"{nearest(key, known).upper().replace('DID YOU MEAN', 'did you mean')}; known: {', '.join(k.upper() for k in known)}"
            )
        if name in found:
            raise card.place.refuse(f"{name.upper()} is given twice, by two of its names")
        value = number(parse(text, card.place))
        if name in ("l", "w") and device.type == "NMOS":
            if value <= 0:
                raise card.place.refuse(f"{name.upper()} of {value:g} is no size; above 0 is allowed")
            size.append((name, value))
        elif not (value == 0 and name in device.zero_is_off):
            found[name] = value
            if device.remarks and name in device.remarks:
                remarks.append(device.remarks[name])
    return found, remarks, tuple(size)


def _breakdown(card: ModelCard, found: dict[str, float], shift: float) -> None:
    """Work the temperature laws out that ngspice has none of, and what programs take for want of a number."""
    first, second = found.pop("tbv1", 0.0), found.pop("tbv2", 0.0)
    knee = found.pop("tikf", 0.0)
    if "bv" in found:
        if (first or second) and found.get("tcv"):
            raise card.place.refuse("TCV and TBV1 are two laws of the same breakdown voltage; give one")
        found["bv"] *= 1 + first * shift + second * shift**2
        if "ibv" not in found:
            raise card.place.refuse(
                "BV without IBV: programs take 1 mA or 0.1 nA for it, some tenths of a volt apart; give IBV"
            )
        found.setdefault("nbv", 1.0)
    if "ikf" in found:
        found["ikf"] *= 1 + knee * shift
        if found["ikf"] <= 0:
            raise card.place.refuse(f"IKF is nothing at {shift:+.0f} K")


def passive(card: ModelCard, number: Callable[[Expression], float], celsius: float) -> float:
    """The factor of a RES, CAP or IND model.

    Parameters
    ----------
    card : ModelCard
    number : callable
        What an expression comes to where the card stands.
    celsius : float
        [degC]

    Returns
    -------
    float
        Multiplier (R, C or L) times 1 + TC1 dT + TC2 dT^2 from the model's own temperature. [1]

    Raises
    ------
    ModelTextError
        If it has other parameters.
    """
    multiplier = card.device[0]
    found = {multiplier: 1.0, "tc1": 0.0, "tc2": 0.0, "tnom": TNOM}
    for key, text in card.parameters.items():
        name = MEASURED.get(key, key)
        if name not in found:
            raise card.place.refuse(
                f'parameter "{shortened(key).upper()}" of a {card.device.upper()} model is not translated; known: '
                f"{', '.join(k.upper() for k in found)}"
            )
        found[name] = number(parse(text, card.place))
    if card.flags:
        raise card.place.refuse(f"{shortened(card.flags[0])!r} is not understood in a model; name = value is needed")
    shift = celsius - found["tnom"]
    return found[multiplier] * (1 + found["tc1"] * shift + found["tc2"] * shift**2)
