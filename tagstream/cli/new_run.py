"""The verb `new-run`."""

from __future__ import annotations

from tagstream.cli.asking import asking_verb

command = asking_verb(
    "new-run",
    "ends, and the next run begins",
    """Let the process that writes RUN end it, and go on in a new run folder.

    RUN is a run folder, the link to the newest one, or the address of its [control].
    """,
)
