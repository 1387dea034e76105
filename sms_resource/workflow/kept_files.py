"""Files that depend on some stages alone, taken from the run before where those stages were not made again."""

from __future__ import annotations

import hashlib
import tempfile
from collections.abc import Callable
from pathlib import Path

from sms_resource.workflow.stage import Outcome, StageCache, code_fingerprint


class KeptFiles:
    """Writes files, or copies of what the same stages led to before.

    Parameters
    ----------
    store : StageCache or None
        Where contents are kept; None writes everything.
    outcome : Outcome
        Of the stages, whose keys name what they made.
    """

    def __init__(self, store: StageCache | None, outcome: Outcome) -> None:
        self._store = store
        self._keys = {record.name: record.key for record in outcome.records}

    def write(self, what: str, folder: Path, stages: tuple[str, ...], make: Callable[[Path], None]) -> None:
        """Put the files of one kind into a folder.

        Parameters
        ----------
        what : str
            Names the kind.
        folder : Path
            Made where it does not exist.
        stages : tuple of str
            Every stage that the files depend on.
        make : callable
            Writes the files into the folder that it is given; it makes no folders in it.
        """
        folder.mkdir(parents=True, exist_ok=True)
        key = self._key(what, stages)
        found = self._store.get(key) if self._store is not None and key else None
        if not isinstance(found, dict):
            with tempfile.TemporaryDirectory() as place:  # others may be writing to the folder
                make(Path(place))
                found = {path.name: path.read_bytes() for path in sorted(Path(place).iterdir())}
            if self._store is not None and key:
                self._store.put(key, found)
        for name, content in found.items():
            (folder / name).write_bytes(content)

    def _key(self, what: str, stages: tuple[str, ...]) -> str:
        keys = [self._keys.get(name, "") for name in stages]
        if not all(keys):
            return ""
        return hashlib.sha256(" ".join(["files", code_fingerprint(), what, *keys]).encode()).hexdigest()
