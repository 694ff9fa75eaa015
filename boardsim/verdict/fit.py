"""A coil's resistance, inductances and core loss from a measured current, with how well the trace tells each of them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from boardsim.errors import InputError
from boardsim.parts.coil import Coil
from boardsim.quantities import in_units
from boardsim.verdict.findings import Floats
from boardsim.verdict.fit_model import Drive, Model, Values, model_of
from boardsim.verdict.overlay import Course, Difference, Overlay, noise_of

_MOST_POINTS = 3000  # that are fitted; of more the mean of neighbours is taken
_TOLD = 0.3  # standard error as a share of the value, above which a trace does not tell it
_WEIGHS = 0.3  # share of a number in a direction, above which the direction is one of its own
_SURE = 2.0  # standard errors by which a core loss must stand off from none
_RESOLVED = 1e-4  # of the peak: an oscilloscope of 12 bits resolves 1/4096/sqrt(12) = 7e-5 of its range
_STEP = 1e-4  # of a value, to see what it does to the current
# Where something moves a small change of a value shifts blows and rebounds, and the sum of squares is rough: wider steps see through it.
_ROUGH_STEP, _FINE_STEP = 1e-2, 2e-3
_ALIKE = 1.01  # times the least that is left: by about as much it jumps with one rebound more or less, so that it does not decide
_STANDS_OUT, _SHARE = (
    3.0,
    0.01,
)  # a fit that leaves more than so many times the noise, and this share of the peak, is begun anew
_LATE = 0.12  # share of the pulse at its end, where what moves has arrived
_ENDS = 4  # searches that have to end well, to see how far they agree
_MOST_TRIES = 25  # of a search
_ROUGHLY = 4.0  # steps in an impact, where a place to begin is looked for
_AS_GOOD = 1.05  # times the noise: a fit that leaves no more is the one
_BEGIN_AGAIN: tuple[Values, ...] = (
    {"closed_inductance": 0.85},
    {"closed_inductance": 1.18},
    {"inductance": 0.9},
    {"inductance": 1.1},
    {"inductance": 0.85, "closed_inductance": 1.18},
    {"inductance": 1.18, "closed_inductance": 0.85},
)
_UNITS = {"resistance": "ohm", "inductance": "H", "closed_inductance": "H", "loss": "S"}
_RANGE = {
    "resistance": 5.0,
    "inductance": 10.0,
    "closed_inductance": 10.0,
}  # up and down from the record: more is another coil
_MOST_LOSS = (
    0.2  # largest core-loss conductance times winding resistance: beyond it the iron would take a fifth of the current
)
_KNOWN = frozenset(
    {
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
    }
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
    motion = set(type(coil.motion).model_fields) if hasattr(coil, "motion") else set()
    if more := sorted(given - _KNOWN - motion):
        raise InputError(f"--fit has no model of {', '.join(more)} of this coil; leave --fit out")
    search = _Search.of(coil, overlay, data)
    return search.result()


@dataclass
class _Search:
    """One fit under way."""

    model: Model
    rough: Model
    direct: Values
    driven_by: str
    t: Floats
    y: Floats
    start: float
    with_delay: bool
    noise: float
    moves: bool
    step: float = _STEP
    half_a_point: float = 0.0
    spread: dict[str, float] = field(default_factory=dict)
    seen: list[tuple[float, Values]] | None = None

    @staticmethod
    def of(coil: Coil, overlay: Overlay, data: Difference) -> _Search:
        course = overlay.course
        volts = next((d for d in overlay.differences if d.quantity == "voltage"), None)
        t, y = data.t, data.measured
        if volts is None:
            drive, driven_by = Drive(course.t, course.voltage), "the computed voltage, until the turn-off"
            t, y = t[t <= course.off], y[t <= course.off]
        else:
            drive = Drive(volts.t, volts.measured - overlay.baseline.get("voltage", 0.0))
            driven_by = "the measured voltage"
        start = float(np.interp(t[0], course.t, course.current))
        noise = noise_of(y)
        if (block := math.ceil(len(t) / _MOST_POINTS)) > 1:
            whole = len(t) // block * block
            t, y = (a[:whole].reshape(-1, block).mean(axis=1) for a in (t, y))
            noise /= math.sqrt(block)
        level = overlay.baseline.get("current", 0.0)
        direct = _direct(drive, t, y - level, course, volts is not None)
        moves = hasattr(coil, "motion")
        half = 0.0 if volts is None else float(np.median(np.diff(volts.t))) / 2
        fine, rough = model_of(coil, drive), model_of(coil, drive, _ROUGHLY)
        return _Search(
            fine,
            rough,
            direct,
            driven_by,
            t,
            y,
            start,
            volts is None,
            noise,
            moves,
            _FINE_STEP if moves else _STEP,
            half,
        )

    @property
    def peak(self) -> float:
        return float(np.abs(self.y).max())

    @property
    def _nuisance(self) -> int:
        return 2 if self.with_delay else 1

    def result(self) -> Fit:
        free = [n for n in self.model.names if not (n == "loss" and self.with_delay)]
        why: dict[str, str] = {}
        values = self._best(free)
        held: dict[str, float] = {}
        while (loose := self._loose(values, free)) is not None:
            why[loose] = self._because(loose, values)
            free.remove(loose)
            # What never moved stays so, whatever the record makes of it.
            held[loose] = values[loose] if loose == "closed_inductance" else self.model.start[loose]
            values = self._solve(free, values, held)
        errors = self._errors(values, free)
        if self.half_a_point:
            # A step of the voltage may lie anywhere between two points: what half a point of delay does is an error as well.
            later = replace(self, t=self.t + self.half_a_point)._solve(free, values, held)
            errors = {n: math.hypot(e, later[n] - values[n]) for n, e in errors.items()}
        before, least = self.model.start["loss"], False
        if "loss" not in free:
            why["loss"] = "without the voltage across the coil, measured, it is not told from a delay"
            values, errors = self._with_loss(
                before, values, errors, free, held, self._solve(free, values, {**held, "loss": 0.0})
            )
        elif values["loss"] < _SURE * errors["loss"]:
            why["loss"] = "the trace shows no core loss beyond its noise"
            free.remove("loss")
            most = values["loss"] + _SURE * errors["loss"]
            least = before > most
            values, errors = self._with_loss(most if least else before, values, errors, free, held, values)
        return self._fit(values, errors, why, least)

    def _with_loss(
        self, loss: float, values: Values, errors: Values, free: Sequence[str], held: Values, other: Values
    ) -> tuple[dict[str, float], dict[str, float]]:
        """The fit with a core loss that the trace does not tell; how far that moves the others counts as an error of theirs."""
        found = self._solve(free, values, {**held, "loss": loss})
        return found, {**errors, **{n: math.hypot(errors[n], found[n] - other[n]) for n in free}}

    def _fit(self, values: Values, errors: Values, why: Mapping[str, str], least: bool) -> Fit:
        left = self._residuals(values)
        t, i, moved = self.model.run(values, self.start)
        numbers = []
        for name in self.model.names:
            before = self.model.start[name]
            value = before if name in why and name != "loss" else values[name]
            error = errors[name] if name not in why else math.inf
            if name == "loss":
                told = "at least" if least else "left" if name in why else "fitted"
                numbers.append(
                    Fitted("core_loss", 1 / value, error / value**2, "ohm", 1 / before, told, why.get(name, ""))
                )
            else:
                told = "left" if name in why else "fitted"
                numbers.append(Fitted(name, value, error, _UNITS[name], before, told, why.get(name, "")))
        return Fit(
            tuple(numbers),
            self.driven_by,
            values["offset"],
            values["delay"],
            float(np.sqrt(np.mean(left**2))),
            float(left[np.argmax(np.abs(left))]),
            self.noise,
            moved,
            self._rms(values) <= max(_STANDS_OUT * self.noise, _SHARE * self.peak),
            t + values["delay"],
            i,
        )

    # ------------------------------------------------------------------------------------------------ least squares

    def _best(self, free: Sequence[str]) -> dict[str, float]:
        """The values that leave least. Where something moves there are minima beside it, in which a blow comes too early or too
        late: there the search is begun in several places, roughly, and the best is refined.
        """
        first = {n: self._within(n, self.direct.get(n, self.model.start[n])) for n in free}
        if not self.moves:
            return self._solve(free, first, {})
        rough = replace(self, model=self.rough, step=_ROUGH_STEP)
        enough = max(_AS_GOOD * self.noise, _RESOLVED * self.peak)
        found: list[tuple[float, dict[str, float]]] = []
        for begin in (
            first,
            {n: self.model.start[n] for n in free},
            *({**first, **_times(first, f)} for f in _BEGIN_AGAIN),
        ):
            values = rough._solve(free, begin, {})
            found.append((rough._rms(values), values))
            if sum(rms < enough for rms, _ in found) >= _ENDS:
                break
        fine = replace(self, step=_ROUGH_STEP, seen=[])
        best = fine._solve(free, min(found, key=_first)[1], {})
        best = min(best, replace(fine, step=_FINE_STEP)._solve(free, best, {}), key=self._rms)
        ends = [*found, *((rms / self._rms(best) * min(found, key=_first)[0], v) for rms, v in fine.seen or ())]
        most = _ALIKE * min(found, key=_first)[0]
        self.spread = {n: max((abs(v[n] - best[n]) for rms, v in ends if rms <= most), default=0.0) for n in free}
        return best

    def _within(self, name: str, value: float) -> float:
        before, most = self.model.start[name], _RANGE.get(name, 1.0)
        return min(max(value, before / most), before * most) if name in _RANGE else before

    def _solve(self, free: Sequence[str], begin: Values, held: Values) -> dict[str, float]:
        from scipy.optimize import least_squares

        first = {**self.model.start, **begin}
        low, high = zip(*self._bounds(free), strict=True)
        x0 = np.clip([*(self._to(n, first[n]) for n in free), *[0.0] * self._nuisance], low, high)

        def values(x: Floats) -> dict[str, float]:
            return {**self.model.start, **held, **self._from(free, x)}

        found = least_squares(
            lambda x: self._residuals(values(x)) / self.peak,
            x0,
            lambda x: self._slopes(values(x), free) / self.peak,
            bounds=(low, high),
            x_scale="jac",
            ftol=1e-8,
            xtol=1e-8,
            max_nfev=_MOST_TRIES,
        )
        return values(found.x)

    def _bounds(self, free: Sequence[str]) -> Iterator[tuple[float, float]]:
        for name in free:
            if name == "loss":
                yield 0.0, _MOST_LOSS / self.model.start["resistance"] / self.model.start["loss"]
            else:
                yield -math.log(_RANGE[name]), math.log(_RANGE[name])
        yield -0.5, 0.5  # offset, of the peak
        if self.with_delay:
            yield -0.3, 0.3  # of the span

    def _to(self, name: str, value: float) -> float:
        before = self.model.start[name]
        return value / before if name == "loss" else math.log(value / before)

    def _from(self, free: Sequence[str], x: Floats) -> dict[str, float]:
        found = {}
        for name, u in zip(free, x, strict=False):
            before = self.model.start[name]
            found[name] = before * (float(u) if name == "loss" else math.exp(u))
        if "closed_inductance" in found:  # an iron plunger never takes from the inductance as it comes in
            opened = found.get("inductance", self.model.start["inductance"])
            found["closed_inductance"] = max(found["closed_inductance"], opened)
        found["offset"] = float(x[len(free)]) * self.peak
        found["delay"] = float(x[len(free) + 1]) * self._span if self.with_delay else 0.0
        return found

    @property
    def _span(self) -> float:
        return float(self.t[-1] - self.t[0])

    def _current(self, values: Values) -> Floats:
        t, i, _ = self.model.run(values, self.start)
        found: Floats = np.interp(self.t - values["delay"], t, i) + values["offset"]
        if self.seen is not None:
            self.seen.append((float(np.sqrt(np.mean((self.y - found) ** 2))), values))
        return found

    def _residuals(self, values: Values) -> Floats:
        return self.y - self._current(values)

    def _rms(self, values: Values) -> float:
        return float(np.sqrt(np.mean(self._residuals(values) ** 2)))

    def _slopes(self, values: dict[str, float], free: Sequence[str]) -> Floats:
        """What the residuals do with each number: the Jacobian. (points, numbers)"""
        here = self._current(values)
        columns = []
        for name in free:
            to = {**values, name: self._stepped(name, values[name])}
            du = self._to(name, to[name]) - self._to(name, values[name])
            columns.append((here - self._current(to)) / du)
        columns.append(np.full(len(here), -self.peak))
        if self.with_delay:
            h = _STEP * self._span
            later = self._current({**values, "delay": values["delay"] + h})
            earlier = self._current({**values, "delay": values["delay"] - h})
            columns.append((earlier - later) / (2 * h) * self._span)
        return np.column_stack(columns)

    def _stepped(self, name: str, value: float) -> float:
        return value + 0.01 * self.model.start[name] if name == "loss" else value * math.exp(self.step)

    # ------------------------------------------------------------------------------------------- what the trace tells

    def _spread(self, values: dict[str, float]) -> float:
        """Standard deviation of what is left, as if it were white. [A]"""
        left = self._residuals(values)
        white = max(
            float(np.sqrt(np.sum(left**2) / max(len(left) - len(self.model.names) - 2, 1))), _RESOLVED * self.peak
        )
        centred = left - left.mean()
        power = float(np.sum(centred**2))
        r = float(np.sum(centred[1:] * centred[:-1])) / power if power else 0.0
        r = min(max(r, 0.0), 0.999)
        return white * math.sqrt((1 + r) / (1 - r))

    def _errors(self, values: dict[str, float], free: Sequence[str]) -> dict[str, float]:
        """Standard errors. [unit]"""
        slopes = self._slopes(values, free) / self._spread(values)
        u = np.sqrt(np.diag(np.linalg.pinv(slopes.T @ slopes)))
        return {
            n: float(e) * (self.model.start[n] if n == "loss" else values[n]) for n, e in zip(free, u, strict=False)
        }

    def _loose(self, values: dict[str, float], free: Sequence[str]) -> str | None:
        """The number that the trace tells least of, if it does not tell it; the core loss is held against none instead."""
        slopes = self._slopes(values, free) / self._spread(values)
        _, sizes, turned = np.linalg.svd(slopes, full_matrices=False)
        names = [n for n in free if n != "loss"]
        for size, row in zip(sizes[::-1], turned[::-1], strict=True):
            if size * _TOLD > 1:
                return None
            weights = {n: abs(float(row[free.index(n)])) for n in names}
            worst = max(weights, key=lambda n: weights[n], default=None)
            # A direction that only the core loss, the offset or the delay lies in is no matter of the others.
            if worst is not None and weights[worst] > _WEIGHS:
                return worst
        return None

    def _because(self, name: str, values: dict[str, float]) -> str:
        if name == "closed_inductance":
            moved = self.model.run({**self.model.start, **values}, self.start)[2]
            if moved < 0.5:
                return "nothing moves far in this trace, so that it never shows the closed coil"
        return f"the trace does not tell it within {_TOLD:.0%}, whatever the others are"


def _first(pair: tuple[float, dict[str, float]]) -> float:
    return pair[0]


def _times(values: Values, factors: Values) -> dict[str, float]:
    return {n: values[n] * k for n, k in factors.items() if n in values}


def _direct(drive: Drive, t: Floats, i: Floats, course: Course, whole: bool) -> dict[str, float]:
    """Resistance and inductances as the flux linkage tells them, for a fit to begin with.

    Parameters
    ----------
    drive : Drive
    t, i : (n,) array
        The measured current [A] at these times [s].
    course : Course
    whole : bool
        Whether the drive is that of the trace, until its current is gone.

    Returns
    -------
    dict
        "resistance" [ohm], "inductance" and "closed_inductance" [H]; what cannot be told is left out.

    Notes
    -----
    The flux linkage is the integral of v - R i. Where it begins and ends at nothing R is the integral of v over that of i; else it is the R
    for which flux over current stands still at the end of the pulse, where nothing moves any more: v - R i = (flux / i) di/dt. L is flux over current: early in the rise that of the open coil, at the end
    of the pulse that of the closed one. Takes no account of core loss.
    """
    v = np.interp(t, drive.t, drive.volts)
    width = course.off - course.on
    late = (t > course.off - _LATE * width) & (t < course.off - 0.005 * width)
    rising = (t > course.on) & (t < course.off)
    if late.sum() < 4 or i.max() <= 0 or float(i[late].mean()) <= 0:
        return {}
    volts, amperes = float(v[late].mean()), float(i[late].mean())
    if whole and abs(float(i[-5:].mean())) < 0.02 * i.max():
        ohms = float(np.trapezoid(v, t) / np.trapezoid(i, t))
    else:
        middle = t <= course.off - _LATE * width / 2
        growth = float(np.polyfit(t[late], i[late], 1)[0]) / amperes
        flux, charge = float(np.trapezoid(v[middle], t[middle])), float(np.trapezoid(i[middle], t[middle]))
        ohms = (volts - flux * growth) / (amperes - charge * growth)
    if not ohms > 0:
        return {}
    steps = np.concatenate([[0.0], np.cumsum(((v - ohms * i)[1:] + (v - ohms * i)[:-1]) / 2 * np.diff(t))])
    found = {"resistance": ohms}
    until = int(np.argmax(rising & (i > 0.3 * i.max())))
    early = rising & (np.arange(len(t)) < until) & (i > 0.1 * i.max())
    for name, where in (("inductance", early), ("closed_inductance", late)):
        if where.sum() >= 2 and (henries := float(np.median(steps[where] / i[where]))) > 0:
            found[name] = henries
    return found


def words(number: Fitted) -> str:
    """A fitted number with its standard error, for people."""
    value = in_units(number.value, number.unit, 4)
    if number.told == "fitted":
        return f"{value}, standard error {in_units(number.error, number.unit, 2)} (was {in_units(number.before, number.unit, 4)})"
    if number.told == "at least":
        return f"at least {value}: {number.why} (was {in_units(number.before, number.unit, 4)})"
    return f"left at {value}: {number.why}"
