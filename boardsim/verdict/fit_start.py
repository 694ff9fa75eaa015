"""Where a fit begins: resistance and inductances as the flux linkage of a trace tells them."""

from __future__ import annotations

import numpy as np

from boardsim.verdict.findings import Floats
from boardsim.verdict.fit_model import Drive
from boardsim.verdict.overlay import Course

_LATE = 0.12  # share of the pulse at its end, where what moves has arrived


def direct_values(drive: Drive, t: Floats, i: Floats, course: Course, whole: bool) -> dict[str, float]:
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
