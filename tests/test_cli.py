"""The skykiln command: what it prints, its exit status, and what it leaves unloaded."""

import json
import os
import re
import subprocess
import sys
import time

import jsonschema
import numba
import pytest

from skykiln.cli import ALL_WELL, SOURCE_FAILED, WRONG, main
from skykiln.engine.release import release
from skykiln.errors import GATE_BROKEN
from tiny_pipeline import TinyPipeline, touch, write_sky


@pytest.fixture
def pipeline(tmp_path, monkeypatch):
    pipeline = TinyPipeline(tmp_path)
    pipeline.snapshot()
    monkeypatch.chdir(tmp_path)
    # The command sets it for its process; here the process is pytest's, and its threads may have begun.
    monkeypatch.setenv("NUMBA_NUM_THREADS", str(numba.config.NUMBA_NUM_THREADS))
    return pipeline


def _run(capsys, *arguments):
    status = main(list(arguments))
    printed = capsys.readouterr()
    return status, printed.out, printed.err


def test_bake_takes_the_pipeline_of_the_working_folder_and_prints_a_line_per_probe(pipeline, capsys):
    status, out, _ = _run(capsys, "bake")
    assert status == ALL_WELL
    *lines, total = out.splitlines()
    told = {line.split(":")[0] for line in lines}
    assert told == {"BRDF table of all probes", "ferry_noon", "quay_night"}
    assert re.fullmatch(r"2 rebuilt, 0 unchanged, 0 failed; 21 stages ran in [0-9.]+ s", total)


def test_bake_of_bad_source_ends_with_1_and_names_file_and_cause(pipeline, capsys):
    (pipeline.folder / "quay_night.exr").write_text("not a picture")
    status, _, err = _run(capsys, "bake")
    assert status == SOURCE_FAILED
    assert err.startswith("quay_night: quay_night.exr: ")


def test_wrong_pipeline_ends_with_2_and_names_every_line(pipeline, capsys):
    pipeline.settings["recipes"]["tiny"]["face_sise"] = 8
    pipeline.settings["cube_axes"] = "sideways"
    pipeline.file.write_text(json.dumps(pipeline.settings, indent=1))
    for command in ("bake", "plan"):
        status, out, err = _run(capsys, command)
        assert (status, out) == (WRONG, "")
        assert "face_size" in err
        assert "sideways" in err
    assert not pipeline.build.exists()


def test_unknown_name_ends_with_2_and_tells_the_nearest(pipeline, capsys):
    status, _, err = _run(capsys, "bake", "ferry_moon", "quay*", "zebra")
    assert status == WRONG
    assert err.splitlines()[0] == "no probe is called 'ferry_moon'; did you mean 'ferry_noon'?"
    assert "'zebra'" in err.splitlines()[1]


def test_names_that_are_left_out_are_counted(tmp_path, monkeypatch, capsys):
    TinyPipeline(tmp_path, probes=[f"deck_{number:02}" for number in range(11)]).snapshot()
    monkeypatch.chdir(tmp_path)
    assert _run(capsys, "plan", "zzz")[2].endswith(", deck_06, deck_07 and 3 more\n")


def test_version_is_that_of_the_package(capsys):
    with pytest.raises(SystemExit) as end:
        main(["--version"])
    assert (end.value.code, capsys.readouterr().out) == (ALL_WELL, f"skykiln {release()}\n")


@pytest.mark.parametrize("arguments", ["", "paint", "bake --workers 0", "bake --workers two", "why"])
def test_wrong_command_ends_with_2(arguments, capsys):
    with pytest.raises(SystemExit) as end:
        main(arguments.split())
    assert end.value.code == WRONG


def test_plan_says_in_words_what_would_run_and_why(pipeline, capsys):
    _run(capsys, "bake")
    pipeline.recipe["specular"]["roughness"] = [0, 0.4286, 1]
    pipeline.snapshot()
    status, out, _ = _run(capsys, "plan", "ferry_noon")
    assert status == ALL_WELL
    assert out.splitlines() == [
        "will run: specular level 1 of ferry_noon: roughness was 0.5, is 0.4286",
        "may run: pictures of ferry_noon: runs if specular level 1 changes",
        "will run: pack specular.rgba16f.ktx2 of ferry_noon: roughness was [0, 0.5, 1], is [0, 0.4286, 1]",
        "will run: audit of ferry_noon: roughness was [0, 0.5, 1], is [0, 0.4286, 1]",
        "will run: judgement of ferry_noon: roughness was [0, 0.5, 1], is [0, 0.4286, 1]",
        "may run: published files of ferry_noon: "
        "runs if judgement, pictures or pack specular.rgba16f.ktx2 changes",
        "4 will run, 2 may run, 5 up to date",
    ]


