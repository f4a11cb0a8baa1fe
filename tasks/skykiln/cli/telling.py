"""What several commands tell: a wait, and nothing to a reader who has gone."""

import os
import sys


def say_waiting():
    print("another bake of this folder is at work; waiting until it ends", file=sys.stderr, flush=True)


def speak_to_nobody():
    """Whoever read the output has gone: let Python's last flush go nowhere."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
