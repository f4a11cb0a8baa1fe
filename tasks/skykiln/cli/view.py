"""skykiln report --view: a probe's viewer as one file."""

from pathlib import Path

from ..errors import ALL_WELL, PipelineError


def add_options(report, shown):
    """The options of `report`; `shown` is its group of what can't be asked for together."""
    shown.add_argument("--view", metavar="NAME", help="write a page that draws a probe from its packed file")
    report.add_argument("-o", "--output", metavar="HTML", help="where to (build/report/view/NAME.html)")
    report.add_argument("--pack", metavar="FILE", help="which of its KTX2 files (the first)")
    report.add_argument("--full", action="store_true", help="with faces larger than 256 texels too")


def write_view(options, pipeline):
    """Write the viewer that the options ask for. Returns: the exit status."""
    from ..engine.atomic import write_atomically
    from ..report.viewer import LARGEST_FACE, probe_viewer
    from ..stages.snapshot import matching
    from ..stages.tabulate_brdf import TABLE_FILE

    found = matching(pipeline.probes(), [options.view])
    if len(found) > 1:
        raise PipelineError([f"--view: {len(found)} probes match {options.view!r}; name one"])
    name, build = found[0].name, pipeline.build_dir
    viewer = probe_viewer(build / "probes" / name, build / "brdf" / TABLE_FILE, options.pack, options.full)
    path = Path(options.output or build / "report" / "view" / f"{name}.html")
    write_atomically(path, [viewer.page])
    print(f"{path}: {viewer.file}, {len(viewer.page) / 1e6:.1f} MB")
    if viewer.left_out:
        left = f"{viewer.left_out} level{'s' if viewer.left_out > 1 else ''}"
        print(f"{left} of more than {LARGEST_FACE} texels left out; --full writes them too")
    return ALL_WELL
