"""A night over the whole corpus of malformed sources: each is told, none leaves anything behind."""

import sys
from pathlib import Path

from tiny_pipeline import TinyPipeline, published

sys.path.append(str(Path(__file__).parents[1] / "formats"))
from hostile_corpus import write_corpus


def test_malformed_sources_are_told_and_leave_nothing_while_the_sound_one_is_baked(tmp_path):
    pipeline = TinyPipeline(tmp_path, probes=["ferry_noon"])
    paths = write_corpus(tmp_path / "corpus")  # one is sparse, of a TB: its bytes are never digested
    files = {f"hostile_{number:03}": f"corpus/{path.name}" for number, path in enumerate(paths)}
    pipeline.settings["sources"] |= {name: {"file": file, "recipe": "tiny"} for name, file in files.items()}
    pipeline.bake()

    record, total = pipeline.night_record(), len(files) + 1
    assert record["exit_status"] == 1
    assert record["totals"] == {
        "probes": total, "rebuilt": 1, "unchanged": 0, "held": 0, "failed": len(files),
    }  # fmt: skip
    failures = {entry["name"]: entry["failure"] for entry in record["probes"] if entry["name"] in files}
    for name, file in files.items():
        assert failures[name]["file"] == file
        assert failures[name]["cause"].startswith(f"{file}: ")
    assert all(failure.traceback == "" for _, failure in pipeline.night.failures)

    folders = [pipeline.build / folder for folder in ("work", "probes")]
    left = [path for folder in folders for path in folder.rglob("*") if path.is_file()]
    assert [path for path in left if "hostile" in str(path) and path.suffix != ".failure"] == []
    probes = {name.split("/")[1] for name in published(pipeline.build) if name.startswith("probes/")}
    assert probes == {"ferry_noon"}
