"""A half bridge as the switch of a channel: the coil lies between the leg's middle and ground."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.leg import Leg


class HalfBridge(Leg):
    """The coil is fed by the high transistor, and freewheels through the low one."""

    role: ClassVar[str] = "switch"
    kind: Literal["half-bridge"] = "half-bridge"
