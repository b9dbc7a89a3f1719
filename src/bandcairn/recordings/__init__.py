"""Recordings: EDF, BDF and delimited files become signals and digests of their content."""

from __future__ import annotations

from bandcairn.recordings.declared import Declared
from bandcairn.recordings.raw import RawSignal
from bandcairn.recordings.reading import SUFFIXES, inspect, read

__all__ = ["SUFFIXES", "Declared", "RawSignal", "inspect", "read"]
