"""The current of a coil under a given voltage: the forward models that a fit adjusts, apart from the ones that ngspice runs.

They are the equations that `parts/coil.py`, `parts/plunger.py`, `parts/moving_magnet.py` and `parts/motion.py` describe, written for
arrays of voltages: many runs of one short pulse.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from boardsim.errors import InputError
from boardsim.parts.coil import Coil
from boardsim.parts.motion import Motion
from boardsim.parts.moving_magnet import MovingMagnetCoil
from boardsim.parts.plunger import PlungerCoil
from boardsim.quantities import in_units
from boardsim.verdict.findings import Floats

_CREEP = 2e-3  # [m/s], below which dry friction fades, as in a run
_STEPS = 4000  # over the window, where nothing moves: the step is then far below any L/R that the window can show
_IN_CONTACT = 12.0  # steps in an impact
_MOST_STEPS = 40_000  # about half a second for each run

Values = Mapping[str, float]
"""Of "resistance" [ohm], "inductance" [H], "loss" [S] (of the core, across the inductance), and of what a kind has beside them."""


@dataclass(frozen=True)
class Drive:
    """The voltage across the coil.

    Attributes
    ----------
    t, volts : (n,) array
        [s], [V]
    """

    t: Floats
    volts: Floats

    def evenly(self, step: float) -> tuple[Floats, Floats, Floats]:
        """Times a step apart [s], the voltage there [V], and its mean over the step after each, which keeps the volt-seconds [V]."""
        n = max(2, math.ceil((self.t[-1] - self.t[0]) / step))
        t = np.linspace(self.t[0], self.t[-1], n + 1)
        flux = np.concatenate([[0.0], np.cumsum((self.volts[1:] + self.volts[:-1]) / 2 * np.diff(self.t))])
        # Within a step of the trace its volt-seconds grow as a parabola: a straight line would round off its edges.
        k = np.clip(np.searchsorted(self.t, t, side="right") - 1, 0, len(self.t) - 2)
        part = t - self.t[k]
        slope = np.diff(self.volts)[k] / np.diff(self.t)[k]
        at = flux[k] + part * (self.volts[k] + slope * part / 2)
        return t, np.interp(t, self.t, self.volts), np.append(np.diff(at) / np.diff(t), self.volts[-1])


@dataclass(frozen=True)
class Model:
    """A coil's current under a drive.

    Attributes
    ----------
    names : tuple of str
        What can be adjusted.
    start : Values
        What the record says.
    run : callable
        Values, current at the beginning [A] -> times [s], currents [A], and how far what moves got, as a share of its way [1].
    """

    names: tuple[str, ...]
    start: Values
    run: Callable[[Values, float], tuple[Floats, Floats, float]]


def model_of(coil: Coil, drive: Drive, steps: float = _IN_CONTACT) -> Model:
    """The forward model of a coil.

    Parameters
    ----------
    coil : Coil
    drive : Drive
    steps : float
        In an impact, where something moves. [1]

    Raises
    ------
    InputError
        If there is none for its kind, or the pulse is too long for one with motion.
    """
    start = {
        "resistance": coil.resistance.typ,
        "inductance": coil.inductance.typ,
        "loss": 1 / coil.loss.typ,
    }
    if type(coil) is Coil:
        return Model(tuple(start), start, lambda values, i0: at_rest(drive, values, i0))
    if isinstance(coil, PlungerCoil) and type(coil) is PlungerCoil:
        closed = {"closed_inductance": coil.closed_inductance.typ}
        _short_enough(coil.motion, drive)
        motion = coil.motion
        return Model(
            ("resistance", "inductance", "closed_inductance", "loss"),
            start | closed,
            lambda values, i0: moving(drive, values, i0, motion, None, steps),
        )
    if isinstance(coil, MovingMagnetCoil) and type(coil) is MovingMagnetCoil:
        _short_enough(coil.motion, drive)
        constant = coil.force_constant.typ * (1 if coil.wired == "right" else -1)
        magnet = coil.motion
        return Model(tuple(start), start, lambda values, i0: moving(drive, values, i0, magnet, constant, steps))
    raise InputError(
        f"--fit: coils of kind {coil.kind!r} have no model that a trace could be fitted to; leave --fit out"
    )


def at_rest(drive: Drive, values: Values, start: float) -> tuple[Floats, Floats, float]:
    """Current of a coil in which nothing moves.

    Parameters
    ----------
    drive : Drive
    values : Values
    start : float
        Current at the beginning. [A]

    Returns
    -------
    times, currents, moved : (n,) array, (n,) array, float
        [s], [A], 0.0

    Notes
    -----
    v = R i + v_L, L di_L/dt = v_L, i = i_L + G v_L, so with k = 1 / (1 + R G): v_L = k (v - R i_L), and i_L follows v / R with L / (k R). The
    solution is exact for a voltage that stands still over each step, which has the volt-seconds of the real one.

    Examples
    --------
    >>> drive = Drive(np.array([0.0, 1.0]), np.array([2.0, 2.0]))
    >>> t, i, _ = at_rest(drive, {"resistance": 4.0, "inductance": 4.0, "loss": 0.0}, 0.0)
    >>> round(float(i[-1]), 4)  # 0.5 A (1 - 1/e) after L/R = 1 s
    0.3161
    """
    from scipy.signal import lfilter

    r, henries, loss = values["resistance"], values["inductance"], values["loss"]
    k = 1 / (1 + r * loss)
    t, volts, means = drive.evenly((drive.t[-1] - drive.t[0]) / _STEPS)
    left = math.exp(-(t[1] - t[0]) * r * k / henries)
    follows, _ = lfilter([1 - left], [1.0, -left], means[:-1] / r, zi=[left * start])
    inner = np.concatenate([[start], follows])
    return t, inner + loss * k * (volts - r * inner), 0.0


def moving(
    drive: Drive, values: Values, start: float, motion: Motion, constant: float | None, steps: float = _IN_CONTACT
) -> tuple[Floats, Floats, float]:
    """Current of a coil that moves a plunger or, with a force constant, a magnet.

    Parameters
    ----------
    drive : Drive
    values : Values
    start : float
        Current at the beginning, with what moves at its rest. [A]
    motion : Motion
    constant : float or None
        Force constant of a magnet, negative where it is wired the other way round; None for a plunger. [N/A]
    steps : float
        In an impact. [1]

    Returns
    -------
    times, currents, moved : (n,) array, (n,) array, float
        [s], [A], share of the way [1]

    Notes
    -----
    Plunger: i_L = f g(x) with the flux linkage f, g(x) = 1/L_o + (1/L_c - 1/L_o) x/s, force -f^2 dg/dx / 2, df/dt = v_L. Magnet:
    f = L i_L, force K i_L, df/dt = v_L - K v. v_L = (v - R i_L) / (1 + R G), i = i_L + G v_L. Mass, spring, friction and stops as `Motion` describes
    them. Runge-Kutta of the fourth order with steps of a twelfth of an impact: the same steps whatever the values, so that small changes of
    these give small changes of the current.
    """
    r, opened, loss = values["resistance"], values["inductance"], values["loss"]
    k = 1 / (1 + r * loss)
    t, volts, means = drive.evenly(_step(motion, drive, steps))
    h = float(t[1] - t[0])
    way, mass = motion.travel.typ, motion.mass.typ
    rest, slope = 1 / opened, 0.0
    if constant is None:
        slope = (1 / values["closed_inductance"] - rest) / way
    pull, back = constant or 0.0, constant or 0.0
    stiff = mass * (math.pi / motion.contact.typ) ** 2
    steady = motion.spring_preload.typ + motion.load.typ + motion.weight
    spring, rub, drag, tanh = motion.spring_rate.typ, motion.friction.typ, motion.damping.typ, math.tanh

    def law(f: float, x: float, v: float, u: float) -> tuple[float, float, float]:
        i = f * (rest + slope * x)
        force = pull * i - f * f * slope / 2 - steady - spring * x - drag * v
        if rub:
            force -= rub * tanh(v / _CREEP)
        if x < 0 or x > way:
            force += motion.pushed_back(x, v)
        return k * (u - r * i) - back * v, v, force / mass

    f, x, v = start * opened, -steady / stiff, 0.0
    inner = np.empty(len(t))
    furthest = 0.0
    for n, u in enumerate(means[:-1].tolist()):
        inner[n] = f * (rest + slope * x)
        a, b, c = law(f, x, v, u)
        d, e, g = law(f + h / 2 * a, x + h / 2 * b, v + h / 2 * c, u)
        p, q, s = law(f + h / 2 * d, x + h / 2 * e, v + h / 2 * g, u)
        w, y, z = law(f + h * p, x + h * q, v + h * s, u)
        f += h / 6 * (a + 2 * d + 2 * p + w)
        x += h / 6 * (b + 2 * e + 2 * q + y)
        v += h / 6 * (c + 2 * g + 2 * s + z)
        furthest = max(furthest, x)
    inner[-1] = f * (rest + slope * x)
    return t, inner + loss * k * (volts - r * inner), furthest / way


def _step(motion: Motion, drive: Drive, steps: float = _IN_CONTACT) -> float:
    return min(motion.contact.typ / steps, float(drive.t[-1] - drive.t[0]) / 1000)


def _short_enough(motion: Motion, drive: Drive) -> None:
    span = float(drive.t[-1] - drive.t[0])
    if span > _MOST_STEPS * _step(motion, drive):
        raise InputError(
            f"--fit: {in_units(span, 's')} are too long to fit a coil whose impacts last {in_units(motion.contact.typ, 's')}; fit a pulse of less than "
            f"{in_units(_MOST_STEPS * _step(motion, drive), 's')}, or leave --fit out"
        )
