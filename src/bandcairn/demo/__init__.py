"""The demo study: invented people on watch at a harbour, from published signal models, its truth known."""

from __future__ import annotations

from bandcairn.demo.write import write_demo

__all__ = ["write_demo"]
