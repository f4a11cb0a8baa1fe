"""Kernels are compiled once for a machine, before stages run: none may be left to compile in a worker."""

import subprocess
import sys

from test_layers import MODULES, PACKAGE, imported_names

# Code that was loaded from Numba's cache holds what it calls, so that is looked up by name.
CODE = """
import importlib
import pkgutil

from numba.core.dispatcher import Dispatcher

import skykiln.formats
import skykiln.light
from skykiln.stages.kernels import _run_every_kernel

_run_every_kernel()
rooms = (skykiln.formats, skykiln.light)
names = [found.name for room in rooms for found in pkgutil.iter_modules(room.__path__, f"{room.__name__}.")]
modules = [importlib.import_module(name) for name in names]
kernels = {value for module in modules for value in vars(module).values() if isinstance(value, Dispatcher)}
warm, waiting = set(), [kernel for kernel in kernels if kernel.signatures]
while waiting:
    kernel = waiting.pop()
    warm.add(kernel)
    function = kernel.py_func
    seen = [function.__globals__.get(name) for name in function.__code__.co_names]
    called = {value for value in seen if isinstance(value, Dispatcher)}
    waiting += called - warm
for kernel in kernels - warm:
    print(kernel.__module__, kernel.__name__)
"""


def test_every_kernel_that_a_command_can_come_to_is_compiled_ahead():
    run = subprocess.run([sys.executable, "-c", CODE], check=True, capture_output=True, text=True)
    cold = [line.split() for line in run.stdout.splitlines()]
    reached = _modules_below("cli", "stages", "report")
    assert "skykiln.light.specular" in reached
    assert [f"{module}.{kernel}" for module, kernel in cold if module in reached] == []


def _modules_below(*rooms):
    """Dotted names of all modules that those of some rooms import, at their top or in their functions."""
    modules = {_dotted(path): path for path in MODULES}
    reached, waiting = set(), [name for name in modules if name.split(".")[1] in rooms]
    while waiting:
        name = waiting.pop()
        reached.add(name)
        asked = {part for each in imported_names(modules[name]) for part in (each, each.rpartition(".")[0])}
        waiting += (asked & modules.keys()) - reached
    return reached


def _dotted(path):
    return ".".join(("skykiln", *path.relative_to(PACKAGE).with_suffix("").parts))
