"""Numbers with units: "12 mH +/- 10 %" <-> SI values with a tolerance band and an origin.

pint knows the units; the grammar around it is thin: a number, a unit or an attached scale letter where the
field fixes the unit ("4k7", "470u", IEC 60062), and a tolerance ("+/- 10 %", "-20/+50 %") or a band ("5 to 45 degC").
"""

from __future__ import annotations

import functools
import math
import re
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Literal

from boardsim.errors import QuantityError

if TYPE_CHECKING:
    from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
    from pydantic_core import core_schema

Bound = Literal["min", "typ", "max"]


@dataclass(frozen=True)
class Origin:
    """Where a number comes from, and in whose words."""

    kind: Literal["given", "library", "computed", "assumed"]
    source: str = ""

    def __str__(self) -> str:
        return f"{self.kind}: {self.source}" if self.source else self.kind


GIVEN = Origin("given", "board file")


@dataclass(frozen=True)
class Quantity:
    """A value with its tolerance band, in the SI unit `unit`; `min <= typ <= max`."""

    typ: float
    min: float
    max: float
    unit: str
    origin: Origin = GIVEN

    @property
    def toleranced(self) -> bool:
        """Whether a tolerance or a band was given."""
        return self.min != self.max

    def at(self, bound: Bound) -> float:
        """The value at one end of the band, or in its middle. [unit]"""
        return float(getattr(self, bound))

    def assumed(self) -> bool:
        """Whether the tool had to supply this number."""
        return self.origin.kind == "assumed"

    def __str__(self) -> str:
        text = _written(self.typ, self.unit)
        if not self.toleranced:
            return text
        return f"{text} ({_written(self.min, self.unit)} to {_written(self.max, self.unit)})"


@dataclass(frozen=True)
class Dimension:
    """What a field measures: its unit, which letters suffice, and which values can be meant at all.

    The bounds are far outside what boards contain; they catch slips such as "12 MH".
    """

    name: str
    unit: str
    example: str
    low: float = 0.0
    high: float = math.inf
    zero: bool = False
    scale_letters: bool = True

    @property
    def named(self) -> str:
        """The name with its article."""
        return f"{'an' if self.name[0] in 'aeiou' else 'a'} {self.name}"

    @property
    def bounds(self) -> str:
        """Between which values the field is expected, for messages."""
        return f"{_written(self.low, self.unit)} and {_written(self.high, self.unit)}"

    def check(self, value: float, text: str) -> None:
        """Hold a value against what the field can mean.

        Raises
        ------
        QuantityError
            If it is outside.
        """
        if value < 0 <= self.low < 1:  # a temperature below 0 K is out of range like any other
            raise QuantityError(
                f"{text!r} is negative; {self.named} must be {'0 or more' if self.zero else 'positive'}"
            )
        if value == 0 and self.zero:
            return
        if value == 0 and self.low >= 0:
            raise QuantityError(f"{text!r} is zero; {self.named} must be positive here")
        if not self.low <= value <= self.high:
            raise QuantityError(
                f"{text!r} is out of range, {_written(value, self.unit)}; {self.named} is expected between {self.bounds}"
            )

    # pydantic: a field of this dimension is written as a string and read as a Quantity.
    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> core_schema.CoreSchema:
        from pydantic_core import core_schema

        def read(value: Any, info: core_schema.ValidationInfo) -> Quantity:
            origin = GIVEN
            if info.context and "origin" in info.context:
                origin = info.context["origin"](info.field_name)
            return read_quantity(value, self, origin)

        return core_schema.with_info_plain_validator_function(
            read, serialization=core_schema.plain_serializer_function_ser_schema(str)
        )

    def __get_pydantic_json_schema__(
        self, schema: core_schema.CoreSchema, handler: GetJsonSchemaHandler
    ) -> dict[str, Any]:
        return {
            "type": "string",
            "examples": [self.example],
            "description": f"{self.name} in {self.unit}, such as {self.example!r}",
        }


