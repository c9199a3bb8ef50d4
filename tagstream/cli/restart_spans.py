"""The verb `restart-spans`."""

from __future__ import annotations

from tagstream.cli.asking import asking_verb

command = asking_verb(
    "restart-spans",
    "spans begin anew",
    """Let the spans of RUN begin anew, as after a change at the table; the whole run goes on.

    RUN is a run folder, the link to the newest one, or the address of its [control].
    """,
)
