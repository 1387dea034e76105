"""A content-addressed store of stage results on disk, safe against crashes and shared by processes.

An entry is one file named by the SHA-256 of everything that made it. It is written beside its place, flushed to
disk and moved there in one step, so a reader sees the whole entry or none. Each read checks the entry against
its own digest; a broken entry counts as absent and is removed. Entries are pickles, so a cache folder must be
one that only its owner can write to; it is created so.
"""

from __future__ import annotations

import contextlib
import dataclasses
import enum
import hashlib
import json
import os
import pickle
import sys
import tempfile
import time
from collections.abc import Callable, Iterator, Mapping, Set
from pathlib import Path, PurePath
from typing import IO, Any, TypeVar

import numpy as np

T = TypeVar("T")

FOLDER_VARIABLE = "SMS_RESOURCE_CACHE"
LIMIT_VARIABLE = "SMS_RESOURCE_CACHE_GB"
DEFAULT_LIMIT_BYTES = 2 * 10**9
_MAGIC = b"smsrcch1"
_TRAILER = 32 + 8 + len(_MAGIC)  # digest, length of the pickle, magic
_STALE_SECONDS = 3600.0
_SUFFIX = ".stage"
_TEMPORARY = ".part"
# What loading a pickle of an older or foreign version may raise.
_UNREADABLE = (
    pickle.UnpicklingError, AttributeError, ImportError, IndexError, KeyError, TypeError, ValueError,
    EOFError, MemoryError, RecursionError,
)  # fmt: skip


class CacheKeyError(TypeError):
    """A key holds something that has no canonical form."""


