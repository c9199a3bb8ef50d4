"""One error class per cause, each with the exit code that tells a supervisor the truth.

Every message names the file, key or record, what was found and what would be right.
"""

from __future__ import annotations


class TagstreamError(Exception):
    """A failure that a person can act on; the command line prints its text alone."""

    exit_code = 1


class SettingsError(TagstreamError):
    """The settings or the arguments are wrong. `problems` holds one sentence each."""

    exit_code = 2

    def __init__(self, problems: list[str]) -> None:
        self.problems = problems
        super().__init__("\n".join(problems))


class InputError(TagstreamError):
    """An input is unreadable or broken; what was good before it has been delivered."""

    exit_code = 3


class ResultsError(TagstreamError):
    """Results cannot be written or read."""

    exit_code = 1


class RunBusyError(TagstreamError):
    """Another process writes this run."""

    exit_code = 4


class ControlError(TagstreamError):
    """A run did not answer a request, or refused it."""

    exit_code = 1
