"""Recordings: EDF, BDF and delimited files become signals and digests of their content."""

from __future__ import annotations

from bandcairn.recordings.content import ChannelContent, FileContent, content_digests
from bandcairn.recordings.declared import Declared
from bandcairn.recordings.index import RawIndex, Surveyed
from bandcairn.recordings.raw import RawSignal
from bandcairn.recordings.reading import SUFFIXES, inspect, read
from bandcairn.recordings.surveying import survey

__all__ = [
    "SUFFIXES",
    "ChannelContent",
    "Declared",
    "FileContent",
    "RawIndex",
    "RawSignal",
    "Surveyed",
    "content_digests",
    "inspect",
    "read",
    "survey",
]
