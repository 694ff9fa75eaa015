"""A coil's resistance, inductances and core loss from a measured current, with how well the trace tells each of them."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from boardsim.errors import InputError
from boardsim.parts.coil import Coil
from boardsim.quantities import in_units
from boardsim.verdict.findings import Floats
from boardsim.verdict.fit_model import Values
from boardsim.verdict.fit_search import TOLD, Search
from boardsim.verdict.overlay import Overlay

_SURE = 2.0  # standard errors by which a core loss must stand off from none
# A fit that leaves more than so many times the noise, and this share of the peak, does not follow the trace.
_STANDS_OUT, _SHARE = 1.5, 0.01
_UNITS = {"resistance": "ohm", "inductance": "H", "closed_inductance": "H"}
# What a coil and its motion may say: fields that the model has, and limits, which do not matter to it.
_KNOWN = frozenset(
    [
        "title",
        "kind",
        "resistance",
        "rated_voltage",
        "rated_current",
        "rated_power",
        "winding",
        "at",
        "inductance",
        "measured_rise",
        "core_loss",
        "pull_in",
        "release",
        "longest_on",
        "least_off",
        "rise",
        "closed_inductance",
        "force_constant",
        "wired",
        "motion",
        "travel",
        "mass",
        "spring_preload",
        "spring_rate",
        "friction",
        "damping",
        "load",
        "moves",
        "restitution",
        "contact",
        "arrives_within",
        "impact",
        "second_impact",
    ]
)


@dataclass(frozen=True)
class Fitted:
    """One number of a coil.

    Attributes
    ----------
    name : str
        Of the record: "resistance", "inductance", "closed_inductance", "core_loss".
    value, error : float
        And its standard error, which is infinite where the trace does not tell it. [unit]
    unit : str
    before : float
        What the record says. [unit]
    told : {"fitted", "left", "at least"}
        Whether the trace told it, it was left as it was, or only its least value was told.
    why : str
        Where it was not told: why.
    """

    name: str
    value: float
    error: float
    unit: str
    before: float
    told: str
    why: str = ""


@dataclass(frozen=True)
class Fit:
    """What a trace says of a coil.

    Attributes
    ----------
    numbers : tuple of Fitted
    driven_by : str
        Which voltage was taken.
    offset, delay : float
        Of the measured current against the model's, fitted along. [A], [s]
    rms, largest, noise : float
        Of what the fit leaves; noise of the trace. [A]
    moved : float
        How far what moves got in the model, as a share of its way; 0 where nothing does. [1]
    follows : bool
        Whether the model follows the trace: what is left is not much more than noise.
    t, current : (n,) array
        The fitted model's current, in the pattern's time. [s], [A]
    """

    numbers: tuple[Fitted, ...]
    driven_by: str
    offset: float
    delay: float
    rms: float
    largest: float
    noise: float
    moved: float
    follows: bool
    t: Floats
    current: Floats


def fit(coil: Coil, overlay: Overlay) -> Fit:
    """Adjust a coil to the measured current of an overlay.

    Parameters
    ----------
    coil : Coil
        Its record is where the fit begins; mass, spring, friction and travel of what it moves stay as they are there.
    overlay : Overlay

    Raises
    ------
    InputError
        If the trace has no current, or the coil is of a kind, or has properties, that the fit has no model of.

    Notes
    -----
    Least squares of measured current less model (`fit_model`), by scipy.optimize.least_squares (trust region, reflective). Fitted along
    are an offset of the current and, where the drive is computed, a delay. R and L are fitted by their logarithms within 1/5 to 5
    and 1/10 to 10 times the record, the core loss as a conductance G from 0 to 0.2/R. The drive is the measured voltage over the
    whole trace; without one the computed voltage until the turn-off, since after it the voltage lasts as long as the computed current.

    Where something moves the sum of squares has minima in which a blow comes too early or too late, and is rough for rebounds: the
    search begins in several places, one of them where the flux linkage tells (integral of v - R i, over i), and how far values that were
    tried lie apart which leave within 1 % of the least counts as an error.

    The covariance is s^2 (J^T J)^-1 with the variance s^2 of what is left, at least (1e-4 of the peak)^2, times (1 + r) / (1 - r), where
    r is the correlation of neighbouring residuals: what is left is seldom white, and then counts as fewer points. Where the smallest
    singular value of J / s says that a combination of numbers is free within 30 %, the number that weighs most in it is left as the record has
    it, and the rest is fitted again. A core loss less than two standard errors from none is no value: the record's stays where it
    lies within two; else the least resistance is given. After a step of voltage a core loss and a delay do the same to the current,
    so that without a measured voltage the record's core loss stays. How far what is taken for it moves R and L (without a voltage: against
    none) counts as an error of theirs, and so does half the time between two points of a measured voltage, within which its steps lie somewhere.
    """
    data = next((d for d in overlay.differences if d.quantity == "current"), None)
    if data is None:
        raise InputError("--fit needs the measured current: name its column with --current COLUMN")
    given = {*coil.model_fields_set, *(coil.motion.model_fields_set if hasattr(coil, "motion") else ())}
    if more := sorted(given - _KNOWN):
        raise InputError(f"--fit has no model of {', '.join(more)} of this coil; leave --fit out")
    return _told(Search.of(coil, overlay, data))


def _told(search: Search) -> Fit:
    """Search, leave what the trace does not tell, and search again."""
    free = [n for n in search.model.names if not (n == "loss" and search.with_delay)]
    why: dict[str, str] = {}
    values = search.best(free)
    held: dict[str, float] = {}
    while (loose := search.loose(values, free)) is not None:
        why[loose] = _because(search, loose, values)
        free.remove(loose)
        # What never moved stays so, whatever the record makes of it.
        held[loose] = values[loose] if loose == "closed_inductance" else search.model.start[loose]
        values = search.solve(free, values, held)
    errors = search.errors(values, free)
    if search.half_a_point:
        # A step of the voltage may lie anywhere between two points: what half a point of delay does is an error as well.
        later = replace(search, t=search.t + search.half_a_point).solve(free, values, held)
        errors = {n: math.hypot(e, later[n] - values[n]) for n, e in errors.items()}
    before, least = search.model.start["loss"], False
    if "loss" not in free:
        why["loss"] = "without the voltage across the coil, measured, it is not told from a delay"
        values, errors = _with_loss(
            search, before, values, errors, free, held, search.solve(free, values, {**held, "loss": 0.0})
        )
    elif values["loss"] < _SURE * errors["loss"]:
        why["loss"] = "the trace shows no core loss beyond its noise"
        free.remove("loss")
        most = values["loss"] + _SURE * errors["loss"]
        least = before > most
        values, errors = _with_loss(search, most if least else before, values, errors, free, held, values)
    return _fit(search, values, errors, why, least)


def _with_loss(
    search: Search, loss: float, values: Values, errors: Values, free: Sequence[str], held: Values, other: Values
) -> tuple[dict[str, float], dict[str, float]]:
    """The fit with a core loss that the trace does not tell; how far that moves the others counts as an error of theirs."""
    found = search.solve(free, values, {**held, "loss": loss})
    return found, {**errors, **{n: math.hypot(errors[n], found[n] - other[n]) for n in free}}


def _fit(search: Search, values: Values, errors: Values, why: Mapping[str, str], least: bool) -> Fit:
    left = search.residuals(values)
    t, i, moved = search.model.run(values, search.start)
    numbers = []
    for name in search.model.names:
        before = search.model.start[name]
        value = before if name in why and name != "loss" else values[name]
        error = errors[name] if name not in why else math.inf
        if name == "loss":
            told = "at least" if least else "left" if name in why else "fitted"
            numbers.append(Fitted("core_loss", 1 / value, error / value**2, "ohm", 1 / before, told, why.get(name, "")))
        else:
            told = "left" if name in why else "fitted"
            numbers.append(Fitted(name, value, error, _UNITS[name], before, told, why.get(name, "")))
    return Fit(
        tuple(numbers),
        search.driven_by,
        values["offset"],
        values["delay"],
        float(np.sqrt(np.mean(left**2))),
        float(left[np.argmax(np.abs(left))]),
        search.noise,
        moved,
        search.rms(values) <= max(_STANDS_OUT * search.noise, _SHARE * search.peak),
        t + values["delay"],
        i,
    )


def _because(search: Search, name: str, values: dict[str, float]) -> str:
    if name == "closed_inductance":
        moved = search.model.run({**search.model.start, **values}, search.start)[2]
        if moved < 0.5:
            return "nothing moves far in this trace, so that it never shows the closed coil"
    return f"the trace does not tell it within {TOLD:.0%}, whatever the others are"


def words(number: Fitted) -> str:
    """A fitted number with its standard error, for people."""
    value = in_units(number.value, number.unit, 4)
    if number.told == "fitted":
        return f"{value}, standard error {in_units(number.error, number.unit, 2)} (was {in_units(number.before, number.unit, 4)})"
    if number.told == "at least":
        return f"at least {value}: {number.why} (was {in_units(number.before, number.unit, 4)})"
    return f"left at {value}: {number.why}"