RESISTANCE = Dimension("resistance", "ohm", "16 ohm +/- 10 %", 1e-6, 1e12, zero=True)
POSITIVE_RESISTANCE = replace(RESISTANCE, zero=False)  # where 0 ohm would be a short that no model can take
INDUCTANCE = Dimension("inductance", "H", "12 mH +/- 20 %", 1e-10, 1e3)
TRANSCONDUCTANCE = Dimension("transconductance", "S", "26 S", 1e-6, 1e5)
CAPACITANCE = Dimension("capacitance", "F", "4700 uF -20/+50 %", 1e-14, 1e2)
VOLTAGE = Dimension("voltage", "V", "24 V +/- 5 %", 1e-3, 1e4)
CURRENT = Dimension("current", "A", "0.8 A", 1e-9, 1e4)
POWER = Dimension("power", "W", "5 W", 1e-6, 1e5)
ENERGY = Dimension("energy", "J", "40 mJ", 1e-9, 1e4)
CHARGE = Dimension("charge", "C", "10 nC", 1e-12, 1.0)
TIME = Dimension("time", "s", "10 ms", 1e-12, 1e6, zero=True)
POSITIVE_TIME = replace(TIME, zero=False)
FREQUENCY = Dimension("frequency", "Hz", "4 MHz", 1e-3, 1e9)
LENGTH = Dimension("length", "m", "1.8 m", 1e-6, 1e4, scale_letters=False)  # "1m8" could be 1.8 m or 1.8 mm
AREA = Dimension("area", "m^2", "2.5 mm2", 1e-10, 1e-2, scale_letters=False)
TEMPERATURE = Dimension("temperature", "K", "25 degC", 200.0, 800.0, scale_letters=False)
TEMPERATURE_RISE = Dimension("temperature rise", "K", "40 K", 1e-3, 600.0, zero=True, scale_letters=False)
THERMAL_RESISTANCE = Dimension("thermal resistance", "K/W", "62 K/W", 1e-3, 1e4, scale_letters=False)
VOLTAGE_DRIFT = Dimension("temperature drift", "V/K", "-2 mV/K", -10.0, 10.0, zero=True, scale_letters=False)
GROWTH = Dimension("temperature coefficient", "1/K", "0.4 %/K", 0.0, 0.05, zero=True, scale_letters=False)
MASS = Dimension("mass", "kg", "25 g", 1e-6, 100.0, scale_letters=False)
FORCE = Dimension("force", "N", "1.2 N", 1e-4, 1e5, zero=True, scale_letters=False)
STIFFNESS = Dimension("stiffness", "N/m", "300 N/m", 1e-2, 1e8, zero=True, scale_letters=False)
DAMPING = Dimension("damping", "kg/s", "0.2 kg/s", 1e-6, 1e4, zero=True, scale_letters=False)
FORCE_CONSTANT = Dimension("force constant", "N/A", "9.6 N/A", 1e-3, 1e4, scale_letters=False)
SHARE = Dimension("share", "1", "80 %", 1e-6, 1.0, scale_letters=False)

