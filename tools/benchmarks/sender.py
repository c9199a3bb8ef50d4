"""A sender that costs next to nothing: messages are made before, then sent over and over.

Each round is a session of its own, as of a sender that was restarted.
Usage: sender.py RECORDING ADDRESS ROUNDS TAGS_A_MESSAGE [SERVER_KEY KEYS]
"""

from __future__ import annotations

import json
import sys
import time
import uuid
from pathlib import Path

import numpy as np
import zmq

from tagstream.recording import RecordingReader
from tagstream.security import Sockets
from tagstream.settings.sections import Security


def messages(recording: Path, tags: int) -> list[tuple[int, int, bytes, bytes]]:
    """(begin, end, times, inputs) of each message."""
    found, end = [], 0
    with RecordingReader(recording) as reader:
        pieces = list(reader.pieces())
    times = np.concatenate([piece.times_ps for piece in pieces])
    inputs = np.concatenate([piece.inputs for piece in pieces]).astype("<u2")
    for first in range(0, times.size - tags, tags):
        begin, end = end, int(times[first + tags])
        part = slice(np.searchsorted(times, begin), np.searchsorted(times, end))
        found.append((begin, end, times[part].astype("<i8").tobytes(), inputs[part].tobytes()))
    return found


def main() -> None:
    """Send all rounds; print tags and seconds as JSON."""
    recording, address, rounds, tags, *keys = sys.argv[1:]
    ready = messages(Path(recording), int(tags))
    security = Security(keys=Path(keys[1])) if keys else None
    with Sockets(security) as sockets:
        socket = sockets.open(zmq.PUSH)
        socket.sndhwm = 4
        socket.setsockopt(zmq.IMMEDIATE, 1)
        sockets.connect(socket, address, Path(keys[0]) if keys else None)
        socket.send(b"wake")  # a malformed message: the line stands when it has left
        began, sent = time.monotonic(), 0
        for _ in range(int(rounds)):
            session = str(uuid.uuid4())
            for number, (begin, end, times, inputs) in enumerate(ready):
                count = len(inputs) // 2
                header = {
                    "format": "tagstream-tags",
                    "version": 1,
                    "stream": "bench",
                    "session": session,
                    "sequence": number,
                    "count": count,
                    "tick": "1 ps",
                    "begin": begin,
                    "end": end,
                    "lost": 0,
                }
                frames = [json.dumps(header).encode(), times, inputs]
                socket.send_multipart(frames, copy=False)
                sent += count
        seconds = time.monotonic() - began
        print(json.dumps({"tags": sent, "seconds": seconds, "messages": len(ready)}), flush=True)
        socket.close(10_000)


if __name__ == "__main__":
    main()
