"""Recordings: tags as decoded, in arrival order, with the intervals they came in.

A shared module: outputs write recordings, feeds read them. It knows neither feeds nor what tags
mean; it has no threads.
"""

from __future__ import annotations

from tagstream.recording.header import RecordingHeader
from tagstream.recording.layout import Mark, RecordedPiece
from tagstream.recording.reader import RecordingReader
from tagstream.recording.writer import RecordingWriter

__all__ = ["Mark", "RecordedPiece", "RecordingHeader", "RecordingReader", "RecordingWriter"]