# IEC 60062 writes the scale letter in place of the decimal point; R stands for x1.
_SCALE = {
    "f": 1e-15,
    "p": 1e-12,
    "n": 1e-9,
    "u": 1e-6,
    "µ": 1e-6,
    "μ": 1e-6,
    "m": 1e-3,
    "R": 1.0,
    "k": 1e3,
    "K": 1e3,
    "M": 1e6,
    "G": 1e9,
}
_UNSIGNED = r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_NUMBER = rf"[+-]?{_UNSIGNED}"
_LETTERS = r"[A-Za-zµμ\u03a9\u2126°%]+(?:\^?[23]|[²³])?"
_UNIT = rf"{_LETTERS}(?:/{_LETTERS})?"
_VALUE = re.compile(rf"({_NUMBER})\s*({_UNIT})?")
_RKM = re.compile(r"([+-]?[0-9]*)([fpnuµμmRkKMG])([0-9]+)")
_DECIMAL_COMMA = re.compile(r"[+-]?[0-9]+,[0-9]+")
_SYMMETRIC = re.compile(rf"\s*(?:\+/-|\+-|±)\s*({_UNSIGNED})\s*({_UNIT})")
_LOWER_UPPER = re.compile(rf"\s*-\s*({_UNSIGNED})\s*({_UNIT})?\s*/\s*\+\s*({_UNSIGNED})\s*({_UNIT})")
_BAND = re.compile(rf"\s*({_NUMBER})\s*({_UNIT})?\s+to\s+({_NUMBER})\s*({_UNIT})\s*")
_PINT_NAMES = {"\u03a9": "ohm", "\u2126": "ohm", "°C": "degC", "%": "percent", "²": "2", "³": "3", "^": ""}
_LONGEST_TEXT = 100  # letters; what no number with a unit and a tolerance needs
_SI_NAMES = {
    "1": "",
    "m^2": "m**2",
    "K/W": "kelvin/watt",
    "V/K": "volt/kelvin",
    "1/K": "1/kelvin",
    "N/m": "newton/meter",
    "kg/s": "kilogram/second",
    "N/A": "newton/ampere",
}


@functools.cache
def _registry() -> Any:
    import pint  # 0.3 s: only where a number is read

    return pint.UnitRegistry(cache_folder=None)


@functools.cache
def _factor(unit: str, dimension: Dimension) -> tuple[float, float] | None:
    """Factor and offset to the dimension's SI unit; None where the unit measures something else.

    Raises
    ------
    QuantityError
        If the unit is not known at all.
    """
    import pint

    registry = _registry()
    name = unit
    for ours, theirs in _PINT_NAMES.items():
        name = name.replace(ours, theirs)
    name = re.sub(r"(?<=[A-Za-zµμ])([23])", r"**\1", name)
    if dimension is TEMPERATURE_RISE and name not in ("K", "mK"):
        return None
    try:
        parsed = registry.parse_units(name)
        target = registry.parse_units(_SI_NAMES.get(dimension.unit, dimension.unit) or "dimensionless")
        # Base units, not dimensions: a radian has no dimension, yet rad/s is no frequency and rad no share.
        if registry.get_base_units(parsed)[1] != registry.get_base_units(target)[1]:
            return None
        zero, one, two = (registry.Quantity(n, parsed).to(target).magnitude for n in (0.0, 1.0, 2.0))
        if not math.isclose(two - one, one - zero, rel_tol=1e-9):  # a logarithmic unit such as dBm
            return None
    except (pint.errors.PintError, AttributeError, TypeError) as err:
        raise QuantityError(
            f"unit {unit!r} is not known; write {dimension.named} such as {dimension.example!r}"
        ) from err
    # pint multiplies by way of base units; without the rounding 500 ns would read as 500.0000000000001 ns.
    return float(f"{one - zero:.14g}"), float(f"{zero:.14g}")


def _value_in(number: str, unit: str, dimension: Dimension, text: str, attached: bool) -> float:
    if attached and dimension.scale_letters and unit in _SCALE and unit != dimension.unit:
        return float(number) * _SCALE[unit]
    scale = _factor(unit, dimension)
    if scale is None:
        raise QuantityError(
            f"{text!r} is in {unit!r}, which does not measure {dimension.named}; write it such as {dimension.example!r}"
        )
    return float(number) * scale[0] + scale[1]


