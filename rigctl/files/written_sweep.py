"""Sweeps and preparations as they are written: what is set, to which values, and how it gets there.

It owns the shape of each. How a value reads depends on the kind of its role, so the roles' kinds stand in the
context of the validation.
"""

from dataclasses import dataclass
from typing import Annotated, Any, cast, get_args

from pydantic import (
    ConfigDict,
    Field,
    GetJsonSchemaHandler,
    ValidationInfo,
    ValidatorFunctionWrapHandler,
    WrapValidator,
    model_validator,
)
from pydantic_core import CoreSchema

from rigctl.errors import QuantityError
from rigctl.files.ladders import MOST_VALUES, QUANTITY, STEP_QUANTITY, joined, there_and_back, values_of
from rigctl.files.leaves import Leaf, Shown, SwitchText, choice, exactly_one, quantity, wrong
from rigctl.files.mistakes import quoted
from rigctl.files.patterns import COUNT, Schema, one_of, quantity_schema, span_schema
from rigctl.files.recipe import Approach, AxisKind
from rigctl.files.written import Written
from rigctl.quantities import parse_quantity, parse_span

KINDS = "axis_kinds"
"""Key of the validation context: the kind of axis of each role, as far as it can be read."""
KIND = "axis_kind"
"""Key of the validation context: the kind of axis that is being read."""
REPEAT = "repeat"
"""An axis that sets nothing and takes its visits anew."""
ANY: tuple[AxisKind, ...] = ("angle", "temperature", "current")
"""Kinds that are tried where the role is not known: the unit tells."""
STOPS, GAPS = [QUANTITY[kind] for kind in ANY], [STEP_QUANTITY[kind] for kind in ANY]
KEYS: dict[str, tuple[AxisKind, str]] = {
    "turn": ("angle", "a mount"),
    "start": ("angle", "a mount"),
    "approach": ("angle", "a mount"),
    "steady": ("temperature", "a temperature controller"),
    "ramp": ("current", "a current source"),
}
"""Keys that only one kind of role has."""


def _kind(info: ValidationInfo) -> AxisKind | None:
    context: dict[str, Any] = info.context or {}
    return cast("AxisKind | None", context.get(KIND))


def _read_stop(text: str, info: ValidationInfo) -> float:
    """Read a value by the kind of its role, or by its unit where the role is not known."""
    kind = _kind(info)
    value = _by_unit(text) if kind is None else parse_quantity(text, QUANTITY[kind])
    if kind == "current" and value < 0:
        raise wrong(f"a current of {text} would go through the diode backwards", expected="a current from zero on")
    return value


def _by_unit(text: str) -> float:
    found = QuantityError("", expected="")
    for kind in reversed(ANY):
        try:
            return parse_quantity(text, QUANTITY[kind])
        except QuantityError as error:
            found = error
    raise found


def _read_step(text: str, info: ValidationInfo) -> float:
    kind = _kind(info)
    return _by_unit(text) if kind is None else parse_quantity(text, STEP_QUANTITY[kind])


def _read_reach(text: str, info: ValidationInfo) -> tuple[float, float]:
    kind = _kind(info) or "angle"
    low, high = parse_span(text, QUANTITY[kind])
    if kind == "current" and low < 0:
        raise wrong(f"a current from {text} would go through the diode backwards", expected="a current from zero on")
    return low, high


Stop = Annotated[float, Leaf(_read_stop, "a value such as 5 deg", quantity_schema(*STOPS)), Shown("5 deg")]
Gap = Annotated[float, Leaf(_read_step, "a step such as 5 deg", quantity_schema(*GAPS)), Shown("5 deg")]
Reach = Annotated[
    tuple[float, float], Leaf(_read_reach, "a span such as 0 to 90 deg", span_schema(*STOPS)), Shown("0 deg to 90 deg")
]
Angle = Annotated[float, quantity("angle"), Shown("0 deg")]
Number = Annotated[float, quantity("number", is_positive=True), Shown("1")]
Duration = Annotated[float, quantity("time"), Shown("150 ms")]
Time = Annotated[float, quantity("time", is_positive=True), Shown("15 min")]
Within = Annotated[float, quantity("temperature difference", is_positive=True), Shown("0.05 K")]
Slope = Annotated[float, quantity("temperature slope"), Shown("0.01 K/min")]
Ramp = Annotated[float, quantity("current slope"), Shown("5 mA/s")]
ApproachText = Annotated[Approach, choice(*get_args(Approach)), Shown("from below")]
Stops = Annotated[list[Stop], Field(min_length=1)]


class WrittenSteady(Written):
    """When a temperature counts as reached."""

    within: Within = Field(description="how near the setpoint the temperature stays")
    slope: Slope | None = Field(None, description="how little it may rise or fall")
    for_: Annotated[Time, Field(description="for how long", alias="for")]
    give_up_after: Time = Field(description="when to give up")

    @model_validator(mode="after")
    def _can_be_reached(self) -> "WrittenSteady":
        if self.give_up_after < self.for_:
            what = "gives up before the temperature can have been steady for so long"
            raise wrong(what, expected="a time longer than 'for'", key="give up after")
        return self


