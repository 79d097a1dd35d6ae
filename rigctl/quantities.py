"""Quantities as people write them: number, space, unit, from a table of our own.

It owns how a value is read and written; it never guesses. Every value inside the project is in its kind's
base unit, the first of its row in `rigctl.kinds`. A general units parser is not used: such
parsers read `5,0 mA` as 50 mA.
"""

import difflib
import math
import re
from collections.abc import Collection
from dataclasses import dataclass
from decimal import Decimal

from rigctl.errors import QuantityError
from rigctl.kinds import KINDS, Kind

LONGEST_TEXT = 200
"""Characters; a quantity is shorter, and a longer text is not searched for one."""


@dataclass(frozen=True, slots=True)
class Measured:
    """A value and its standard uncertainty, in the base unit; `u` is None where none was given."""

    value: float
    u: float | None = None


@dataclass(frozen=True, slots=True)
class _Written:
    """A number with its unit as it was written; for `1000:1` the number is 1000 and the unit `:1`."""

    number: float
    unit: str


_NUMBER = r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_QUANTITY = re.compile(rf"(?P<number>{_NUMBER})(?: +(?P<unit>\S+))?")
_PROPORTION = re.compile(rf"(?P<over>{_NUMBER}) ?: ?(?P<under>{_NUMBER})")
_NO_SPACE = re.compile(rf"(?P<number>{_NUMBER})(?P<unit>[^\s0-9.,:+-]\S*)")
_TOLERANCE = re.compile(r" *(?:\+-|\+/-|±) *")
_COVERAGE = re.compile(rf" *\( *k *= *(?P<k>{_NUMBER}) *\)$")
_SPAN = re.compile(r" +to +")


def parse_quantity(text: str, kind: str, *, wavelength_m: float | None = None) -> float:
    """Read a quantity and return it in its kind's base unit.

    Parameters
    ----------
    text
        Number, space, unit: `785.2 nm`. A ratio may also be `1000:1`, `30 dB` or a bare number.
    kind
        A key of `KINDS`.
    wavelength_m
        Wavelength of the light, m; needed for a retardance in units of length.

    Raises
    ------
    QuantityError
        With what was expected and, where there is one, the nearest text that would do.
    """
    return _value(_read(text, KINDS[kind]), KINDS[kind], wavelength_m)


def parse_measured(text: str, kind: str, *, wavelength_m: float | None = None) -> Measured:
    """Read `a unit`, `a unit +- b unit` or `a unit +- b %`; a trailing `(k=2)` halves the uncertainty.

    A percentage is relative to the value. Parameters and errors are those of `parse_quantity`.
    """
    _refuse_long(text)
    row = KINDS[kind]
    parts = _TOLERANCE.split(text.strip())
    if len(parts) == 1:
        return Measured(parse_quantity(text, kind, wavelength_m=wavelength_m))
    if len(parts) > 2 or not all(parts):
        raise _wrong(f"'{text}' is not a value and its uncertainty", row, f"{row.example} +- 20 %")
    factor, tolerance = _coverage(parts[1])
    written = _read(parts[0], row)
    value = _value(written, row, wavelength_m)
    u = _tolerance(tolerance, row, wavelength_m, value=value, unit=written.unit) / factor
    if not u > 0 or not math.isfinite(u):
        raise _wrong(f"the uncertainty in '{text}' is not positive", row, "one above zero, or none if exact")
    return Measured(value, u)


def parse_uncertainty(text: str, kind: str, *, nominal: str, wavelength_m: float | None = None) -> float:
    """Read a standard uncertainty that stands by itself; a percentage is relative to `nominal`, as it was written."""
    _refuse_long(text)
    _refuse_long(nominal)
    value = _TOLERANCE.split(nominal.strip())[0]
    u = parse_measured(f"{value} +- {text.strip()}", kind, wavelength_m=wavelength_m).u
    assert u is not None
    return u


