"""The folder of results: whole or untouched, whatever happens."""

from __future__ import annotations

import contextlib
import ctypes
import os
import shutil
import sys
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

_AT_FDCWD = -100
_RENAME_EXCHANGE = 2


class NotResultsError(ValueError):
    """The output folder holds something that is not a result, and is left alone."""


class ResultFolder:
    """A staging folder that takes the place of the last results only when it is whole.

    Use as a context: inside it, write to ``staging``; call :meth:`publish` when all is written. Leaving the context
    without that removes the staging folder and leaves the last results as they were.
    """

    def __init__(self, out: str | Path) -> None:
        self.out = Path(out).absolute()
        self.staging = self.out.parent / f".{self.out.name}.unfinished-{os.getpid()}"
        self.previous = self.out.parent / f".{self.out.name}.previous"

    def __enter__(self) -> ResultFolder:
        self.out.parent.mkdir(parents=True, exist_ok=True)
        recover(self.out)
        if self.out.is_file() or (self.out.is_dir() and any(self.out.iterdir()) and not is_results(self.out)):
            raise NotResultsError(f"{self.out} is not empty and holds no results of this tool")
        self._sweep()
        self.staging.mkdir()
        return self

    def __exit__(self, *_: object) -> None:
        shutil.rmtree(self.staging, ignore_errors=True)

    def publish(self) -> None:
        """Put the staging folder in the place of the last results."""
        _sync(self.staging)
        if not self.out.exists():
            os.replace(self.staging, self.out)
            return
        if _exchange(self.staging, self.out):
            return
        # Where the system cannot swap two folders at once, `recover` mends a death between the two renames.
        shutil.rmtree(self.previous, ignore_errors=True)
        os.replace(self.out, self.previous)
        os.replace(self.staging, self.out)
        shutil.rmtree(self.previous, ignore_errors=True)

    def _sweep(self) -> None:
        """Remove what runs that died have left behind."""
        for left in self.out.parent.glob(f".{self.out.name}.unfinished-*"):
            number = left.name.rpartition("-")[2]
            if number.isdigit() and (int(number) == os.getpid() or not _alive(int(number))):
                shutil.rmtree(left, ignore_errors=True)


def recover(out: Path) -> None:
    """Restore the last results where a run died in the middle of replacing them."""
    previous = out.parent / f".{out.name}.previous"
    if previous.is_dir() and not out.exists():
        os.replace(previous, out)


def is_results(folder: Path) -> bool:
    """Whether a folder holds results of this tool."""
    return (folder / "manifest.json").is_file()


def has_blocks(folder: Path) -> bool:
    """Whether some results should hold a block model; those of a study without drilling hold a target in its place."""
    return (folder / "block_model.parquet").is_file() or not (folder / "exploration_target.csv").is_file()


def _alive(process: int) -> bool:
    if sys.platform == "win32":
        return True  # signal 0 would end the process there
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return True


def _exchange(one: Path, other: Path) -> bool:
    """Swap two folders in one step where the system can (Linux, renameat2)."""
    if not sys.platform.startswith("linux"):
        return False
    try:
        rename = ctypes.CDLL(None, use_errno=True).renameat2
    except (AttributeError, OSError):
        return False
    return rename(_AT_FDCWD, os.fsencode(one), _AT_FDCWD, os.fsencode(other), _RENAME_EXCHANGE) == 0


def _sync(folder: Path) -> None:
    """Ask the system to put every file of a folder on the disk."""
    files = [path for path in folder.rglob("*") if path.is_file()]
    try:
        with ThreadPoolExecutor(8) as pool:  # a disk waits for many files no longer than for one
            list(pool.map(_sync_file, files))
    except RuntimeError:  # no thread can be started
        for path in files:
            _sync_file(path)


def _sync_file(path: Path) -> None:
    with contextlib.suppress(OSError), path.open("rb") as stream:
        os.fsync(stream.fileno())
