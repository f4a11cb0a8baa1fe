"""pipeline.yaml -> typed, validated probes. Knows YAML and pydantic; no Luigi, no numerics, no formats."""

from .model import pipeline_schema
from .pipeline import Pipeline, load_pipeline
from .probes import Pack, Patch, Probe, canonical_json

__all__ = ["Pack", "Patch", "Pipeline", "Probe", "canonical_json", "load_pipeline", "pipeline_schema"]
