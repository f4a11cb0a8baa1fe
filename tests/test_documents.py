"""README.md and DEVELOPERS.md: what they show is run here."""

import json
import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

from skykiln.config import load_pipeline, pipeline_schema
from skykiln.engine.staleness import staleness
from tiny_pipeline import TinyPipeline, write_sky

ROOT = Path(__file__).parents[1]


def blocks(document, language):
    """The fenced blocks of a document in one language."""
    return re.findall(rf"^```{language}\n(.*?)^```", (ROOT / document).read_text(), re.MULTILINE | re.DOTALL)


def test_readme_s_own_luigi_task_runs(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    pipeline.snapshot()
    (example,) = blocks("README.md", "python")
    (tmp_path / "level_lighting.py").write_text(example)
    folders = [str(tmp_path), *map(os.path.abspath, sys.path)]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(folders)}
    arguments = ["--local-scheduler", "--module", "level_lighting", "LevelLighting"]
    command = [sys.executable, "-m", "luigi", *arguments]
    subprocess.run(command, cwd=tmp_path, env=environment, check=True)
    assert json.loads((tmp_path / "level_lighting.json").read_text()) == ["specular.rgba16f.ktx2"]


def test_readme_s_least_pipeline_is_valid(tmp_path):
    (least,) = blocks("README.md", "yaml")
    (tmp_path / "pipeline.yaml").write_text(least)
    (tmp_path / "captures" / "rooms").mkdir(parents=True)
    write_sky(tmp_path / "captures" / "rooms" / "lobby.exr")
    names = [probe.name for probe in load_pipeline(tmp_path / "pipeline.yaml").probes()]
    assert names == ["roof_noon", "rooms/lobby"]


def test_pipeline_file_shows_every_key_and_what_it_shows_is_valid(tmp_path):
    text = (ROOT / "pipeline.yaml").read_text()
    assert [key for key in keys_of(pipeline_schema()) if f"{key}:" not in text] == []
    (tmp_path / "sample_assets").symlink_to(ROOT / "sample_assets")
    (tmp_path / "pipeline.yaml").write_text(re.sub(r"^  # (?= *\w+:)", "  ", text, flags=re.MULTILINE))
    names = [probe.name for probe in load_pipeline(tmp_path / "pipeline.yaml").probes()]
    assert {"roof_noon", "grey_card"} < set(names)


def keys_of(schema):
    """The names of all properties, at any depth."""
    if isinstance(schema, dict):
        yield from schema["properties"] if isinstance(schema.get("properties"), dict) else ()
    for value in schema.values() if isinstance(schema, dict) else schema if isinstance(schema, list) else ():
        yield from keys_of(value)


def test_developers_example_of_a_stage_runs_and_reruns_only_when_it_must(tmp_path):
    (example,) = blocks("DEVELOPERS.md", "python")
    scope = {"__name__": "measure_peak"}
    exec(example, scope)
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    (probe, *_) = pipeline.snapshot().probes
    stage = scope["MeasurePeak"](pinned=probe.pinned)
    assert staleness(stage, {}).reasons == ("was never baked",)
    stage.run()
    assert stage.complete()
    (peak,) = stage.files().values()
    assert len(json.loads(Path(peak).read_bytes())["peak"]) == 3
    pipeline.settings["sources"]["ferry_noon"]["exposure_ev"] = 1
    pipeline.bake()
    (probe, *_) = pipeline.snapshot().probes
    assert staleness(scope["MeasurePeak"](pinned=probe.pinned), {}).reasons == ("faces changed",)


@pytest.mark.parametrize("document", ["README.md", "DEVELOPERS.md"])
def test_paths_that_documents_name_exist(document):
    text = (ROOT / document).read_text()
    linked = re.findall(r"\]\((?!https?:)([^)]+)\)", text)
    rooms = "light|formats|stages|config|engine|report"
    named = re.findall(rf"`((?:{rooms})/\w+\.py|(?:tests|docs)/[\w/]+\.\w+)`", text)
    assert linked or named
    for name in [*linked, *named]:
        inside = ROOT / "tasks" / "skykiln" / name
        assert (ROOT / name).exists() or inside.exists(), name


def test_both_set_up_commands_stand_at_the_top_of_the_readme():
    commands = blocks("README.md", "sh")[:2]
    assert "skykiln bake" in commands[0]
    assert "bin/pytest" in commands[1]
    assert len(commands[0].strip().splitlines()) == len(commands[1].strip().splitlines()) == 1