def cache_key(parts: Any) -> str:
    """SHA-256, in hexadecimal, of the canonical JSON of ``parts``.

    Mappings (in any order), sequences, sets, text, numbers, None, paths, enumerations, dates, dataclasses, bytes
    and NumPy arrays have a canonical form. 1, 1.0 and True are three different things; NaN equals itself.

    Raises
    ------
    CacheKeyError
        If a part has no canonical form.

    Examples
    --------
    >>> cache_key({"a": 1, "b": 2}) == cache_key({"b": 2, "a": 1})
    True
    """
    text = json.dumps(_canonical(parts), sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def user_cache_folder() -> Path:
    """Folder for caches of this user: the variable SMS_RESOURCE_CACHE, or the custom of the platform."""
    given = os.environ.get(FOLDER_VARIABLE)
    if given:
        return Path(given).expanduser()
    home = Path.home()
    if sys.platform == "win32":
        base = Path(os.environ.get("LOCALAPPDATA") or home / "AppData" / "Local")
    elif sys.platform == "darwin":
        base = home / "Library" / "Caches"
    else:
        base = Path(os.environ.get("XDG_CACHE_HOME") or home / ".cache")
    return base / "sms_resource"


def limit_in_bytes() -> int:
    """Most that a cache may hold: gigabytes (1e9 bytes) in the variable SMS_RESOURCE_CACHE_GB, or 2 GB.

    A value that is no number of zero or more counts as not given; :func:`limit_fault` says so.
    """
    given = os.environ.get(LIMIT_VARIABLE, "").strip()
    if not given or limit_fault():
        return DEFAULT_LIMIT_BYTES
    return int(float(given) * 1e9)


def limit_fault() -> str:
    """What is wrong with the variable SMS_RESOURCE_CACHE_GB; empty where nothing is."""
    given = os.environ.get(LIMIT_VARIABLE, "").strip()
    try:
        sound = not given or 0.0 <= float(given) < float("inf")
    except ValueError:
        sound = False
    return "" if sound else f"{LIMIT_VARIABLE} is {given!r}; a number of gigabytes, zero or more, was wanted"


class StageCache:
    """Results of stages on disk, found again by their key.

    Parameters
    ----------
    folder : path, optional
        Where entries live; :func:`user_cache_folder` if not given.
    limit_bytes : int, optional
        Entries used least recently are removed once all together exceed this; :func:`limit_in_bytes` if not given.

    Notes
    -----
    Any number of processes may share a folder. A cache never makes a run fail: if the disk is full or the folder
    cannot be written, :meth:`put` returns False and the result is simply not kept.
    """

    def __init__(self, folder: str | os.PathLike[str] | None = None, *, limit_bytes: int | None = None):
        if limit_bytes is None:
            limit_bytes = limit_in_bytes()
        if limit_bytes < 0:
            raise ValueError(f"limit_bytes is {limit_bytes}; zero or more was wanted")
        self.folder = Path(folder) if folder is not None else user_cache_folder()
        self.limit_bytes = int(limit_bytes)

    def __repr__(self) -> str:
        return f"StageCache({str(self.folder)!r}, limit_bytes={self.limit_bytes})"

    def path(self, key: str) -> Path:
        """File of an entry, whether or not it exists."""
        if len(key) != 64 or not set(key) <= set("0123456789abcdef"):
            raise ValueError(f"key {key!r} is not a SHA-256 in hexadecimal")
        return self.folder / key[:2] / (key + _SUFFIX)

    def __contains__(self, key: str) -> bool:
        """Whether an entry's file is there; only :meth:`get` checks that it is whole."""
        return self.path(key).is_file()

    def get(self, key: str, default: T | None = None) -> Any | T | None:
        """Value of an entry, or ``default`` where it is absent, broken or unreadable."""
        path = self.path(key)
        try:
            with open(path, "rb") as file:
                body = file.read()
                stamp = os.fstat(file.fileno())
        except OSError:
            return default
        payload = _checked(body)
        if payload is not None:
            try:
                value = pickle.loads(payload)
            except _UNREADABLE:
                payload = None
        if payload is None:
            self._remove_if_same(path, stamp)
            return default
        with contextlib.suppress(OSError):
            os.utime(path)  # use is what eviction goes by
        return value

    def put(self, key: str, value: Any) -> bool:
        """Keep a value; True if it is on disk when this returns."""
        path = self.path(key)
        temporary = None
        try:
            self._make(path.parent)
            handle, temporary = tempfile.mkstemp(suffix=_TEMPORARY, prefix=key[:8] + "-", dir=path.parent)
            with os.fdopen(handle, "wb") as file:
                _write(file, value)
                file.flush()
                os.fsync(file.fileno())
            os.replace(temporary, path)
            temporary = None
            _sync_folder(path.parent)
        except OSError:
            return False
        finally:
            if temporary is not None:
                with contextlib.suppress(OSError):
                    os.unlink(temporary)
        self.evict()
        return path.is_file()

    def get_or_compute(self, key: str, compute: Callable[[], T]) -> tuple[T, bool]:
        """Value of an entry, computed and kept if absent, and whether it was found."""
        missing = object()
        found = self.get(key, missing)
        if found is not missing:
            return found, True  # type: ignore[return-value]
        value = compute()
        self.put(key, value)
        return value, False

    def evict(self) -> int:
        """Remove what was used least recently until the limit holds, and old leftovers of killed writers.

        Returns
        -------
        int
            Number of entries removed.
        """
        entries = []
        now = time.time()
        for path in self._files():
            try:
                stat = path.stat()
            except OSError:
                continue  # another process was faster
            if path.suffix == _TEMPORARY:
                if now - stat.st_mtime > _STALE_SECONDS:
                    with contextlib.suppress(OSError):
                        path.unlink()
                continue
            entries.append((stat.st_mtime_ns, stat.st_size, path))
        total = sum(size for _, size, _ in entries)
        removed = 0
        for _, size, path in sorted(entries, key=lambda entry: (entry[0], entry[2].name)):
            if total <= self.limit_bytes:
                break
            with contextlib.suppress(OSError):
                path.unlink()
                removed += 1
            total -= size
        return removed

    def clear(self) -> int:
        """Remove every entry and every leftover of this cache; other files in the folder stay.

        Returns
        -------
        int
            Number of entries removed.
        """
        removed = 0
        for path in list(self._files()):
            with contextlib.suppress(OSError):
                path.unlink()
                removed += path.suffix == _SUFFIX
        return removed

    def size(self) -> tuple[int, int]:
        """Number of entries and their bytes."""
        count = total = 0
        for path in self._files():
            if path.suffix == _SUFFIX:
                with contextlib.suppress(OSError):
                    total += path.stat().st_size
                    count += 1
        return count, total

    def _files(self) -> Iterator[Path]:
        for suffix in (_SUFFIX, _TEMPORARY):
            yield from self.folder.glob(f"[0-9a-f][0-9a-f]/*{suffix}")

    def _make(self, folder: Path) -> None:
        if not self.folder.is_dir():
            self.folder.mkdir(mode=0o700, parents=True, exist_ok=True)
        folder.mkdir(mode=0o700, exist_ok=True)

    def _remove_if_same(self, path: Path, stamp: os.stat_result) -> None:
        """Remove a broken entry, unless another process has already put a whole one in its place."""
        with contextlib.suppress(OSError):
            now = path.stat()
            if (now.st_ino, now.st_mtime_ns, now.st_size) == (stamp.st_ino, stamp.st_mtime_ns, stamp.st_size):
                path.unlink()


class _Digesting:
    """A file that digests what is written to it, so that a large value is never held twice."""

    def __init__(self, file: IO[bytes]) -> None:
        self.file = file
        self.digest = hashlib.sha256()
        self.length = 0

    def write(self, data: Any) -> int:
        view = memoryview(data)
        self.digest.update(view)
        self.length += view.nbytes
        self.file.write(view)
        return view.nbytes


def _write(file: IO[bytes], value: Any) -> None:
    sink = _Digesting(file)
    pickle.Pickler(sink, protocol=5).dump(value)
    file.write(sink.digest.digest() + sink.length.to_bytes(8, "big") + _MAGIC)


def _checked(body: bytes) -> memoryview | None:
    """The pickle inside an entry, or None where the entry is not whole."""
    if len(body) < _TRAILER or body[-len(_MAGIC) :] != _MAGIC:
        return None
    payload, trailer = memoryview(body)[:-_TRAILER], body[-_TRAILER:]
    if int.from_bytes(trailer[32:40], "big") != len(payload):
        return None
    return payload if hashlib.sha256(payload).digest() == trailer[:32] else None


def _sync_folder(folder: Path) -> None:
    """Make a rename itself last; only POSIX lets a folder be flushed."""
    if os.name != "posix":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def _canonical(part: Any) -> Any:
    """``part`` as plain JSON in which things that differ never look the same."""
    if part is None or isinstance(part, bool | str):
        if isinstance(part, enum.Enum):
            return {"enum": f"{type(part).__qualname__}.{part.name}"}
        return part
    if isinstance(part, enum.Enum):
        return {"enum": f"{type(part).__qualname__}.{part.name}"}
    if isinstance(part, np.bool_):
        return bool(part)
    if isinstance(part, int | np.integer):
        return int(part)
    if isinstance(part, float | np.floating):
        return {"float": float(part).hex() if part == part else "nan"}
    if isinstance(part, bytes | bytearray | memoryview):
        return {"bytes": hashlib.sha256(part).hexdigest()}
    if isinstance(part, np.ndarray):
        return _canonical_array(part)
    if isinstance(part, PurePath):
        return {"path": part.as_posix()}
    if hasattr(part, "isoformat"):
        return {type(part).__name__: part.isoformat()}
    if dataclasses.is_dataclass(part) and not isinstance(part, type):
        fields = {f.name: _canonical(getattr(part, f.name)) for f in dataclasses.fields(part)}
        return {"dataclass": type(part).__qualname__, "fields": fields}
    if isinstance(part, Mapping):
        pairs = [[_canonical(name), _canonical(value)] for name, value in part.items()]
        return {"mapping": sorted(pairs, key=lambda pair: json.dumps(pair[0], sort_keys=True))}
    if isinstance(part, Set):
        return {
            "set": sorted((_canonical(item) for item in part), key=lambda x: json.dumps(x, sort_keys=True))
        }
    if isinstance(part, list | tuple):
        return [_canonical(item) for item in part]
    raise CacheKeyError(f"{type(part).__qualname__} has no canonical form for a cache key")


def _canonical_array(array: np.ndarray) -> Any:
    if array.dtype.hasobject:
        return {"array": [_canonical(item) for item in array.ravel().tolist()], "shape": list(array.shape)}
    data = np.ascontiguousarray(array)
    return {
        "array": hashlib.sha256(data.tobytes()).hexdigest(),
        "dtype": data.dtype.str,
        "shape": list(data.shape),
    }
