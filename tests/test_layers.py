"""Imports run one way: the table of layers, held against the sources themselves."""

import ast
import configparser
import re
import sys
from importlib.metadata import packages_distributions
from pathlib import Path

import pytest

import skykiln

PACKAGE = Path(skykiln.__file__).parent

# What each room may import of the package, besides itself.
ALLOWED = {
    "errors": set(),
    "jit": set(),
    "limits": set(),
    "quantities": set(),
    "light": {"jit"},
    "formats": {"errors", "jit", "limits"},
    "config": {"errors"},
    "schemas": set(),
    "engine": {"errors", "quantities"},
    "report": {"light", "formats", "errors", "quantities"},
    "stages": {"engine", "report", "config", "formats", "light", "errors", "jit", "limits", "quantities"},
    "cli": {"stages", "engine", "report", "config", "errors"},
    "__init__": {"stages"},
    "__main__": {"cli"},
}
# Libraries that only these rooms may know.
KEPT_BY = {
    "luigi": {"engine", "stages"},
    "numba": {"light", "formats", "jit"},
    "OpenEXR": {"formats"},
    "yaml": {"config"},
    "pydantic": {"config"},
    "rich": {"engine"},
    "jinja2": {"report"},
}
MODULES = sorted(PACKAGE.rglob("*.py"))


def _room(path):
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported_names(path):
    """Absolute dotted names of all that a module imports, at its top or inside its functions."""
    here = ("skykiln", *path.relative_to(PACKAGE).parts[:-1])
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            parents = here[: len(here) - node.level + 1] if node.level else ()
            origin = ".".join([*parents, *([node.module] if node.module else [])])
            yield from (f"{origin}.{alias.name}" for alias in node.names)


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_module_imports_only_from_rooms_below_its_own(path):
    room = _room(path)
    for name in imported_names(path):
        parts = name.split(".")
        if parts[0] == "skykiln" and len(parts) > 1:
            assert parts[1] in ALLOWED[room] | {room}, f"{room} may not import {name}"
        elif parts[0] in KEPT_BY:
            assert room in KEPT_BY[parts[0]], f"{room} may not import {name}"


def test_table_has_a_line_for_every_room():
    assert {_room(path) for path in MODULES} == set(ALLOWED)


def test_every_library_imported_is_one_that_the_set_up_installs():
    declared = configparser.ConfigParser()
    declared.read(PACKAGE.parents[1] / "setup.cfg")
    texts = declared["options"]["install_requires"] + declared["options.extras_require"]["bc6h"]
    names = {re.split("[ <>=]", line)[0].lower() for line in texts.split("\n") if line}
    names |= {"llvmlite", "pydantic-core"}  # numba's and pydantic's own
    found = packages_distributions()
    for path in MODULES:
        for name in imported_names(path):
            library = name.split(".")[0]
            if library not in sys.stdlib_module_names | {"skykiln"}:
                owners = {owner.lower().replace("_", "-") for owner in found.get(library, [library])}
                assert owners & {name.replace("_", "-") for name in names}, f"{path.name}: {library}"
