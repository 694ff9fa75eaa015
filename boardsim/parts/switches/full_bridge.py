"""A full bridge as the switch of a channel and of its reverse channel: the coil lies between two legs."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.leg import Leg


class FullBridge(Leg):
    """One of two equal legs: a channel's number turns on the high transistor of one, its reverse channel's that of the other.

    Notes
    -----
    Legs a and b, levels h_a and h_b (1: high transistor on, 0: low one on), supply V: v_coil = V (h_a - h_b), less what two
    transistors drop (Kirchhoff). With both channels off the coil is shorted through both low transistors and its current decays
    with L / R, with both on through both high ones. Where one leg falls as the other rises, in the dead time both have no
    transistor on that carries the current forwards: it flows through two body diodes back into the rail, against
    V + 2 V_F, and after that through the channels, against V.
    """

    role: ClassVar[str] = "switch"
    both_ways: ClassVar[bool] = True
    kind: Literal["full-bridge"] = "full-bridge"
