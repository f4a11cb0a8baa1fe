"""The command line: one module per command, each with `add_to(commands)` for its options and what it runs.

What a command needs of the rest is imported when it runs, so that --help is quick.
"""

import argparse
import sys

from ..errors import ALL_WELL, SOURCE_FAILED, WRONG, PipelineError, SkykilnError
from . import audit, bake, inspect, join, noise, plan, prune, report, schema, why
from .arguments import with_vectors_joined
from .telling import speak_to_nobody

COMMANDS = (bake, plan, why, audit, noise, report, join, prune, inspect, schema)  # in the order of --help


def main(arguments=None) -> int:
    """Run a command. Returns: the exit status."""
    parser = _parser()
    options = parser.parse_args(with_vectors_joined(sys.argv[1:] if arguments is None else arguments))
    try:
        status = options.run(options)
        sys.stdout.flush()  # here, where a reader who has gone is no error
        return status
    except PipelineError as error:
        print(error, file=sys.stderr)
        return WRONG
    except SkykilnError as error:
        print(error, file=sys.stderr)
        return SOURCE_FAILED
    except KeyboardInterrupt:
        print("stopped; what is done is kept, bake again to go on", file=sys.stderr)
        return 130
    except BrokenPipeError:
        speak_to_nobody()
        return ALL_WELL


def _parser():
    parser = argparse.ArgumentParser(
        prog="skykiln",
        description="Bakes HDR skies and light probes into filtered cube maps for image-based lighting.",
    )
    parser.add_argument("--version", action=_Version, help="show the version and end")
    commands = parser.add_subparsers(required=True, metavar="COMMAND")
    for command in COMMANDS:
        command.add_to(commands)
    return parser


class _Version(argparse.Action):
    """Looks the version up when it is asked for, not at every start."""

    def __init__(self, option_strings, dest, help):
        super().__init__(option_strings, argparse.SUPPRESS, nargs=0, help=help)

    def __call__(self, parser, namespace, values, option_string=None):
        from ..engine.release import release

        print(f"skykiln {release()}")
        parser.exit()
