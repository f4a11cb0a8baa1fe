"""The JSON Schemas (draft 2020-12) of what people write for skykiln and of what it leaves."""

import json
from importlib import resources

NAMES = ("pipeline", "probe", "brdf", "night")


def shipped_schema(name: str) -> dict:
    """The schema of pipeline.yaml, probe.json, brdf.json or night.json, as it was installed."""
    return json.loads(resources.files(__name__).joinpath(f"{name}.schema.json").read_text("utf-8"))