def test_plan_words_packs_and_inputs_as_a_user_knows_them(pipeline, capsys):
    _run(capsys, "bake")
    pipeline.recipe["pack"] = [
        {"container": "ktx2", "pixels": "rgba16f", "compress": 3},
        {"container": "ktx2", "pixels": "rgb9e5"},
    ]
    pipeline.settings["sources"]["ferry_noon"]["extra"] = {"hour": 13}
    pipeline.snapshot()
    write_sky(pipeline.folder / "quay_night.exr", seed=9)
    lines = _run(capsys, "plan")[1].splitlines()
    told = "extra: hour is new; packs: specular.rgb9e5.ktx2 is new; "
    told += "packs: specular.rgba16f.ktx2: compress was 0, is 3; pack specular.rgb9e5.ktx2 is a new input"
    assert f"will run: judgement of ferry_noon: {told}" in lines
    assert "may run: faces of quay_night: runs if panorama changes" in lines
    assert "may run: irradiance of quay_night: runs if panorama changes" in lines


def test_plan_as_json_tells_every_state(pipeline, capsys):
    _run(capsys, "bake")
    pipeline.recipe["irradiance"]["face_size"] = 4
    pipeline.snapshot()
    record = json.loads(_run(capsys, "plan", "--json")[1])
    names = [chain["name"] for chain in record["chains"]]
    assert names == ["all probes", "ferry_noon", "quay_night"]
    states = {stage["stage"]: stage for stage in record["chains"][1]["stages"]}
    assert states["faces of ferry_noon"] == {
        "stage": "faces of ferry_noon",
        "state": "up to date",
        "reasons": [],
    }
    assert states["irradiance of ferry_noon"]["reasons"] == ["face_size was 2, is 4"]


def test_plan_tells_a_whole_chain_in_one_line_and_changes_nothing_on_disk(pipeline, capsys):
    _, out, _ = _run(capsys, "plan")
    assert out.splitlines() == [
        "will run: BRDF table of all probes: was never baked",
        "will run: all 10 stages of ferry_noon: was never baked",
        "will run: all 10 stages of quay_night: was never baked",
        "21 will run, 0 may run, 0 up to date",
    ]
    assert not pipeline.build.exists()


def test_why_tells_when_and_why_a_stage_ran_and_would_run(pipeline, capsys):
    _run(capsys, "bake")
    pipeline.settings["sources"]["ferry_noon"]["yaw_deg"] = 90
    pipeline.snapshot()
    _, out, _ = _run(capsys, "why", "ferry_noon")
    lines = out.splitlines()
    faces = lines.index(next(line for line in lines if line.startswith("faces of ferry_noon: ran 20")))
    assert lines[faces].endswith("was never baked")
    assert lines[faces + 1] == "    will run: yaw_deg was 0, is 90"


def test_why_tells_what_failed_last_time(pipeline, capsys):
    (pipeline.folder / "quay_night.exr").write_text("not a picture")
    _run(capsys, "bake")
    _, out, _ = _run(capsys, "why", "quay*")
    assert "    failed last time: quay_night.exr: is none of OpenEXR, " in out
    assert "panorama of quay_night: no finished run on record" in out


def test_of_very_many_probes_the_end_alone_is_told(pipeline, capsys, monkeypatch):
    monkeypatch.setattr("skykiln.engine.progress.CLOSELY", 0)
    _, out, err = _run(capsys, "bake")
    assert "quay_night: done\n" in out + err
    assert "quay_night: 1 stage" not in out + err


def test_schema_prints_a_schema_that_takes_the_pipeline(pipeline, capsys):
    schema = json.loads(_run(capsys, "schema")[1])
    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.validate(pipeline.settings, schema)


def test_again_reruns_one_probe_when_named(pipeline, capsys):
    _run(capsys, "bake")
    _, out, _ = _run(capsys, "bake", "--again", "quay_night")
    assert out.splitlines()[-1].startswith("1 rebuilt, 0 unchanged, 0 failed; 11 stages ran")


