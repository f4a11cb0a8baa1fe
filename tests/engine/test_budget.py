"""The budget: what a machine has, and how many tasks Luigi runs at once within it."""

import time

import luigi
import pytest

from skykiln.engine import budget
from skykiln.engine.budget import available_memory, resources_of
from skykiln.engine.waves import build_wave

GIB = 2**30


class TakeMemory(luigi.Task):
    """Notes when it begins and ends."""

    folder = luigi.Parameter()
    number = luigi.IntParameter()
    gib = luigi.FloatParameter()

    @property
    def resources(self):
        return resources_of(cores=1 / 16, memory=self.gib * GIB)

    def output(self):
        return luigi.LocalTarget(f"{self.folder}/{self.number}")

    def run(self):
        began = time.monotonic()
        time.sleep(0.2)
        with self.output().open("w") as file:
            file.write(f"{began} {time.monotonic()}")


def _most_at_once(folder, sizes):
    """The largest number of tasks that ran at the same time."""
    tasks = [TakeMemory(folder=str(folder), number=n, gib=gib) for n, gib in enumerate(sizes)]
    build_wave(tasks, workers=8, verbose=False)
    spans = [tuple(map(float, (folder / str(n)).read_text().split())) for n in range(len(sizes))]
    return max(sum(began <= start < ended for began, ended in spans) for start, _ in spans)


@pytest.fixture
def sixteen_gib(monkeypatch):
    monkeypatch.setattr(budget, "_memory_budget", lambda: 16 * GIB)


def test_ten_large_skies_never_take_more_than_the_memory_that_there_is(tmp_path, sixteen_gib):
    assert _most_at_once(tmp_path, [5] * 10) == 3


def test_sky_that_is_too_large_for_the_machine_runs_alone(tmp_path, sixteen_gib):
    assert _most_at_once(tmp_path, [40, 1, 1]) == 2


def test_shares_of_all_cores_add_up_to_one_for_every_number_of_them(sixteen_gib):
    for cores in range(1, 200):
        share = resources_of(cores=1 / cores, memory=0)["skykiln_cores"]
        assert sum([share] * cores) <= 1
        assert sum([share] * (cores + 1)) > 1


def _machine(root, available, groups, facts):
    """A root folder of a machine. `groups`: /proc/self/cgroup; `facts`: file -> text."""
    for name, text in {"proc/meminfo": f"MemTotal: 9\nMemAvailable: {available // 1024} kB\n",
                       "proc/self/cgroup": groups, **facts}.items():  # fmt: skip
        path = root / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text)
    return root


def _version_2(group, limit, used, idle):
    folder = f"sys/fs/cgroup/{group}"
    facts = f"anon 1\ninactive_file {idle}\n"
    return {f"{folder}/memory.max": limit, f"{folder}/memory.current": used, f"{folder}/memory.stat": facts}


def test_without_control_groups_memory_is_what_the_system_calls_available(tmp_path):
    assert available_memory(_machine(tmp_path, 4 * GIB, "0::/\n", {})) == 4 * GIB


def test_control_group_leaves_its_limit_less_what_is_used_but_for_idle_file_pages(tmp_path):
    facts = _version_2("night", "5000000", "3000000", "1000000") | _version_2("night/job", "max", "1", "0")
    machine = _machine(tmp_path, 4 * GIB, "0::/night/job\n", facts)
    assert available_memory(machine) == 3_000_000


def test_group_of_version_1_counts_too_and_never_leaves_less_than_nothing(tmp_path):
    folder = "sys/fs/cgroup/memory/slurm/job_7"
    facts = {
        f"{folder}/memory.limit_in_bytes": "1000",
        f"{folder}/memory.usage_in_bytes": "1500",
        f"{folder}/memory.stat": "total_inactive_file 200\n",
    }
    machine = _machine(tmp_path, 4 * GIB, "4:cpu:/slurm\n3:memory:/slurm/job_7\n0::/\n", facts)
    assert available_memory(machine) == 0


def test_this_machine_has_some_memory():
    assert 2**24 < available_memory() < 2**50
