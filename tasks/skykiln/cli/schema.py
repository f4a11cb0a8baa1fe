"""skykiln schema"""

import json

from ..errors import ALL_WELL
from .arguments import add_command


def add_to(commands):
    add_command(commands, "schema", run, "print the JSON Schema of pipeline.yaml", pipeline=False)


def run(options):
    from ..config import pipeline_schema

    print(json.dumps(pipeline_schema(), indent=1, ensure_ascii=False))
    return ALL_WELL
