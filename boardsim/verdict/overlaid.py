"""What a trace laid over a result came to, whole: the overlay, the fit, what was judged, and what it rests on."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from boardsim.parts.base import Assumption
from boardsim.verdict.findings import CornerAudit, Verdict
from boardsim.verdict.fit import Fit
from boardsim.verdict.overlay import Difference, Overlay


@dataclass(frozen=True)
class Overlaid:
    """A trace over one computed pulse.

    Attributes
    ----------
    board, pattern, corner : str
    channel, pulse : int
        The pulse is counted from 1.
    label, coil : str
        Of the channel, and the name of its coil.
    trace : Path
    overlay : Overlay
    within : float or None
        Largest difference that was allowed, as a share of the computed peak; None where nobody said. [1]
    audit : CornerAudit
        Of the run.
    engine : str
    changes, assumed : tuple of str
        What is not as it was when it was fired; what the trace does not say and was supposed.
    assumptions : tuple of Assumption
        Of the board's, those about this coil.
    fit : Fit or None
    record : str
        The coil with the fitted numbers, as a table for a board file; empty without a fit.
    """

    board: str
    pattern: str
    corner: str
    channel: int
    label: str
    coil: str
    pulse: int
    trace: Path
    overlay: Overlay
    within: float | None
    audit: CornerAudit
    engine: str
    changes: tuple[str, ...] = ()
    assumed: tuple[str, ...] = ()
    assumptions: tuple[Assumption, ...] = ()
    fit: Fit | None = None
    record: str = ""

    @property
    def judged(self) -> Difference:
        """The difference that is held against what is allowed: the current's, or the voltage's where there is no current."""
        return self.overlay.differences[0]

    @property
    def verdict(self) -> Verdict | None:
        """Whether the largest difference stays within what is allowed; None where nobody said, but never of an unproven run."""
        if not self.audit.proven:
            return "unproven"
        if self.within is None:
            return None
        return "pass" if self.judged.share <= self.within else "fail"
