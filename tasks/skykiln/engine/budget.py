"""The machine's cores and memory as Luigi resources: which tasks may run beside each other.

Tasks ask for shares, and the machine has 1 of each: Luigi takes 1 as the limit of a resource that its
configuration does not name, so the budget holds under every local scheduler without being set up.
"""

import functools
import os
from pathlib import Path

USABLE = 0.8  # of the memory that is free: guesses err, and other programs want some
FINENESS = 2**20  # shares are multiples of its inverse, so that Luigi's sums of them are exact

# Version of the control groups -> their folder, and the files of the limit, of what is used, and the entry
# of memory.stat that can be taken back at once (Linux kernel documentation, cgroup-v2 and cgroup-v1/memory).
_GROUPS = {
    2: ("sys/fs/cgroup", "memory.max", "memory.current", "inactive_file"),
    1: ("sys/fs/cgroup/memory", "memory.limit_in_bytes", "memory.usage_in_bytes", "total_inactive_file"),
}


def resources_of(cores: float, memory: float) -> dict:
    """What a task takes of the machine while it runs.

    Parameters: cores : share of the cores, 0..1
                memory : bytes; what takes more than there is runs alone
    """
    return {"skykiln_cores": _share(cores), "skykiln_memory": _share(memory / _memory_budget())}


def available_memory(root: Path = Path("/")) -> int:
    """Bytes that this process and its children may take without anything being swapped out.

    Parameters: root : where /proc and /sys are looked for
    """
    return max(0, min([_system_memory(root), *_group_memories(root)]))


@functools.cache
def _memory_budget():
    return max(1.0, USABLE * available_memory())


def _share(part):
    return min(1.0, int(part * FINENESS) / FINENESS)


def _system_memory(root):
    try:
        for line in (root / "proc/meminfo").read_text().splitlines():
            name, _, value = line.partition(":")
            if name == "MemAvailable":
                return int(value.split()[0]) * 1024
    except OSError:
        pass  # no Linux
    return os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")


def _group_memories(root):
    """What each control group that this process is in, however far above, leaves of its limit."""
    try:
        lines = (root / "proc/self/cgroup").read_text().splitlines()
    except OSError:
        return
    for line in lines:
        _, controllers, path = line.split(":", 2)
        if controllers in ("", "memory"):
            folder, *names = _GROUPS[1 if controllers else 2]
            group = root / folder / path.strip("/")
            while group != (root / folder).parent:
                yield from _left_in(group, *names)
                group = group.parent


def _left_in(group, limit, used, reclaimable):
    try:
        most, taken = int((group / limit).read_text()), int((group / used).read_text())
        facts = dict(line.split() for line in (group / "memory.stat").read_text().splitlines())
    except (OSError, ValueError):  # no limit ('max'), or no such group as seen from in here
        return
    yield most - taken + int(facts.get(reclaimable, 0))
