"""What the commands' options share: the commands themselves, names, and values of their own kinds."""

import argparse


def add_command(commands, name, run, text, pipeline=True):
    """A command's parser: `run(options)` returns the exit status; with -f unless pipeline is False."""
    command = commands.add_parser(name, help=text, description=f"{text[0].upper()}{text[1:]}.")
    command.set_defaults(run=run)
    if pipeline:
        command.add_argument(
            "-f", "--file", default="pipeline.yaml", metavar="FILE", help="the pipeline file (pipeline.yaml)"
        )
    return command


def add_names(command, count):
    text = "a probe, or a pattern such as 'concourse/*'"
    command.add_argument("names", nargs=count, metavar="NAME", help=text)


def snapshot_of(options):
    """The snapshot of the probes that -f and the names ask for."""
    from ..config import load_pipeline
    from ..stages.snapshot import Snapshot

    return Snapshot(load_pipeline(options.file), options.names)


def with_vectors_joined(arguments):
    """`--at -1,0,0` as one argument: argparse would take the vector for an option."""
    joined = []
    for argument in arguments:
        if joined and joined[-1] == "--at":
            joined[-1] = f"--at={argument}"
        else:
            joined.append(argument)
    return joined


def direction(text):
    numbers = [float(part) for part in text.split(",")]
    if len(numbers) != 3 or not all(abs(number) < 1e30 for number in numbers) or not any(numbers):
        raise argparse.ArgumentTypeError(f"{text!r} is no vector x,y,z")
    return numbers


def shard(text):
    from ..engine.shards import Shard

    try:
        return Shard.parse(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not K/N, with K from 0 to N - 1") from None


def address(text):
    host, _, port = text.rpartition(":")
    if not host or not port.isdecimal():
        raise argparse.ArgumentTypeError(f"{text!r} is not HOST:PORT")
    return text


def count(text):
    number = int(text)
    if number < 0:
        raise argparse.ArgumentTypeError(f"{number} is less than 0")
    return number


def positive(text):
    number = count(text)
    if number == 0:
        raise argparse.ArgumentTypeError("0 is too few")
    return number


def seconds(text):
    number = float(text)
    if not 0 < number < 1e9:
        raise argparse.ArgumentTypeError(f"{text!r} is no number of seconds above 0")
    return number


def port(text):
    number = count(text)
    if number > 65535:
        raise argparse.ArgumentTypeError(f"{number} is no port; the largest is 65535")
    return number
