"""Codes of the findings of this room, each with what it means. They are stable: programs may rely on them."""

from __future__ import annotations

CODES: dict[str, str] = {}