def _python(code, folder):
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    run = subprocess.run(
        [sys.executable, "-c", code], cwd=folder, env=environment, check=True, capture_output=True, text=True
    )
    return run.stdout


def test_help_loads_no_heavy_library(tmp_path):
    code = """
import sys
from skykiln.cli import main
try:
    main(["--help"])
except SystemExit:
    print("loaded:", sorted({"numba", "numpy", "luigi", "pydantic", "yaml", "rich"} & set(sys.modules)))
"""
    assert _python(code, tmp_path).endswith("loaded: []\n")


def test_bake_with_nothing_to_do_loads_no_numerics(pipeline, capsys):
    _run(capsys, "bake")
    touch(pipeline.folder / "ferry_noon.exr")
    code = """
import sys
from skykiln.cli import main
assert main(["bake"]) == 0
print("loaded:", sorted({"numba", "numpy", "OpenEXR"} & set(sys.modules)))
"""
    assert _python(code, pipeline.folder).endswith("loaded: []\n")


def test_bake_with_nothing_to_do_is_quick(pipeline, capsys):
    _run(capsys, "bake")
    began = time.perf_counter()
    status, out, _ = _run(capsys, "bake")
    assert time.perf_counter() - began < 0.5
    assert (status, out.splitlines()[-1][:41]) == (ALL_WELL, "0 rebuilt, 2 unchanged, 0 failed; 0 stage")


@pytest.mark.parametrize("spoiled", [False, True])
def test_reader_who_goes_away_ends_the_output_and_nothing_else(pipeline, spoiled):
    if spoiled:
        (pipeline.folder / "quay_night.exr").write_text("not a picture")
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    leader, follower = os.pipe()
    os.close(leader)
    command = [sys.executable, "-m", "skykiln", "bake"]
    run = subprocess.run(command, env=environment, stdout=follower, stderr=subprocess.PIPE, text=True)
    os.close(follower)
    assert run.returncode == (SOURCE_FAILED if spoiled else ALL_WELL)
    assert "Traceback" not in run.stderr
    assert "Broken" not in run.stderr
    assert (pipeline.build / "probes/ferry_noon/probe.json").exists()
    plan = [*command[:-1], "plan"]
    leader, follower = os.pipe()
    os.close(leader)
    run = subprocess.run(plan, env=environment, stdout=follower, stderr=subprocess.PIPE, text=True)
    os.close(follower)
    assert (run.returncode, run.stderr) == (ALL_WELL, "")


def test_luigi_s_own_noise_is_off_by_default_and_shown_with_v(pipeline):
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}

    def printed(*arguments):
        command = [sys.executable, "-m", "skykiln", "bake", "--again", *arguments]
        run = subprocess.run(command, env=environment, check=True, capture_output=True, text=True)
        return run.stdout + run.stderr

    assert "Worker" not in printed()
    assert "Worker" in printed("-v")


def test_bars_are_drawn_on_a_terminal(pipeline):
    import pty

    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "TERM": "xterm", "COLUMNS": "80"}
    leader, follower = pty.openpty()
    run = subprocess.Popen([sys.executable, "-m", "skykiln", "bake"], env=environment, stdout=follower)
    os.close(follower)
    seen = b""
    while chunk := _read(leader):
        seen += chunk
    assert run.wait() == ALL_WELL
    assert b"all stages" in seen
    assert "━".encode() in seen


def _read(leader):
    try:
        return os.read(leader, 65536)
    except OSError:  # the terminal closed
        return b""


def test_held_probe_ends_with_3_and_is_published_by_accept(pipeline, capsys):
    pipeline.settings["gates"] = {"bytes": {"probe_gpu": "4 KiB"}}
    pipeline.snapshot()
    status, out, err = _run(capsys, "bake")
    assert status == GATE_BROKEN
    assert "ferry_noon: held: bytes.probe_gpu: 4.125 KiB on the GPU, the limit is 4 KiB" in err
    assert out.splitlines()[-1].startswith("0 rebuilt, 0 unchanged, 2 held, 0 failed; 19 stages ran")
    _, out, _ = _run(capsys, "plan")
    assert out.splitlines() == [
        "held: published files of ferry_noon: bytes.probe_gpu: 4.125 KiB on the GPU, the limit is 4 KiB",
        "held: published files of quay_night: bytes.probe_gpu: 4.125 KiB on the GPU, the limit is 4 KiB",
        "0 will run, 0 may run, 19 up to date, 2 held",
    ]
    assert _run(capsys, "bake", "--accept", "ferry_noon")[0] == ALL_WELL
    assert (pipeline.build / "probes/ferry_noon/probe.json").exists()
    status, _, err = _run(capsys, "bake", "--accept", "ferry_noon")
    assert (status, err) == (ALL_WELL, "nothing is held of ferry_noon\n")
    assert _run(capsys, "bake")[0] == GATE_BROKEN  # the other one