def parse_span(text: str, kind: str, *, wavelength_m: float | None = None) -> tuple[float, float]:
    """Read `a unit to b unit` or `a to b unit` and return both ends, the lower first.

    Ratios may stand in either order, as 1000:1 is more than 100:1 to most and less to some.
    """
    _refuse_long(text)
    row = KINDS[kind]
    parts = _SPAN.split(text.strip())
    if len(parts) != 2:
        raise _wrong(f"'{text}' is not a span", row, f"two ends, for example 0 to {row.example}")
    if row.needs_unit and re.fullmatch(_NUMBER, parts[0]):
        parts[0] = f"{parts[0]} {_read(parts[1], row).unit}"
    low, high = (parse_quantity(part, kind, wavelength_m=wavelength_m) for part in parts)
    if kind == "ratio":
        low, high = sorted((low, high))
    if not low < high:
        raise _wrong(f"the span '{text}' does not go up", row, "the lower end first")
    return low, high


def format_quantity(value: float, kind: str, *, digits: int = 6) -> str:
    """Write a value in the unit of its kind that suits its size, with so many significant digits.

    What it writes, `parse_quantity` reads back; a ratio below a tenth is written as `1000:1`.
    """
    row = KINDS[kind]
    if kind == "ratio" and 0 < value < 0.1:
        return f"{_plain(1 / value, digits)}:1"
    if not row.shown:
        return _plain(value, digits)
    fitting = [unit for unit in row.shown if abs(value) >= row.units[unit] * (1 - 1e-9)]
    unit = fitting[-1] if fitting else row.shown[-1 if value == 0 else 0]
    return f"{_plain(value / row.units[unit], digits)} {unit}"


def _plain(number: float, digits: int) -> str:
    """Write a number without an exponent while it stays readable."""
    text = f"{number:.{digits}g}"
    return f"{float(text):.0f}" if "e" in text and 1 <= abs(number) < 1e15 else text


def _read(text: str, row: Kind) -> _Written:
    """Take a text apart into number and unit; refuse what is neither."""
    _refuse_long(text)
    text = text.strip()
    if row.name == "ratio" and (match := _PROPORTION.fullmatch(text)):
        return _proportion(text, float(match["over"]), float(match["under"]))
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise _not_a_quantity(text, row)
    number, unit = float(match["number"]), match["unit"] or ""
    if not math.isfinite(number):
        raise _wrong(f"the number in '{text}' is too large", row)
    if not unit and row.needs_unit:
        raise _wrong(f"'{text}' has no unit", row, _choice_of_units(row), nearest=f"{text} {_usual(row)}")
    if unit and unit not in row.unit_names:
        raise _unknown_unit(text, unit, row)
    return _Written(number, unit)


def _proportion(text: str, over: float, under: float) -> _Written:
    """Read `1000:1`, or `1:1000`, which means the same."""
    smaller, larger = sorted((over, under))
    if not smaller > 0 or not math.isfinite(larger / smaller):
        raise _wrong(f"both numbers of '{text}' must be above zero", KINDS["ratio"])
    return _Written(larger / smaller, ":1")


def _value(written: _Written, row: Kind, wavelength_m: float | None) -> float:
    """Turn a written number into the base unit and check it against what its kind allows."""
    value = _times(written.number, _size(written, row, wavelength_m), above=row.offsets.get(written.unit, 0.0))
    if row.name == "ratio":
        return _ratio(written, value)
    if not math.isfinite(value):
        raise _wrong(f"{written.number:g} {written.unit} is too large", row)
    if (row.sign == "positive" and not value > 0) or (row.sign == "not negative" and value < 0):
        what = "is not above zero" if row.sign == "positive" else "is negative"
        raise _wrong(f"{row.noun} of {written.number:g} {written.unit} {what}", row)
    if value < row.least:
        raise _wrong(f"{row.noun} of {written.number:g} {written.unit} is below all there is", row)
    if row.name == "count" and not (value >= 1 and value.is_integer()):
        raise _wrong(f"{written.number:g} is not a whole number above zero", row)
    return value


def _times(number: float, size: float, *, above: float = 0.0) -> float:
    """Multiply in decimal, so that 20 uW is the float 2e-5 and nothing beside it; `above` is added."""
    return float(Decimal(repr(number)) * Decimal(repr(size)) + Decimal(repr(above)))


def _size(written: _Written, row: Kind, wavelength_m: float | None) -> float:
    """Size of the unit in the base unit."""
    if written.unit in row.units:
        return row.units[written.unit]
    if written.unit in row.per_wavelength:
        if wavelength_m is None:
            others = _choice_of_units(row, without=row.per_wavelength)
            raise _wrong(f"{row.noun} in {written.unit} needs the wavelength of the light", row, others)
        return row.per_wavelength[written.unit] / wavelength_m
    return 1.0


