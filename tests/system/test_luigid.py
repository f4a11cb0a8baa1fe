"""A farm with Luigi's central scheduler: luigid and three who join it, on this machine."""

import os
import shutil
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import pytest

from tiny_pipeline import TinyPipeline, published

ROOT = Path(__file__).parents[2]
PROBES = [f"berth_{number:02}" for number in range(24)]


def _environment(**more):
    return {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), **more}


@pytest.fixture
def started():
    """Starts processes; they are killed when the test ends."""
    running = []

    def start(*command, **options):
        process = subprocess.Popen(command, start_new_session=True, text=True, **options)
        running.append(process)
        return process

    yield start
    for process in running:
        if process.poll() is None:
            os.killpg(process.pid, signal.SIGKILL)
        process.wait()


@pytest.fixture
def luigid(tmp_path_factory, started):
    """'host:port' of a luigid with the settings of docs/farm, quicker to take a machine for dead."""
    folder = tmp_path_factory.mktemp("luigid")
    settings = (ROOT / "docs/farm/luigi.cfg").read_text()
    quicker = settings.replace("worker_disconnect_delay = 60", "worker_disconnect_delay = 3")
    assert quicker != settings
    (folder / "luigi.cfg").write_text(quicker.replace("retry_delay = 5", "retry_delay = 1"))
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    command = "from luigi.cmdline import luigid; luigid()"
    started(
        sys.executable, "-c", command, "--address", "127.0.0.1", "--port", str(port), cwd=folder,
        env=_environment(LUIGI_CONFIG_PATH=str(folder / "luigi.cfg")), stderr=subprocess.DEVNULL,
    )  # fmt: skip
    _wait(lambda: _answers(port))
    return f"127.0.0.1:{port}"


def _answers(port):
    with socket.socket() as probe:
        return probe.connect_ex(("127.0.0.1", port)) == 0


def _wait(ready, seconds=60):
    until = time.monotonic() + seconds
    while not ready():
        assert time.monotonic() < until
        time.sleep(0.02)


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory):
    pipeline = TinyPipeline(tmp_path_factory.mktemp("undisturbed"), PROBES)
    pipeline.bake()
    return published(pipeline.build)


@pytest.fixture
def share(tmp_path):
    """A pipeline in a shared folder that machines see at other places."""
    (tmp_path / "share").mkdir()
    pipeline = TinyPipeline(tmp_path / "share", PROBES)
    pipeline.snapshot()
    return pipeline


def _mounted(share, name):
    place = share.folder.parent / name
    place.symlink_to(share.folder)
    return place / "pipeline.yaml"


def _skykiln(*arguments):
    return [sys.executable, "-m", "skykiln", *arguments]


def _join(started, luigid, file, log):
    with log.open("w") as output:
        command = _skykiln("join", luigid, "-f", str(file), "--workers", "1")
        return started(*command, env=_environment(), stdout=output, cwd=log.parent)


def _head(started, luigid, share, workers):
    command = _skykiln("bake", "-f", str(share.file), "--scheduler", luigid, "--workers", str(workers))
    return started(*command, env=_environment(), stdout=subprocess.PIPE)


def _told(logs, verb):
    """Names of probes in what machines say they begin, or have ended."""
    lines = [line.partition(" ") for log in logs for line in log.read_text().splitlines()]
    return [name for said, _, names in lines if said == verb for name in names.split(", ")]


def _run(command, environment):
    return subprocess.run(command, env=environment, capture_output=True, text=True, timeout=60, check=False)


def test_three_who_joined_at_other_places_do_everything_once(share, luigid, started, undisturbed, tmp_path):
    logs = [tmp_path / f"machine_{number}.log" for number in range(3)]
    joined = [_join(started, luigid, _mounted(share, f"mount_{n}"), log) for n, log in enumerate(logs)]
    head = _head(started, luigid, share, workers=0)
    assert head.wait(timeout=120) == 0
    assert sorted(_told(logs, "ended")) == PROBES
    assert published(share.build) == undisturbed
    assert share.night_record()["totals"]["rebuilt"] == len(PROBES)
    for process in joined:
        process.send_signal(signal.SIGUSR1)
    assert [process.wait(timeout=30) for process in joined] == [0, 0, 0]


def test_lot_of_a_killed_machine_is_given_to_another(share, luigid, started, undisturbed, tmp_path):
    logs = [tmp_path / "killed.log", tmp_path / "other.log"]
    killed = _join(started, luigid, share.file, logs[0])
    head = _head(started, luigid, share, workers=0)
    _wait(lambda: _told(logs[:1], "begins"))
    killed.kill()
    began = time.monotonic()
    _join(started, luigid, share.file, logs[1])
    assert head.wait(timeout=120) == 0
    assert time.monotonic() - began < 60
    assert set(_told(logs, "ended")) == set(PROBES)
    assert published(share.build) == undisturbed


def test_bad_source_is_tried_once_and_decides_the_status(share, luigid, started, tmp_path):
    (share.folder / "berth_07.exr").write_text("not a picture")
    log = tmp_path / "machine.log"
    _join(started, luigid, share.file, log)
    head = _head(started, luigid, share, workers=1)
    assert head.wait(timeout=120) == 1
    assert share.night_record()["totals"]["failed"] == 1
    assert _told([log], "begins").count("berth_07") <= 1


def test_machine_with_other_code_is_refused(share, luigid, started, tmp_path):
    assert _head(started, luigid, share, workers=1).wait(timeout=120) == 0
    other = tmp_path / "other code"
    shutil.copytree(ROOT / "tasks", other)
    (other / "skykiln/light/ggx.py").open("a").write("\n# edited\n")
    command = _skykiln("join", luigid, "-f", str(share.file))
    refused = _run(command, _environment(PYTHONPATH=str(other)))
    assert refused.returncode == 2
    assert "its code differs; install the same on all machines" in refused.stderr


def test_scheduler_that_does_not_answer_is_told(share, tmp_path, monkeypatch):
    monkeypatch.setenv("LUIGI_CONFIG_PATH", str(tmp_path / "luigi.cfg"))
    (tmp_path / "luigi.cfg").write_text("[core]\nrpc_retry_attempts=1\nrpc_retry_wait=0\n")
    command = _skykiln("join", "127.0.0.1:9", "-f", str(share.file))
    run = _run(command, _environment())
    assert run.returncode == 1
    assert "no scheduler answers at 127.0.0.1:9; start luigid there" in run.stderr
