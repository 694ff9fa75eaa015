"""How does one begin? A commented starter board, and the schema of the files."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from pydantic import BaseModel
from pydantic.json_schema import GenerateJsonSchema
from pydantic_core.core_schema import TaggedUnionSchema

from boardsim.board.schema import BoardFile
from boardsim.errors import InputError
from boardsim.firing.capture import CaptureFile
from boardsim.firing.csv_events import EventsFile
from boardsim.firing.pattern import PatternFile
from boardsim.parts.record import Record
from boardsim.quantities import Quantity
from boardsim.report.files import write_text
from boardsim.scenarios.plan import FILE_NAME, ScenarioFile

BOARD = """\
# A board file. Numbers are text with a unit; a tolerance may follow ("12 mH +/- 10 %", "4700 uF -20/+50 %",
# "5 to 45 degC"). Where you give tolerances, the worst corners are run. Everything here is a made-up example:
# replace each figure with that of your datasheet.
name = "my board"
ambient = "10 to 40 degC"             # air around the board: cold windings draw more, warm ones pull in later

supply = { voltage = "24 V +/- 5 %", resistance = "20 mohm", current_ceiling = "3 A" }
cable = { gauge = "18 AWG", length = "1 m" }     # or area = "1 mm2"; out and back are counted
bulk = { capacitance = "2200 uF +/- 20 %", esr = "60 mohm", rated = "35 V" }
logic = { voltage = "5 V +/- 5 %" }   # a supply of its own; from the coil rail: kind = "linear-regulator", "buck-regulator"

[chain]                               # the shift registers, and how the firmware writes them
register = "74HC595"
count = 1
clock = "2 MHz"
# bit_order = "msb"                   # which bit of a byte is sent first: "msb" or "lsb"
# first_out = "far"                   # whose byte is sent first: the "far" or the "near" register's
# active = "high"                     # output level by which the firmware means on
# output_enable = { pull_up = "10 kohm", pin = true }    # keeps outputs off until the firmware runs (`boardsim power-up`)

[controller]                          # what drives the registers; on the logic rail unless it has a voltage of its own
# voltage = "3.3 V +/- 3 %"
high_drop = "0.8 V"                   # how far a high output may stay below its supply under load
low_output = "0.6 V"                  # highest level of a low output under load
spi_mode = 0                          # registers take data on the rising edge of the clock, as modes 0 and 3 do
tick = "100 us"                       # of the timer that fires: starts and widths are rounded to it
# jitter = "5 us"                     # how late an interrupt may come
# frame_gap = "20 us"                 # pause between two register frames

[coils.gate]
resistance = "48 ohm +/- 10 %"
at = "20 degC"                        # temperature at which the resistance is given
inductance = "90 mH +/- 20 %"
pull_in = "0.25 A"                    # below this it does not move
release = "0.05 A"                    # above this it does not let go
rise = "30 K"                         # how much warmer than the air the winding gets
# longest_on = "200 ms"               # rules for the firmware: how long it may leave one on,
# least_off = "20 ms"                 # and how long it must leave it off before the next pulse

[channels."0-7"]                      # eight channels that are built alike
label = "gate {n}"
coil = "gate"
switch = { part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }
clamp = { kind = "diode", diode = "fast-2a" }
# outputs = "0-7"                     # register outputs they are wired to; the channel numbers if not given
# bits = "0-7"                        # bits of the firmware's image that mean them; the outputs if not given

# A part that the library does not have is described here and used by its name above:
# [parts.my-switch]
# kind = "n-mosfet"
# breakdown = "55 V"
# ...

[limits]
most_on = 4                           # channels that may be on at once
brown_out = { voltage = "18 V", lasting = "2 ms" }   # the board fails if the coil rail is below for longer
# most_current = "2 A"                # what all coils together may carry at once
# all_off = { within = "1 ms" }       # when all must be off after the firmware's last register frame
# [[limits.exclusive]]
# channels = "0-1"
# most = 1

# [derating]                          # the share of each rating that you allow yourself
# voltage = "80 %"
# reason = "house rule"
"""

PATTERN = """\
# A firing pattern: pulses, each on one or more channels.
name = "first"

[[pulses]]
channels = "0-7"
start = "5 ms"
width = "40 ms"
stagger = "20 ms"     # each further channel starts this much later
repeat = 2
every = "250 ms"      # from one start of a channel to its next
"""


SCENARIOS = """\
# What is asked of the board at every change: `boardsim verify FOLDER` runs every scenario and says which do not come
# out as expected; a pipeline acts on its exit status.
strict = false                        # true: a limit that was not given counts as broken

[scenarios.first]
pattern = "patterns/first.toml"
# expect = "pass"                     # the worst verdict that is all right: "pass", "tight", "limit-missing"; or "fail"
# breaks = ["overlap"]                # a scenario that has to break exactly these checks
# conditions = { ambient = "40 to 55 degC", supply = "23 V +/- 2 %" }

[scenarios.volley]                    # how many channels the supply stands at once
question = "volley"

[scenarios.chain]                      # whether the registers understand the controller
question = "chain"

[scenarios.release]                   # what turning a channel off does, and when it may be fired again
question = "release"

# A failure that is known and lived with for a while; from the day after it counts again:
# accepted = [{ check = "overlap", channels = "3", reason = "why", until = 2030-06-30 }]
"""


def write_starter(folder: Path) -> tuple[Path, Path, Path]:
    """Write the starter board, pattern and scenarios into a new folder.

    Raises
    ------
    InputError
        If one of the files exists already, or the folder cannot be made.
    """
    board, pattern, scenarios = folder / "board.toml", folder / "patterns" / "first.toml", folder / FILE_NAME
    for path in (board, pattern, scenarios):
        if path.exists():
            raise InputError(f"{path}: exists already and is left as it is; name a new folder")
    write_text(board, BOARD)
    write_text(pattern, PATTERN)
    write_text(scenarios, SCENARIOS)
    return board, pattern, scenarios


def json_schema(what: str) -> dict[str, Any] | None:
    """The JSON Schema of "board", "pattern", "capture", "events" or "scenarios" files; None for any other word."""
    models: dict[str, type[Record]] = {
        "board": BoardFile,
        "pattern": PatternFile,
        "capture": CaptureFile,
        "events": EventsFile,
        "scenarios": ScenarioFile,
    }
    model = models.get(what)
    if model is None:
        return None
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        **model.model_json_schema(by_alias=True, schema_generator=_Schema),
    }


class _Schema(GenerateJsonSchema):
    """Writes the default of a quantity as a file would: as text. A table of one of several kinds may be like several of them.

    A switch is of the kind of the part that it names, which a schema cannot look up.
    """

    def tagged_union_schema(self, schema: TaggedUnionSchema) -> dict[str, Any]:
        """One of several kinds of part, or more than one where the kind is left out."""
        found = super().tagged_union_schema(schema)
        if "oneOf" in found:
            found["anyOf"] = found.pop("oneOf")
        return found

    def encode_default(self, dft: Any) -> Any:
        """What the schema names as the default; none of a whole table, since its keys have their own."""
        if isinstance(dft, Quantity):
            return str(dft)
        return super().encode_default({} if isinstance(dft, BaseModel) else dft)
