"""JSON Schemas of the files that people write, for editors that complete and check while they type.

It owns how the models of the files become schemas, and what the installed drivers add to a rig file. A schema lets
pass every file that is right; what parts mean for each other is left to `polrig check`.
"""

from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel
from pydantic.json_schema import GenerateJsonSchema, JsonSchemaValue
from pydantic_core.core_schema import NullableSchema, WithDefaultSchema

from rigctl.files.options import LIST, SPAN
from rigctl.files.options import WHOLE as WHOLE_NUMBER
from rigctl.files.patterns import (
    LABEL_PATTERN,
    WHOLE,
    WORD,
    Schema,
    choice_schema,
    one_of,
    quantity_schema,
    span_schema,
)
from rigctl.files.rig_references import LIMITS
from rigctl.files.written_recipe import WrittenRecipe
from rigctl.files.written_rig import WrittenRig
from rigctl.interfaces import BenchFactory, Driver, Option
from rigctl.thermistor import EXAMPLE

DIALECT = "https://json-schema.org/draft/2020-12/schema"
LABELS: Schema = {"pattern": LABEL_PATTERN}


class _Generator(GenerateJsonSchema):
    """Leaves out what only Python needs: titles of fields, and None and numbers as defaults."""

    def field_title_should_be_set(self, schema: Any) -> bool:  # noqa: ARG002  # named by the library
        """No title: the key itself tells as much."""
        return False

    def nullable_schema(self, schema: NullableSchema) -> JsonSchemaValue:
        """A key that may be left out must not be empty."""
        return self.generate_inner(schema["schema"])

    def default_schema(self, schema: WithDefaultSchema) -> JsonSchemaValue:
        """Defaults are in base units, and nobody writes them so."""
        return self.generate_inner(schema["schema"])


def recipe_schema() -> Schema:
    """Return the JSON Schema of a recipe, draft 2020-12."""
    schema = _schema(WrittenRecipe, "polrig recipe")
    schema |= one_of("sweep", "steps")
    schema["properties"]["roles"]["propertyNames"] = LABELS
    return schema


def rig_schema(drivers: Mapping[str, Driver], bench: BenchFactory | None) -> Schema:
    """Return the JSON Schema of a rig file for the drivers and the simulated bench that are installed."""
    schema = _schema(WrittenRig, "polrig rig")
    definitions = schema["$defs"]
    shared = definitions.pop("WrittenInstrument")
    limits = definitions.pop("WrittenLimits")["properties"]
    definitions |= {f"driver {name}": _instrument(driver, shared, limits) for name, driver in drivers.items()}
    schema["properties"]["instruments"]["additionalProperties"] = _any_instrument(shared, drivers)
    schema["properties"]["roles"]["propertyNames"] = LABELS
    definitions["WrittenSimulated"] |= _simulated(definitions["WrittenSimulated"], drivers, bench)
    return schema


def _schema(model: type[BaseModel], title: str) -> Schema:
    schema = model.model_json_schema(schema_generator=_Generator)
    for definition in schema["$defs"].values():
        definition.pop("title", None)
    return {"$schema": DIALECT, **schema, "title": title}


def _any_instrument(shared: Schema, drivers: Mapping[str, Driver]) -> Schema:
    """An instrument whose keys are those of its driver."""
    described = {**shared["properties"]["driver"], "type": "string", "enum": sorted(drivers)}
    cases = [
        {
            "if": {"properties": {"driver": {"const": name}}, "required": ["driver"]},
            "then": {"$ref": f"#/$defs/driver {name}"},
        }
        for name in drivers
    ]
    schema = {"type": "object", "properties": {"driver": described}, "required": shared["required"]}
    return {**schema, "allOf": cases} if cases else schema


def _instrument(driver: Driver, shared: Schema, limits: Schema) -> Schema:
    """The keys of an instrument of one driver."""
    properties = {key: value for key, value in shared["properties"].items() if key != "limits"}
    if known := LIMITS.get(driver.kind):
        properties["limits"] = _mapping({key: limits[key] for key in known}) | {"minProperties": 1}
    properties |= {key: _option(option) for key, option in driver.options.items()}
    return _mapping(properties) | {"description": driver.meaning}


def _simulated(written: Schema, drivers: Mapping[str, Driver], bench: BenchFactory | None) -> Schema:
    """The keys of the simulated bench and of each twin; anything goes without a bench."""
    if bench is None:
        return {}
    world = {key: _option(option) for key, option in bench.bench_options().items()}
    tables = [bench.twin_options(name) for name in drivers]
    twins = [_mapping({key: _option(option) for key, option in table.items()}) for table in tables]
    others = {"anyOf": twins} if twins else False
    return {"properties": {**written["properties"], **world}, "additionalProperties": others}


def _mapping(properties: Schema) -> Schema:
    return {"type": "object", "properties": properties, "additionalProperties": False}


def _option(option: Option) -> Schema:
    """What may be written for an option of a driver or twin."""
    schema = _value(option)
    return {**schema, "description": option.meaning} if option.meaning else schema


def _value(option: Option) -> Schema:
    if option.kind == "text":
        return WORD
    if option.kind == "thermistor":
        return {"type": "string", "examples": EXAMPLE.split(" or ")}
    if option.kind == "choice":
        return choice_schema(option.choices)
    if option.kind == WHOLE_NUMBER:
        return WHOLE
    if option.kind.startswith(SPAN):
        return span_schema(option.kind.removeprefix(SPAN))
    if option.kind.startswith(LIST):
        entry = quantity_schema(option.kind.removeprefix(LIST))
        return {"anyOf": [entry, {"type": "array", "items": entry, "minItems": 1}]}
    return quantity_schema(option.kind)
