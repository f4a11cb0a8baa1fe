"""Disks that are full or may not be written, as real mounts in a mount namespace of the test's own."""

import os
import re
import shutil
import subprocess
import sys

import pytest

from tiny_pipeline import TinyPipeline, published, write_sky

NAMES = ("ferry_noon", "quay_night")


def run_with_mounts(folder, script):
    """Run a shell script whose mounts nobody else sees; it must end well.

    Root mounts as it is, others as root of a user namespace of their own. `skykiln` in it notes its exit
    status in the file `status` and what it says in `told`, in `folder`.
    """
    as_root = [] if os.geteuid() == 0 else ["--map-root-user"]
    prelude = f"""
        skykiln() {{
            status=0
            {sys.executable} -m skykiln "$@" -f {folder}/pipeline.yaml > {folder}/told 2>&1 || status=$?
            echo $status > {folder}/status
        }}
    """
    command = ["unshare", "--mount", *as_root, "bash", "-euc", prelude + script]
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(map(os.path.abspath, sys.path))}
    assert shutil.which("unshare"), "needs unshare, of the package util-linux"
    run = subprocess.run(command, cwd=folder, env=environment, capture_output=True, text=True)
    assert run.returncode == 0, f"mounts need CAP_SYS_ADMIN or user namespaces: {run.stderr}"


@pytest.fixture
def pipeline(tmp_path):
    pipeline = TinyPipeline(tmp_path, NAMES)
    pipeline.snapshot()
    pipeline.build.mkdir()
    for number, name in enumerate(NAMES):
        write_sky(tmp_path / f"{name}.later", seed=40 + number)
    return pipeline


def _said(pipeline):
    return int((pipeline.folder / "status").read_text()), (pipeline.folder / "told").read_text()


@pytest.mark.parametrize("room", [3, 8, 16])  # KiB: for no stage, for some of them
def test_full_disk_is_told_loses_nothing_and_is_made_good(pipeline, tmp_path_factory, room):
    folder = pipeline.folder
    run_with_mounts(
        folder,
        f"""
        mount -t tmpfs -o size=2m tmpfs build
        skykiln bake --workers 1
        cp status status_before
        cp -r build before
        left=$(df --output=avail -k build | tail -1)
        head -c $(((left - {room}) * 1024)) /dev/zero > build/other_files
        for name in {" ".join(NAMES)}; do mv $name.later $name.exr; done
        skykiln bake --workers 1
        cp told told_full; cp status status_full
        cp -r build full
        rm build/other_files
        skykiln bake --workers 1
        cp -r build after
        """,
    )
    assert (folder / "status_before").read_text() == "0\n"
    assert (folder / "status_full").read_text() == "1\n"
    told = (folder / "told_full").read_text()
    sentence = r"build/\S+: can't be written: No space left on device, [\d,]+ bytes are needed; make room"
    assert re.search(sentence, told), told
    assert _said(pipeline)[0] == 0
    clean = TinyPipeline(tmp_path_factory.mktemp("clean"), NAMES)
    for name in NAMES:
        shutil.copy(folder / f"{name}.exr", clean.folder / f"{name}.exr")
    clean.bake()
    wanted, before, full = published(clean.build), published(folder / "before"), published(folder / "full")
    assert published(folder / "after") == wanted
    assert full.keys() == before.keys()
    for name in NAMES:  # the old files or the new ones, never some of both
        assert _of(full, name) in (_of(before, name), _of(wanted, name))


def _of(files, name):
    return {path: data for path, data in files.items() if f"/{name}/" in path}


def test_folder_that_may_only_be_read_is_told_by_name_and_can_be_looked_at(pipeline):
    folder = pipeline.folder
    run_with_mounts(
        folder,
        """
        skykiln bake --workers 1
        cp -r build before
        mv ferry_noon.later ferry_noon.exr
        mount --bind build build
        mount -o remount,bind,ro build
        skykiln bake
        mv told told_read_only; mv status status_read_only
        skykiln plan
        cp -r build read_only
        """,
    )
    told = (folder / "told_read_only").read_text()
    assert (folder / "status_read_only").read_text() == "1\n"
    assert "build/work/.lock: can't be written: Read-only file system; give write permission" in told
    assert "Traceback" not in told
    status, planned = _said(pipeline)
    assert status == 0
    assert "will run: panorama of ferry_noon: source changed" in planned
    assert published(folder / "read_only") == published(folder / "before")
    assert "published files of ferry_noon" in pipeline.bake()


def test_sources_that_may_only_be_read_are_all_that_a_bake_needs(pipeline):
    sources = pipeline.folder / "captures"
    sources.mkdir()
    for name in NAMES:
        (pipeline.folder / f"{name}.exr").rename(sources / f"{name}.exr")
        pipeline.settings["sources"][name]["file"] = f"captures/{name}.exr"
    pipeline.snapshot()
    run_with_mounts(
        pipeline.folder,
        """
        mount --bind captures captures
        mount -o remount,bind,ro captures
        skykiln bake --workers 1
        """,
    )
    assert _said(pipeline)[0] == 0, _said(pipeline)[1]
