"""The segments of a recording in a folder: their names, the next one, which may go."""

from __future__ import annotations

from pathlib import Path

PATTERN = "recording-[0-9][0-9][0-9][0-9].h5"


def segment_path(folder: Path, number: int) -> Path:
    """The final name of a segment."""
    return folder / f"recording-{number:04d}.h5"


def next_number(folder: Path) -> int:
    """The number after the largest one, of closed segments and of those left by a crash."""
    found = [*folder.glob(PATTERN), *folder.glob(f"{PATTERN}.part")]
    return max((int(path.name[10:14]) for path in found), default=0) + 1


def drop_oldest(folder: Path, keep_bytes: int) -> list[Path]:
    """Remove closed segments, the oldest first, until the rest fits; the newest always stays."""
    segments = sorted(folder.glob(PATTERN))
    sizes = [path.stat().st_size for path in segments]
    gone: list[Path] = []
    while len(segments) - len(gone) > 1 and sum(sizes[len(gone) :]) > keep_bytes:
        path = segments[len(gone)]
        path.unlink()
        gone.append(path)
    return gone
