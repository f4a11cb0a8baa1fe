"""What all sections of pipeline.yaml share."""

import math
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, StringConstraints
from pydantic_core import PydanticCustomError


class Section(BaseModel):
    model_config = ConfigDict(
        extra="forbid", frozen=True, strict=True, allow_inf_nan=False, use_attribute_docstrings=False
    )


def own_sentence(text):
    """An error whose sentence is told as it is."""
    return PydanticCustomError("own", "{text}", {"text": text})


def _finite(value):
    """The value, unless a number anywhere in it has no JSON form."""
    if isinstance(value, float) and not math.isfinite(value):
        raise own_sentence("holds a number that is not finite; JSON has no such value")
    children = value.values() if isinstance(value, dict) else value if isinstance(value, list) else ()
    for child in children:
        _finite(child)
    return value


Extra = Annotated[dict[str, Any], BeforeValidator(_finite)]
Path = Annotated[str, StringConstraints(min_length=1)]
