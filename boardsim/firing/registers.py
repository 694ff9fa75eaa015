"""The chain of registers, bit by bit: a shift stage and a storage stage per output."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from boardsim.board.schema import Chain


@dataclass(frozen=True)
class ChainState:
    """Contents of the whole chain as two words; bit k is output k (register k // n, its output k % n).

    The serial input enters bit 0; each clock moves every bit to the next higher output, across registers.
    """

    width: int
    shift: int = 0
    storage: int = 0

    def clock(self, data: int) -> ChainState:
        """One clock edge with the serial input at `data`."""
        moved = ((self.shift << 1) | data) & ((1 << self.width) - 1)
        return ChainState(self.width, moved, self.storage)

    def latch(self) -> ChainState:
        """One latch edge: all outputs take the shift stage at once."""
        return ChainState(self.width, self.shift, self.shift)


def bits_on_the_wire(image: int, chain: Chain) -> Iterable[int]:
    """The bits that the controller sends for an image of its outputs, in order.

    Parameters
    ----------
    image : int
        Bit k set: the firmware wants its output bit k on.
    chain : Chain
        Order of bytes and bits, and the level that means on.
    """
    size = chain.register_.outputs
    if chain.active == "low":
        image ^= (1 << chain.outputs) - 1
    registers = range(chain.count)
    for register in reversed(registers) if chain.first_out == "far" else registers:
        places = range(size)
        for place in reversed(places) if chain.bit_order == "msb" else places:
            yield (image >> (register * size + place)) & 1


def shift_in(state: ChainState, image: int, chain: Chain, late: int | None = None) -> ChainState:
    """Clock one whole register frame in and latch it.

    Parameters
    ----------
    late : int or None
        Where every bit comes one place late, as in SPI mode 1: the level on the wire before the frame, which the first clock
        takes. The frame's own last bit then stays on the wire.
    """
    bits = list(bits_on_the_wire(image, chain))
    if late is not None:
        bits = [late, *bits[:-1]]
    for bit in bits:
        state = state.clock(bit)
    return state.latch()


def send(state: ChainState, image: int, chain: Chain, spi_mode: int, on_wire: int) -> tuple[ChainState, int]:
    """Shift one register frame in and latch it, as a controller in an SPI mode does.

    Parameters
    ----------
    spi_mode : int
        In mode 1 every bit comes one place late (`Controller`).
    on_wire : int
        Level of the data line before the frame.

    Returns
    -------
    tuple of (ChainState, int)
        The chain after the latch edge, and the level that stays on the data line.
    """
    return shift_in(state, image, chain, on_wire if spi_mode == 1 else None), last_bit(image, chain)


def last_bit(image: int, chain: Chain) -> int:
    """What stays on the data line after a frame."""
    return list(bits_on_the_wire(image, chain))[-1]


def frame_time(chain: Chain) -> float:
    """Time from the first clock edge of a register frame to its latch edge. [s]

    Notes
    -----
    One clock period per output, then the latch time.
    """
    return chain.outputs / chain.clock.typ + chain.latch_time.typ
