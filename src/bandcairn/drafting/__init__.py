"""Draft a study from the recordings of a folder: what they say is taken over, what is guessed is marked."""

from __future__ import annotations

from bandcairn.drafting.draft import Draft, draft_study
from bandcairn.drafting.writing import refuse_existing, write_draft

__all__ = ["Draft", "draft_study", "refuse_existing", "write_draft"]
