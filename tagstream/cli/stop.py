"""The verb `stop`."""

from __future__ import annotations

from tagstream.cli.asking import asking_verb

command = asking_verb(
    "stop",
    "stops, with everything written",
    """Let the process that writes RUN end it cleanly, with everything written.

    RUN is a run folder, the link to the newest one, or the address of its [control].
    """,
)
