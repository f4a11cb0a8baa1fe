"""skykiln plan"""

import json

from ..errors import ALL_WELL
from .arguments import add_command, add_names, snapshot_of


def add_to(commands):
    plan = add_command(commands, "plan", run, "say which stages would run, and why")
    add_names(plan, "*")
    plan.add_argument("--json", action="store_true", help="every stage and its state, as JSON")


def run(options):
    from ..engine.chains import chain_of, glance_at
    from ..engine.wording import plan_lines, plan_record

    targets = snapshot_of(options).targets
    if options.json:
        chains = [chain_of(target) for target in targets]
        print(json.dumps({"chains": plan_record(chains)}, indent=1, ensure_ascii=False))
    else:
        print("\n".join(plan_lines([glance_at(target) for target in targets])))
    return ALL_WELL
