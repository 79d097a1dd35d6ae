"""What all mappings of written files have in common."""

from pydantic import BaseModel, ConfigDict


class Written(BaseModel):
    """A mapping of a written file; its keys are the names of its fields, with spaces."""

    model_config = ConfigDict(frozen=True, extra="forbid", alias_generator=lambda name: name.replace("_", " "))
