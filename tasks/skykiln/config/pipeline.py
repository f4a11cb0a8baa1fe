"""The pipeline file as a whole: read, validated, taken apart into probes; every mistake in one error."""

import dataclasses
import stat
from pathlib import Path

import yaml

from ..errors import PipelineError
from .entries import valid_recipes
from .expand import expanded_probes
from .model import PipelineHead, Recipe
from .probes import Probe
from .problems import dotted, nearest, printable, shown, validated
from .source_entries import valid_sources
from .yaml_lines import LARGEST_TEXT, LinedData, Problem, read_lined_yaml


@dataclasses.dataclass(frozen=True)
class Pipeline:
    """A valid pipeline file.

    path : as given; root : its folder, absolute; build_dir : absolute
    recipes : name -> Recipe; gates : the limits that are given, by their dotted keys below `gates`
    report_nights : how many nights' records are kept
    max_pixels : the largest source picture; None: the readers' own limit
    """

    path: Path
    root: Path
    build_dir: Path
    cube_axes: str
    brdf_size: int
    gates: dict
    report_nights: int
    max_pixels: int | None
    recipes: dict[str, Recipe]
    all_probes: tuple[Probe, ...]

    def probes(self) -> tuple[Probe, ...]:
        """All probes, globs expanded, sorted by name."""
        return self.all_probes


def load_pipeline(path) -> Pipeline:
    """Read a pipeline file.

    Raises: PipelineError with every mistake as "file:line: dotted.key: what; what is allowed".
    """
    path = Path(path)
    lined = _lined(path)
    problems = list(lined.problems)

    def report(steps, text):
        problems.append(Problem(lined.line_of(steps), steps, text))

    pipeline = _pipeline(path, lined.data, report)
    if problems:
        raise PipelineError(_sentences(path, problems))
    return pipeline


def _sentences(path, problems):
    lines = []
    for problem in sorted(problems, key=lambda problem: problem.line):
        key = f"{dotted(problem.path)}: " if problem.path else ""
        lines.append(printable(f"{path}:{problem.line}: {key}{problem.text}"))
    return list(dict.fromkeys(lines))


def _lined(path) -> LinedData:
    text = _text(path)
    try:
        return read_lined_yaml(text)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        what = ", ".join(part for part in (error.context, error.problem) if part)
        raise PipelineError([f"{path}:{mark.line + 1 if mark else 1}: {what}"]) from None


def _text(path) -> str:
    try:
        found = path.stat()
        if not stat.S_ISREG(found.st_mode):
            raise PipelineError([f"{path}: is not a file; name the pipeline file itself"])
        if found.st_size > LARGEST_TEXT:
            raise PipelineError([f"{path}: larger than {LARGEST_TEXT:,} bytes; use globs"])
        return path.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        raise PipelineError([f"{path}: no such file; give the pipeline file with -f"]) from None
    except (OSError, ValueError) as error:
        cause = getattr(error, "strerror", None) or "it is not UTF-8 text; save it as UTF-8"
        raise PipelineError([f"{path}: can't be read: {cause}"]) from None


def _pipeline(path, data, report):
    """The pipeline, or None after at least one report."""
    if not isinstance(data, dict):
        report((), f"found {shown(data)}; allowed: a mapping that starts with 'skykiln: 1'")
        return None
    root = path.parent.resolve()
    rest = {key: value for key, value in data.items() if key not in ("recipes", "sources")}
    head = _head(rest, report)
    build_dir = _build_dir(head, root, report)
    raw_recipes, raw_sources = (_section(data, key, report) for key in ("recipes", "sources"))
    recipes = valid_recipes(raw_recipes, head.cube_axes, report)
    sources = valid_sources(raw_sources, raw_recipes, report)
    probes = expanded_probes(head, recipes, sources, root, build_dir, report)
    return Pipeline(
        path=path,
        root=root,
        build_dir=build_dir,
        cube_axes=head.cube_axes,
        brdf_size=head.brdf.size,
        gates=head.gates.limits(),
        report_nights=head.report.nights,
        max_pixels=head.limits.max_pixels,
        recipes=recipes,
        all_probes=probes,
    )


def _head(rest, report):
    """The valid head, or that of the defaults after a report, so that the entries are judged too."""
    for key in rest.keys() - PipelineHead.model_fields.keys():
        known = (*PipelineHead.model_fields, "recipes", "sources")
        report((key,), f"unknown key; {nearest(key, known)}")
    known = {key: value for key, value in rest.items() if key in PipelineHead.model_fields}
    return validated(PipelineHead, known, (), report) or PipelineHead(skykiln=1)


def _build_dir(head, root, report):
    build_dir = (root / head.build_dir).resolve()
    if build_dir == root or build_dir in root.parents:
        text = f"found {head.build_dir!r}; allowed: a folder that doesn't hold the pipeline file"
        report(("build_dir",), text)
    return build_dir


def _section(data, key, report):
    entries = data.get(key)
    if isinstance(entries, dict) and entries:
        return entries
    what = f"found {shown(entries)}" if key in data else "missing"
    report((key,), f"{what}; allowed: a mapping with at least one entry")
    return {}
