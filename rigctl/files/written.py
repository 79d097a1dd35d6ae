"""What all mappings of written files have in common."""

from typing import Annotated

from pydantic import BaseModel, BeforeValidator, ConfigDict

from rigctl.files.leaves import WordText


class Written(BaseModel):
    """A mapping of a written file; its keys are the names of its fields, with spaces."""

    model_config = ConfigDict(frozen=True, extra="forbid", alias_generator=lambda name: name.replace("_", " "))


def _words(value: object) -> object:
    """A list of one word may be written as the word."""
    return [value] if isinstance(value, str) else value


Words = Annotated[list[WordText], BeforeValidator(_words, json_schema_input_type=WordText | list[WordText])]
