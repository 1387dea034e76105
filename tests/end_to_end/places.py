"""Folders of results looked at from outside."""

from __future__ import annotations

import hashlib
from pathlib import Path


def tree(folder: Path) -> dict[str, tuple[str, int]]:
    """Digest and time of change of every file of a folder, hidden ones too."""
    return {
        path.relative_to(folder).as_posix(): (
            hashlib.sha256(path.read_bytes()).hexdigest(), path.stat().st_mtime_ns
        )
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }  # fmt: skip


def contents(folder: Path, *, without: tuple[str, ...] = ("manifest.json",)) -> dict[str, str]:
    """Digest of every file of a folder but those that tell times."""
    return {
        name: digest
        for name, (digest, _) in tree(folder).items()
        if name not in without and not name.startswith("measured/")
    }