def _ratio(written: _Written, value: float) -> float:
    """Return a ratio between 0 and 1: `1000:1`, `30 dB` and 0.001 are the same."""
    number = written.number
    if written.unit == ":1":
        value = 1.0 / number
    elif written.unit == "dB":
        value = 10.0 ** (-number / 10.0)
    if not 0.0 <= value <= 1.0:
        example = f"{number:g}:1" if not written.unit and number > 1 else ""
        shown = f"{number:g} {written.unit}".strip()
        raise _wrong(f"a ratio of {shown} is not between 0 and 1", KINDS["ratio"], nearest=example)
    return value


def _coverage(text: str) -> tuple[float, str]:
    """Return the coverage factor (1 where none is written) and the text without it."""
    match = _COVERAGE.search(text)
    if match is None:
        return 1.0, text
    factor = float(match["k"])
    if not (factor > 0 and math.isfinite(factor)):
        raise QuantityError(f"the coverage factor in '{text}' must be above zero", expected="(k=2)")
    return factor, text[: match.start()]


def _tolerance(text: str, row: Kind, wavelength_m: float | None, *, value: float, unit: str) -> float:
    """Return the uncertainty written behind `+-` in the base unit; `unit` is that of the value before it."""
    match = _QUANTITY.fullmatch(text.strip())
    if match is not None and match["unit"] == "%":
        if unit == "%" or row.offsets:
            why = "behind a value in % may mean two things" if unit == "%" else f"of {row.noun} has no meaning"
            raise _wrong(f"'+- {text}' {why}", row, "an uncertainty without %")
        return abs(value) * float(match["number"]) / 100.0
    written = _read(text, row)
    if written.unit == ":1":
        raise _wrong(f"'+- {text}' is no uncertainty of a ratio", row, "a percentage, for example +- 20 %")
    if written.unit == "dB":
        return value * math.log(10.0) / 10.0 * written.number
    return _times(written.number, _size(written, row, wavelength_m))


def _wrong(what: str, row: Kind, expected: str = "", *, nearest: str = "") -> QuantityError:
    """Make the error of a kind; without `expected` it shows an example."""
    return QuantityError(what, expected=expected or row.phrase, nearest=nearest)


def _not_a_quantity(text: str, row: Kind) -> QuantityError:
    """Say why a text has not the shape of a quantity."""
    if not text:
        return _wrong("nothing is written here", row)
    if re.search(r"[0-9],[0-9]", text):
        pointed = text.replace(",", ".") if re.fullmatch(r"[^,]*,(?![0-9]{3}\b)[^,]*", text) else ""
        return _wrong(f"'{text}' has a comma", row, "a decimal point and no other separator", nearest=pointed)
    if re.fullmatch(r"[+-]?\.?(nan|inf|infinity)\b.*", text, re.IGNORECASE):
        return _wrong(f"'{text}' is not a finite number", row)
    if (match := _NO_SPACE.fullmatch(text)) is not None and match["unit"] in row.unit_names:
        spaced = f"{match['number']} {match['unit']}"
        return _wrong(f"'{text}' has no space before its unit", row, nearest=spaced)
    return _wrong(f"'{text}' is not a quantity", row)


def _unknown_unit(text: str, unit: str, row: Kind) -> QuantityError:
    """Refuse a unit that the kind does not have."""
    folded = {name.casefold(): name for name in reversed(row.unit_names)}
    near = difflib.get_close_matches(unit.casefold(), folded, n=1)
    nearest = text.removesuffix(unit) + folded[near[0]] if near else ""
    return _wrong(f"'{unit}' is not a unit of {row.noun}", row, _choice_of_units(row), nearest=nearest)


def _usual(row: Kind) -> str:
    """The unit of the example."""
    return row.example.split()[-1]


def _choice_of_units(row: Kind, *, without: Collection[str] = ()) -> str:
    """Name the units that may be written, each spelling of micro once."""
    names = [unit for unit in row.unit_names if unit not in without and unit.isascii()]
    return f"one of the units {', '.join(names)}" if names else "a number without a unit"


def _refuse_long(text: str) -> None:
    """Refuse a text that is too long to be a quantity before any pattern is tried on it."""
    if len(text) > LONGEST_TEXT:
        raise QuantityError(f"{len(text)} characters are no quantity", expected="a number, a space and a unit")
