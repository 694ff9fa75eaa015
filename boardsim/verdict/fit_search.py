"""The search for the values of a coil that leave least of a measured current, and how well the current tells each of them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from boardsim.parts.coil import Coil
from boardsim.verdict.findings import Floats
from boardsim.verdict.fit_model import Drive, Model, Values, model_of
from boardsim.verdict.fit_start import direct_values
from boardsim.verdict.overlay import Difference, Overlay, noise_of

TOLD = 0.3  # standard error as a share of the value, above which a trace does not tell it
_MOST_POINTS = 3000  # that are fitted; of more the mean of neighbours is taken
_WEIGHS = 0.3  # share of a number in a direction, above which the direction is one of its own
_RESOLVED = 1e-4  # of the peak: an oscilloscope of 12 bits resolves 1/4096/sqrt(12) = 7e-5 of its range
_STEP = 1e-4  # of a value, to see what it does to the current
# Where something moves a small change of a value shifts blows and rebounds, and the sum of squares is rough: wider steps see through it.
_ROUGH_STEP, _FINE_STEP = 1e-2, 2e-3
# Times the least that is left: by about as much it jumps with one rebound more or less, so that it does not decide.
_ALIKE = 1.01
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
# Up and down from the record: more is another coil.
_RANGE = {"resistance": 5.0, "inductance": 10.0, "closed_inductance": 10.0}
# Largest core-loss conductance times winding resistance: beyond it the iron would take a fifth of the current.
_MOST_LOSS = 0.2


@dataclass
class Search:
    """One fit under way.

    Attributes
    ----------
    model, rough : Model
        With fine steps, and with coarse ones to look for a place to begin.
    direct : Values
        What the flux linkage tells.
    driven_by : str
    t, y : (n,) array
        The measured current. [s], [A]
    start : float
        Current at the beginning. [A]
    with_delay : bool
        Whether a delay is fitted along, since the drive is not the trace's own.
    noise : float
        Of `y`. [A]
    moves : bool
        Whether the coil moves something.
    step : float
        Of a value, to see what it does. [1]
    half_a_point : float
        Half the time between two points of a measured voltage; 0 without one. [s]
    spread : dict
        How far values lie apart that leave as little as the best. [unit]
    seen : list of (root mean square, values), or None
        Everything that was tried, where that is to be kept.
    """

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
    def of(coil: Coil, overlay: Overlay, data: Difference) -> Search:
        """The search for a coil's values in the current of an overlay, `data`."""
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
        direct = direct_values(drive, t, y - level, course, volts is not None)
        moves = hasattr(coil, "motion")
        half = 0.0 if volts is None else float(np.median(np.diff(volts.t))) / 2
        fine, rough = model_of(coil, drive), model_of(coil, drive, _ROUGHLY)
        return Search(
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
        """Of the measured current. [A]"""
        return float(np.abs(self.y).max())

    @property
    def _nuisance(self) -> int:
        return 2 if self.with_delay else 1

    # ------------------------------------------------------------------------------------------------ least squares

    def best(self, free: Sequence[str]) -> dict[str, float]:
        """The values that leave least. Where something moves there are minima beside it, in which a blow comes too early or too
        late: there the search is begun in several places, roughly, and the best is refined.
        """
        first = {n: self._within(n, self.direct.get(n, self.model.start[n])) for n in free}
        if not self.moves:
            return self.solve(free, first, {})
        rough = replace(self, model=self.rough, step=_ROUGH_STEP)
        enough = max(_AS_GOOD * self.noise, _RESOLVED * self.peak)
        found: list[tuple[float, dict[str, float]]] = []
        for begin in (
            first,
            {n: self.model.start[n] for n in free},
            *({**first, **_times(first, f)} for f in _BEGIN_AGAIN),
        ):
            values = rough.solve(free, begin, {})
            found.append((rough.rms(values), values))
            if sum(rms < enough for rms, _ in found) >= _ENDS:
                break
        fine = replace(self, step=_ROUGH_STEP, seen=[])
        best = fine.solve(free, min(found, key=_first)[1], {})
        best = min(best, replace(fine, step=_FINE_STEP).solve(free, best, {}), key=self.rms)
        ends = [*found, *((rms / self.rms(best) * min(found, key=_first)[0], v) for rms, v in fine.seen or ())]
        most = _ALIKE * min(found, key=_first)[0]
        self.spread = {n: max((abs(v[n] - best[n]) for rms, v in ends if rms <= most), default=0.0) for n in free}
        return best

    def _within(self, name: str, value: float) -> float:
        before, most = self.model.start[name], _RANGE.get(name, 1.0)
        return min(max(value, before / most), before * most) if name in _RANGE else before

    def solve(self, free: Sequence[str], begin: Values, held: Values) -> dict[str, float]:
        """One least-squares search for the values in `free`, from `begin` on; `held` are those that stand still."""
        from scipy.optimize import least_squares

        first = {**self.model.start, **begin}
        low, high = zip(*self._bounds(free), strict=True)
        x0 = np.clip([*(self._to(n, first[n]) for n in free), *[0.0] * self._nuisance], low, high)

        def values(x: Floats) -> dict[str, float]:
            return {**self.model.start, **held, **self._from(free, x)}

        found = least_squares(
            lambda x: self.residuals(values(x)) / self.peak,
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

    def residuals(self, values: Values) -> Floats:
        """Measured less model. (points,) [A]"""
        return self.y - self._current(values)

    def rms(self, values: Values) -> float:
        """Root mean square of what is left. [A]"""
        return float(np.sqrt(np.mean(self.residuals(values) ** 2)))

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
        left = self.residuals(values)
        white = max(
            float(np.sqrt(np.sum(left**2) / max(len(left) - len(self.model.names) - 2, 1))), _RESOLVED * self.peak
        )
        centred = left - left.mean()
        power = float(np.sum(centred**2))
        r = float(np.sum(centred[1:] * centred[:-1])) / power if power else 0.0
        r = min(max(r, 0.0), 0.999)
        return white * math.sqrt((1 + r) / (1 - r))

    def errors(self, values: dict[str, float], free: Sequence[str]) -> dict[str, float]:
        """Standard errors. [unit]"""
        slopes = self._slopes(values, free) / self._spread(values)
        u = np.sqrt(np.diag(np.linalg.pinv(slopes.T @ slopes)))
        return {
            n: float(e) * (self.model.start[n] if n == "loss" else values[n]) for n, e in zip(free, u, strict=False)
        }

    def loose(self, values: dict[str, float], free: Sequence[str]) -> str | None:
        """The number that the trace tells least of, if it does not tell it; the core loss is held against none instead."""
        slopes = self._slopes(values, free) / self._spread(values)
        _, sizes, turned = np.linalg.svd(slopes, full_matrices=False)
        names = [n for n in free if n != "loss"]
        for size, row in zip(sizes[::-1], turned[::-1], strict=True):
            if size * TOLD > 1:
                return None
            weights = {n: abs(float(row[free.index(n)])) for n in names}
            worst = max(weights, key=lambda n: weights[n], default=None)
            # A direction that only the core loss, the offset or the delay lies in is no matter of the others.
            if worst is not None and weights[worst] > _WEIGHS:
                return worst
        return None


def _first(pair: tuple[float, dict[str, float]]) -> float:
    return pair[0]


def _times(values: Values, factors: Values) -> dict[str, float]:
    return {n: values[n] * k for n, k in factors.items() if n in values}
