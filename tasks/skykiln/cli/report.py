"""skykiln report"""

import json

from ..errors import ALL_WELL, FileError
from .arguments import add_command, port
from .telling import say_waiting
from .view import add_options, write_view


def add_to(commands):
    text = "write the page of the last night anew and say where it lies, print it, or serve it"
    report = add_command(commands, "report", run, text)
    shown = report.add_mutually_exclusive_group()
    shown.add_argument(
        "--text", action="store_true", help="print it, at most a screenful, for a mail or a chat"
    )
    shown.add_argument(
        "--serve", nargs="?", type=port, const=8017, metavar="PORT", help="serve it on 127.0.0.1 (8017)"
    )
    add_options(report, shown)


def run(options):
    from ..config import load_pipeline
    from ..stages.nights import night_file

    pipeline = load_pipeline(options.file)
    if options.view is not None:
        return write_view(options, pipeline)
    record = _read(night_file(pipeline))
    if options.text:
        from ..report.night_text import night_lines

        print("\n".join(night_lines(record)))
        return ALL_WELL
    folder = pipeline.build_dir / "report"
    if options.serve is not None:
        from ..report.serving import serve

        serve(folder, options.serve)
    _write(pipeline, record)
    print(folder / "index.html")
    return ALL_WELL


def _write(pipeline, record):
    from ..engine.locks import at_work_in
    from ..stages.snapshot import Snapshot
    from ..stages.write_report import write_report

    with at_work_in(pipeline.build_dir / "work", None, say_waiting):
        write_report(record, pipeline, Snapshot(pipeline).all_probes, wanted=True)


def _read(path):
    try:
        return json.loads(path.read_bytes())
    except (OSError, ValueError) as error:
        raise FileError(f"{path}: no night is on record there; run skykiln bake first") from error
