"""The errors whose message alone is shown to the user; anything else is a bug and keeps its traceback.

And how the command ends: its exit statuses.
"""

ALL_WELL, SOURCE_FAILED, WRONG, GATE_BROKEN = 0, 1, 2, 3


class SkykilnError(Exception):
    """A mistake in what the user gave; the message says what, where and what to do."""


class PipelineError(SkykilnError):
    """The pipeline file or the command is wrong. Holds every problem found, one line each."""

    def __init__(self, problems: list[str]):
        self.problems = list(problems)
        super().__init__("\n".join(self.problems))


class FileError(SkykilnError):
    """A source or a packed file can't be read or written. The message names the file."""