def test_accept_needs_a_name(pipeline, capsys):
    status, _, err = _run(capsys, "bake", "--accept")
    assert (status, err[:10]) == (WRONG, "--accept: ")


def test_gate_of_the_night_ends_with_3(pipeline, capsys):
    pipeline.settings["gates"] = {"bytes": {"night_disk": "2 kB"}}
    pipeline.snapshot()
    status, _, err = _run(capsys, "bake")
    assert status == GATE_BROKEN
    assert err.startswith("the night: bytes.night_disk: ")


def test_inspect_shows_a_packed_file_and_checks_it(pipeline, capsys):
    _run(capsys, "bake", "ferry_noon")
    packed = "build/probes/ferry_noon/specular.rgba16f.ktx2"
    status, out, _ = _run(capsys, "inspect", packed, "--picture", "levels.png")
    assert status == ALL_WELL
    assert out.startswith(f"{packed}: ktx2, rgba16f, cube map of 6 x 8 x 8, 3 levels, ")
    assert (pipeline.folder / "levels.png").exists()
    assert _run(capsys, "inspect", packed, "--check") == (ALL_WELL, f"{packed}: sound\n", "")


def test_inspect_samples_a_vector_that_begins_with_a_minus(pipeline, capsys):
    _run(capsys, "bake", "ferry_noon")
    packed = "build/probes/ferry_noon/specular.rgba16f.ktx2"
    status, out, _ = _run(capsys, "inspect", packed, "--at", "-1,0.5,0", "--level", "1.5")
    assert status == ALL_WELL
    assert len([float(number) for number in out.split()]) == 3


def test_inspect_of_broken_files_ends_with_1(pipeline, capsys):
    _run(capsys, "bake", "ferry_noon")
    packed = pipeline.build / "probes/ferry_noon/specular.rgba16f.ktx2"
    packed.write_bytes(packed.read_bytes() + b"\0")
    status, out, _ = _run(capsys, "inspect", str(packed), "--check")
    assert (status, out) == (SOURCE_FAILED, f"{packed}: 1 bytes stand behind the base level\n")
    status, out, err = _run(capsys, "inspect", str(packed))
    assert (status, out) == (SOURCE_FAILED, "")
    assert "1 bytes stand behind the base level" in err


@pytest.mark.parametrize("vector", ["0,0,0", "1,2", "up", "nan,0,1"])
def test_inspect_refuses_what_is_no_vector(vector, capsys):
    with pytest.raises(SystemExit) as end:
        main(["inspect", "x.ktx2", "--at", vector])
    assert end.value.code == WRONG


def test_view_writes_one_page_and_prints_its_size(pipeline, capsys):
    _run(capsys, "bake", "ferry_noon")
    status, out, _ = _run(capsys, "report", "--view", "ferry_noon")
    path = pipeline.build / "report/view/ferry_noon.html"
    assert (status, out) == (ALL_WELL, f"{path}: specular.rgba16f.ktx2, {path.stat().st_size / 1e6:.1f} MB\n")
    assert path.read_bytes().startswith(b"<!doctype html>")
    status, _, err = _run(capsys, "report", "--view", "ferry_noon", "--pack", "x.ktx2")
    assert status == SOURCE_FAILED
    assert err.endswith("no pack x.ktx2 among its files; KTX2 files: specular.rgba16f.ktx2\n")


def test_view_of_what_is_not_one_baked_probe_says_so(pipeline, capsys):
    status, _, err = _run(capsys, "report", "--view", "*")
    assert (status, err) == (WRONG, "--view: 2 probes match '*'; name one\n")
    status, _, err = _run(capsys, "report", "--view", "quay_nigth")
    assert status == WRONG
    assert "did you mean 'quay_night'?" in err
    status, _, err = _run(capsys, "report", "--view", "quay_night")
    assert status == SOURCE_FAILED
    assert err.endswith("probe.json: is not there; bake the probe first\n")