class WrittenSegment(Written):
    """One piece of an axis."""

    model_config = ConfigDict(json_schema_extra=one_of("values", "range"))

    values: Stops | None = Field(None, description="values one by one")
    range: Reach | None = Field(None, description="both ends, which are visited")
    step: Gap | None = Field(None, description="step within the range")
    there_and_back: SwitchText = Field(False, description="whether the same way back follows")

    @model_validator(mode="after")
    def _has_values(self, info: ValidationInfo) -> "WrittenSegment":
        self.stops(_kind(info) or "angle")
        return self

    def stops(self, kind: AxisKind) -> tuple[float, ...]:
        """Return the values in the order of the visits."""
        stops = values_of(kind, values=self.values, span=self.range, step=self.step)
        return there_and_back(stops) if self.there_and_back else stops


class WrittenAxis(Written):
    """The values of one role in a sweep, and how it gets to each."""

    model_config = ConfigDict(json_schema_extra=one_of("turn", "values", "range", "segments"))

    turn: Number | None = Field(None, description="whole turns; the end is left out")
    values: Stops | None = Field(None, description="values one by one")
    range: Reach | None = Field(None, description="both ends, which are visited")
    step: Gap | None = Field(None, description="step within the turn or range")
    start: Angle | None = Field(None, description="first angle of a turn")
    segments: Annotated[list[WrittenSegment], Field(min_length=1)] | None = Field(
        None, description="ranges one after another, each with its own step"
    )
    there_and_back: SwitchText = Field(False, description="whether the same way back follows")
    approach: ApproachText = Field("either", description="from which side a mount comes to each angle")
    settle: Duration = Field(0.0, description="how long to wait after each move")
    steady: WrittenSteady | None = Field(None, description="when a temperature counts as reached")
    ramp: Ramp | None = Field(None, description="how fast a current changes")

    @model_validator(mode="after")
    def _has_values(self, info: ValidationInfo) -> "WrittenAxis":
        _check_keys(self, _kind(info))
        self.stops(_kind(info) or "angle")
        return self

    def stops(self, kind: AxisKind) -> tuple[float, ...]:
        """Return the values in the order of the visits."""
        if self.segments is None:
            stops = values_of(
                kind, turn=self.turn, values=self.values, span=self.range, step=self.step, start=self.start
            )
        else:
            given = sorted({"turn", "values", "range"} & self.model_fields_set)
            exactly_one(("turn", "values", "range", "segments"), [*given, "segments"])
            stops = joined(segment.stops(kind) for segment in self.segments)
        return there_and_back(stops) if self.there_and_back else stops


class WrittenPreparation(Written):
    """What a role is set to before the steps."""

    to: Stop = Field(description="temperature or current to set")
    steady: WrittenSteady | None = Field(None, description="when a temperature counts as reached")
    ramp: Ramp | None = Field(None, description="how fast a current changes")
    warm_up: Annotated[Duration, Field(description="how long to wait once it is there", alias="warm-up")] = 0.0

    @model_validator(mode="after")
    def _has_its_keys(self, info: ValidationInfo) -> "WrittenPreparation":
        _check_keys(self, _kind(info))
        return self


def _check_keys(written: Written, kind: AxisKind | None) -> None:
    """Refuse keys that the kind of role does not have."""
    for key in KEYS:
        if kind is not None and key in written.model_fields_set and KEYS[key][0] != kind:
            raise wrong(f"{quoted(key)} goes with {KEYS[key][1]} alone", key=key)


def _typed(value: object, handler: ValidatorFunctionWrapHandler, info: ValidationInfo) -> Any:
    """Read an entry by the kind of its role."""
    role = next(iter(value), "") if isinstance(value, dict) else ""
    context: dict[str, Any] = info.context or {}
    context[KIND] = "repeat" if role == REPEAT else context.get(KINDS, {}).get(role)
    if isinstance(value, dict) and role == REPEAT:
        value = {**value, REPEAT: _repeats(value[REPEAT])}
    return handler(value)


def _repeats(value: object) -> dict[str, object]:
    """Read how often visits are taken, and write it as the axis that it means: numbers from 1."""
    if not isinstance(value, str):
        raise wrong("keys or a list stand here", expected="a whole number such as 3", key=REPEAT)
    try:
        count = round(parse_quantity(value, "count"))
    except QuantityError as error:
        raise wrong(error.what, expected="a whole number such as 3", key=REPEAT) from error
    if count > MOST_VALUES:
        raise wrong(f"{value} repeats are too many", expected=f"at most {MOST_VALUES}", key=REPEAT)
    return {"values": ["1"]} if count == 1 else {"range": f"1 to {count}", "step": "1"}


@dataclass(frozen=True, slots=True, eq=False)
class _OneKey:
    """An entry with one key: in the JSON Schema, where some keys may differ from the others."""

    others: Schema

    def __get_pydantic_json_schema__(self, core: CoreSchema, handler: GetJsonSchemaHandler) -> Schema:
        """Say that one key stands here."""
        return {**handler(core), "minProperties": 1, "maxProperties": 1, "properties": self.others}


Entry = Annotated[dict[str, WrittenAxis], WrapValidator(_typed), _OneKey({REPEAT: COUNT})]
Sweep = Annotated[list[Entry], Field(min_length=1)]
Preparations = Annotated[
    list[Annotated[dict[str, WrittenPreparation], WrapValidator(_typed), _OneKey({})]],
    Field(min_length=1),
]