def parse(text: str, dimension: Dimension, origin: Origin = GIVEN) -> Quantity:
    """Read a number with its unit and tolerance.

    Parameters
    ----------
    text : str
        Such as "12 mH +/- 10 %", "4700 uF -20/+50 %", "5 to 45 degC", "4k7".
    dimension : Dimension
        What the number must measure.
    origin : Origin
        Where it comes from.

    Returns
    -------
    Quantity
        In the SI unit of the dimension.

    Raises
    ------
    QuantityError
        If there is no unit, the unit does not fit, or the value is outside the dimension's range.

    Examples
    --------
    >>> round(parse("4700 uF -20/+50 %", CAPACITANCE).max, 6)
    0.00705
    >>> parse("4k7", RESISTANCE).typ
    4700.0
    """
    if len(text) > _LONGEST_TEXT:
        raise QuantityError(
            f"{text[:20]!r}... is too long for a number with a unit; write it such as {dimension.example!r}"
        )
    band = _BAND.fullmatch(text)
    if band:
        low = _value_in(band[1], band[2] or band[4], dimension, text, attached=False)
        high = _value_in(band[3], band[4], dimension, text, attached=False)
        if low > high:
            raise QuantityError(f"{text!r} runs downwards; write the lower end first")
        return _checked(Quantity((low + high) / 2, low, high, dimension.unit, origin), dimension, text)

    body = text.strip()
    if _DECIMAL_COMMA.match(body):
        raise QuantityError(f"{text!r} has a comma in its number; write a point, such as {dimension.example!r}")
    rkm = _RKM.match(body)
    if rkm and dimension.scale_letters:
        typ = float(f"{rkm[1] or 0}.{rkm[3]}") * _SCALE[rkm[2]]
        rest = body[rkm.end() :]
        unit = ""
    else:
        value = _VALUE.match(body)
        if not value:
            raise QuantityError(f"{text!r} is not a number with a unit; write it such as {dimension.example!r}")
        if not value[2]:
            raise QuantityError(f"{text!r} has no unit; write {dimension.named} such as {dimension.example!r}")
        unit = value[2]
        attached = value[0] == value[1] + unit
        typ = _value_in(value[1], unit, dimension, text, attached)
        rest = body[value.end() :]
    low, high = _tolerance(rest, typ, unit, dimension, text)
    return _checked(Quantity(typ, low, high, dimension.unit, origin), dimension, text)


def _tolerance(rest: str, typ: float, unit: str, dimension: Dimension, text: str) -> tuple[float, float]:
    def span(number: str, of: str) -> float:
        if of == "%":
            return abs(typ) * float(number) / 100
        scale = _factor(of, dimension)
        if scale is None:
            raise QuantityError(f"the tolerance in {text!r} is in {of!r}; use % or the unit of the value")
        return float(number) * scale[0]

    if not rest.strip():
        return typ, typ
    if dimension is TEMPERATURE and "%" in rest:
        raise QuantityError(f"{text!r}: a temperature has no tolerance in %; write a band such as '5 to 45 degC'")
    if match := _SYMMETRIC.fullmatch(rest):
        half = span(match[1], match[2])
        return typ - half, typ + half
    if match := _LOWER_UPPER.fullmatch(rest):
        return typ - span(match[1], match[2] or match[4]), typ + span(match[3], match[4])
    raise QuantityError(
        f"{rest.strip()!r} in {text!r} is not a tolerance; write '+/- 10 %' or '-20/+50 %'"
        + (f" after the unit {unit!r}" if unit else "")
    )


def _checked(quantity: Quantity, dimension: Dimension, text: str) -> Quantity:
    dimension.check(quantity.typ, text)
    if quantity.min < 0 <= dimension.low:
        raise QuantityError(f"{text!r}: the tolerance reaches below zero")
    if quantity.min == 0 and not dimension.zero:
        raise QuantityError(f"{text!r} reaches down to zero; {dimension.named} must be positive here")
    for end in (quantity.min, quantity.max):
        if not (end == 0 or dimension.low <= end <= dimension.high):
            raise QuantityError(
                f"{text!r} reaches to {_written(end, dimension.unit)}; "
                f"{dimension.named} is expected between {dimension.bounds}"
            )
    return quantity


