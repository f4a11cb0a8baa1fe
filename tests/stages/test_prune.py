"""Prune: what no entry asks for goes, what skykiln did not write stays."""

import pytest

from skykiln.cli import ALL_WELL, main
from tiny_pipeline import TinyPipeline, everything, published

PACK = {"container": "ktx2", "pixels": "rgba16f"}


@pytest.fixture
def pipeline(tmp_path):
    pipeline = TinyPipeline(tmp_path)
    pipeline.bake()
    return pipeline


def _prune(pipeline, capsys, *options):
    pipeline.snapshot()
    capsys.readouterr()
    assert main(["prune", "-f", str(pipeline.file), *options]) == ALL_WELL
    return capsys.readouterr().out.splitlines()


def _files(pipeline):
    names = everything(pipeline.build)
    return {name for name in names if not name.startswith(("work/.", "report/"))}


def test_nothing_goes_while_all_is_asked_for(pipeline, capsys):
    before = everything(pipeline.build)
    assert _prune(pipeline, capsys) == ["0 files, 0 bytes, removed"]
    assert {name: before[name] for name in before} == {
        name: data for name, data in everything(pipeline.build).items() if name in before
    }


def test_dropped_entry_leaves_what_a_clean_bake_would(pipeline, tmp_path_factory, capsys):
    pipeline.settings["sources"].pop("quay_night")
    told = _prune(pipeline, capsys)
    assert "removed: build/probes/quay_night/probe.json" in told
    clean = TinyPipeline(tmp_path_factory.mktemp("clean"), probes=["ferry_noon"])
    clean.bake()
    assert _files(pipeline) == _files(clean)
    assert published(pipeline.build) == published(clean.build)
    assert not (pipeline.build / "probes/quay_night").exists()
    assert not (pipeline.build / "work/quay_night").exists()
    assert pipeline.bake() == []


def test_dropped_level_and_pack_go_and_nothing_reruns(pipeline, capsys):
    pipeline.recipe["pack"] = [PACK, {**PACK, "name": "mirrored"}]
    pipeline.bake()
    pipeline.recipe["pack"] = [PACK]
    pipeline.recipe["specular"] |= {"levels": 2, "roughness": [0, 0.5]}
    pipeline.bake()
    told = _prune(pipeline, capsys)
    assert "removed: build/work/ferry_noon/level_2.npy" in told
    assert "removed: build/work/ferry_noon/packed/specular.mirrored.ktx2" in told
    assert pipeline.bake() == []


def test_dry_run_tells_the_same_and_changes_nothing(pipeline, capsys):
    pipeline.settings["sources"].pop("quay_night")
    before = everything(pipeline.build)
    told = _prune(pipeline, capsys, "--dry-run")
    after = everything(pipeline.build)
    assert {name: after[name] for name in before} == before
    assert [line.replace("would remove", "removed").replace("would be ", "") for line in told] == _prune(
        pipeline, capsys
    )


def test_what_skykiln_did_not_write_stays(pipeline, capsys):
    pipeline.settings["sources"].pop("quay_night")
    kept = {
        "probes/quay_night/notes.txt": b"mine",
        "probes/quay_night/irradiance.rgba16f.ktx2": b"painted over",
        "probes/of_another_tool/probe.json": b"{}",
        "work/quay_night/odd.stamp": b"not a stamp",
        "work/quay_night/odd.failure": b"not a failure",
    }
    for name, data in kept.items():
        path = pipeline.build / name
        path.parent.mkdir(exist_ok=True)
        path.write_bytes(data)
    told = _prune(pipeline, capsys)
    changed = "build/probes/quay_night/irradiance.rgba16f.ktx2"
    assert f"kept: {changed}: was changed by something else" in told
    assert {name: (pipeline.build / name).read_bytes() for name in kept} == kept
    assert not (pipeline.build / "probes/quay_night/specular.rgba16f.ktx2").exists()


def test_stamp_that_points_out_of_the_build_folder_removes_nothing_there(pipeline, capsys):
    victim = pipeline.folder / "diary.txt"
    victim.write_text("dear diary")
    stamp = pipeline.build / "work/quay_night/faces.npy.stamp"
    forged = stamp.read_text().replace('"faces.npy"', '"../../../diary.txt"')
    (pipeline.build / "work/quay_night/forged.stamp").write_text(forged)
    _prune(pipeline, capsys)
    assert victim.read_text() == "dear diary"


def test_link_in_the_place_of_an_output_stays(pipeline, capsys):
    pipeline.settings["sources"].pop("quay_night")
    output = pipeline.build / "work/quay_night/faces.npy"
    moved = pipeline.folder / "faces.npy"
    output.rename(moved)
    output.symlink_to(moved)
    _prune(pipeline, capsys)
    assert output.is_symlink()
    assert moved.exists()


def test_cause_of_a_failure_of_a_dropped_entry_goes(pipeline, capsys):
    (pipeline.folder / "quay_night.exr").write_text("not a picture")
    pipeline.bake()
    assert list(pipeline.build.rglob("*.failure"))
    pipeline.settings["sources"].pop("quay_night")
    _prune(pipeline, capsys)
    assert not list(pipeline.build.rglob("*.failure"))
    assert not (pipeline.build / "work/quay_night").exists()


def test_prune_before_any_bake_says_so(tmp_path, capsys):
    assert _prune(TinyPipeline(tmp_path), capsys) == ["nothing was baked here yet"]
    assert not (tmp_path / "build").exists()


def test_interrupted_prune_goes_on_where_it_stopped(pipeline, capsys):
    pipeline.settings["sources"].pop("quay_night")
    (pipeline.build / "probes/quay_night/probe.json").unlink()
    (pipeline.build / "work/quay_night/faces.npy").unlink()
    _prune(pipeline, capsys)
    assert not (pipeline.build / "work/quay_night").exists()
