"""skykiln audit"""

from ..errors import ALL_WELL, GATE_BROKEN
from .arguments import add_command, add_names, positive, seconds, snapshot_of
from .telling import say_waiting


def add_to(commands):
    text = "hold packed files against their sources again, at texels that the night did not look at"
    audit = add_command(commands, "audit", run, text)
    add_names(audit, "+")
    audit.add_argument(
        "--texels", type=positive, default=120, metavar="N", help="texels of each map and look (120)"
    )
    audit.add_argument(
        "--budget", type=seconds, default=0.0, metavar="SECONDS", help="look again and again for so long"
    )


def run(options):
    from ..engine.locks import at_work_in

    snapshot = snapshot_of(options)
    with at_work_in(snapshot.pipeline.build_dir / "work", None, say_waiting):
        passed = [_audited(target, options, len(snapshot.probes)) for target in snapshot.probes]
    if len(passed) > 1:
        print(f"{sum(passed)} of {len(passed)} probes passed")
    return ALL_WELL if all(passed) else GATE_BROKEN


def _audited(target, options, probes):
    """Print one probe's audit. Returns: whether it passed."""
    from ..engine.progress import one_bar
    from ..report.audit_text import audit_lines
    from ..stages.on_demand import AuditOnDemand

    budget = options.budget / probes
    with one_bar(f"auditing {target.owner}", budget or None) as told:
        found = AuditOnDemand(target).look(-(-options.texels // 12), budget, told)
    print("\n".join(audit_lines(found.name, found.what, found.record)), flush=True)
    return found.record["passed"]