def read_quantity(value: Any, dimension: Dimension, origin: Origin = GIVEN) -> Quantity:
    """Read what a file holds for a field of this dimension; only strings (and finished quantities) will do.

    Raises
    ------
    QuantityError
        If it is a bare number, or no text at all.
    """
    if isinstance(value, Quantity):
        return value
    if isinstance(value, bool) or not isinstance(value, str | int | float):
        raise QuantityError(f"expected {dimension.named} in quotes, such as {dimension.example!r}")
    if not isinstance(value, str):
        raise QuantityError(f"{value} has no unit; write {dimension.named} in quotes, such as {dimension.example!r}")
    return parse(value, dimension, origin)


def assume(text: str, dimension: Dimension, why: str) -> Quantity:
    """Supply a number that the files did not give; it is listed as an assumption, with the reason."""
    return parse(text, dimension, Origin("assumed", why))


def computed(value: float, unit: str, how: str) -> Quantity:
    """A number that follows from other given numbers. [unit]"""
    return Quantity(value, value, value, unit, Origin("computed", how))


def _written(value: float, unit: str) -> str:
    """A value for people; a share in %."""
    if unit in _IN_PERCENT:
        return f"{value * 100:.6g} {_IN_PERCENT[unit]}"
    return in_units(value, unit)


_PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}
_LEAST_WRITTEN, _MOST_WRITTEN = 1e-18, 1e18  # in SI units; beyond it an exponent is easier to read than a row of zeros
_IN_PERCENT = {"1": "%", "1/K": "%/K"}
_UNPREFIXED = {"K/W", "1", "%", "m^2", "N/m", "N/A", "kg/s"}
_LARGEST = {"K": 0, "m": 0, "F": -6}  # nobody writes kilokelvin, or 4.7 mF on a capacitor


def in_units(value: float, unit: str, digits: int = 3) -> str:
    """Write an SI value for people, with an engineering prefix; with an exponent far beyond all prefixes.

    Parameters
    ----------
    value : float
        In SI units. [unit]
    unit : str
        The SI unit; "K" stays kelvin.
    digits : int
        Significant digits.

    Examples
    --------
    >>> in_units(0.01238, "s")
    '12.4 ms'
    >>> in_units(17.94, "V")
    '17.9 V'
    """
    if unit == "1":
        return f"{value:.{digits}g}"
    if unit == "kg":  # whose prefix is in its name already
        value, unit = value * 1e3, "g"
    if not math.isfinite(value):
        return f"{value} {unit}"
    if unit in _UNPREFIXED or value == 0:
        return f"{value:.{digits}g} {unit}"
    rounded = float(f"{value:.{digits - 1}e}")
    if not _LEAST_WRITTEN <= abs(rounded) < _MOST_WRITTEN:
        return f"{value:.{digits - 1}e} {unit}"
    exponent = 3 * math.floor(math.log10(abs(rounded)) / 3)
    exponent = max(min(_PREFIXES), min(max(_PREFIXES), exponent))
    exponent = min(exponent, _LARGEST.get(unit, exponent))
    scaled = rounded / 10**exponent
    decimals = max(0, digits - 1 - math.floor(math.log10(abs(scaled)))) if scaled else 0
    return f"{scaled:.{decimals}f} {_PREFIXES[exponent]}{unit}"


ZERO_CELSIUS = 273.15  # [K]


def celsius(kelvin: float, digits: int = 3) -> str:
    """A temperature for people.

    Examples
    --------
    >>> celsius(398.15)
    '125 degC'
    """
    return f"{kelvin - ZERO_CELSIUS:.{digits}g} degC"


def apart(value: float, limit: float, unit: str) -> tuple[str, str]:
    """Two numbers of one unit, with as many digits as it takes to see that they differ.

    Examples
    --------
    >>> apart(23.87, 23.9, "V")
    ('23.87 V', '23.90 V')
    """
    texts = ("", "")
    for digits in range(3, 7):
        texts = (in_units(value, unit, digits), in_units(limit, unit, digits))
        if texts[0] != texts[1] or value == limit:
            break
    return texts
