"""Which parts of a report's data a figure is made from, and whether they have changed.

A figure is drawn from a :class:`Reading`, which hands on the data and writes down what was looked at. As long as all of
that is the same as it was, so is the figure, and the one that was drawn before can be taken.
"""

from __future__ import annotations

import dataclasses
import hashlib
from collections.abc import Mapping
from types import FunctionType, MethodType
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd

if TYPE_CHECKING:
    from sms_resource.reporting.data import ReportData

Path = tuple[str, ...]


class UnknownContent(TypeError):
    """A value whose content cannot be told from that of another; what is made from it is made anew."""


class Reading:
    """The data of a report, or a part of them, with the names of the fields that were read.

    Parameters
    ----------
    part : dataclass
        ``ReportData``, or one of its parts.
    seen : dict, optional
        Fields read so far, in order, shared by all parts.
    path : tuple of str
        Where the part stands in the data.
    """

    def __init__(self, part: Any, seen: dict[Path, None] | None = None, path: Path = ()) -> None:
        self._part = part
        self._seen: dict[Path, None] = {} if seen is None else seen
        self._path = path

    def __getattr__(self, name: str) -> Any:
        known = getattr(type(self._part), name, None)
        if isinstance(known, property) and known.fget is not None:
            return known.fget(self)  # so that what it reads is written down too
        if isinstance(known, FunctionType):
            return MethodType(known, self)  # for the same reason
        value = getattr(self._part, name)
        if is_part(value):
            return Reading(value, self._seen, (*self._path, name))
        self._seen[(*self._path, name)] = None
        return value

    @property
    def paths_read(self) -> tuple[Path, ...]:
        """Fields that were read, in the order of reading."""
        return tuple(self._seen)


def is_part(value: Any) -> bool:
    """Whether a value is a group of fields of the report's data, and not a leaf."""
    return dataclasses.is_dataclass(value) and type(value).__module__.startswith(
        "sms_resource.reporting.data"
    )


class Contents:
    """Digests of the fields of one report's data, each made once."""

    def __init__(self, data: ReportData) -> None:
        self._data = data
        self._known: dict[Path, bytes | None] = {}

    def digest(self, paths: tuple[Path, ...]) -> str | None:
        """SHA-256 of the names and contents of some fields; None where one of them cannot be told from others."""
        whole = hashlib.sha256()
        for path in paths:
            if path not in self._known:
                self._known[path] = self._one(path)
            found = self._known[path]
            if found is None:
                return None
            whole.update(repr(path).encode() + found)
        return whole.hexdigest()

    def _one(self, path: Path) -> bytes | None:
        value: Any = self._data
        try:
            for name in path:
                value = getattr(value, name)
            return content(value)
        except (UnknownContent, AttributeError):
            return None


def content(value: Any) -> bytes:
    """SHA-256 of what a value holds: numbers to the last bit, names, order, types.

    Raises
    ------
    UnknownContent
        If the value holds something without a content of its own, such as a function.

    Examples
    --------
    >>> content({"cu_pct": np.array([1.0, np.nan])}) == content({"cu_pct": np.array([1.0, np.nan])})
    True
    """
    digest = hashlib.sha256()
    _add(digest, value)
    return digest.digest()


def _add(digest: Any, value: Any) -> None:
    digest.update(f"<{type(value).__module__}.{type(value).__qualname__}>".encode())
    if value is None or isinstance(value, bool | int | float | complex | str | np.generic):
        digest.update(repr(value).encode())
    elif isinstance(value, bytes):
        digest.update(value)
    elif isinstance(value, np.ndarray):
        _add_array(digest, value)
    elif isinstance(value, pd.DataFrame):
        _add(digest, repr(getattr(value, "crs", None)))
        _add(digest, value.index)
        for name, column in value.items():
            _add(digest, name)
            _add(digest, column.array)
    elif isinstance(value, pd.Series | pd.Index):
        _add(digest, value.name)
        _add(digest, value.array)
    elif isinstance(value, pd.api.extensions.ExtensionArray):
        _add_extension(digest, value)
    elif isinstance(value, Mapping):
        for name, item in value.items():
            _add(digest, name)
            _add(digest, item)
    elif isinstance(value, list | tuple):
        digest.update(str(len(value)).encode())
        for item in value:
            _add(digest, item)
    elif isinstance(value, set | frozenset):
        for item in sorted(content(item) for item in value):
            digest.update(item)
    elif dataclasses.is_dataclass(value) and not isinstance(value, type):
        for field in dataclasses.fields(value):
            digest.update(field.name.encode())
            _add(digest, getattr(value, field.name))
    elif hasattr(value, "wkb"):
        digest.update(value.wkb)
    elif hasattr(value, "isoformat"):
        digest.update(value.isoformat().encode())
    elif getattr(type(value), "__module__", "").startswith("sms_resource.") and hasattr(value, "__dict__"):
        _add(digest, vars(value))
    else:
        raise UnknownContent(f"{type(value).__qualname__} has no content that can be compared")


def _add_array(digest: Any, array: np.ndarray) -> None:
    digest.update(f"{array.dtype.str}{array.shape}".encode())
    if not array.dtype.hasobject:
        digest.update(np.ascontiguousarray(array).view(np.uint8).data if array.size else b"")
        return
    flat = array.ravel()
    if pd.api.types.infer_dtype(flat, skipna=False) == "string":
        codes, flat = pd.factorize(flat)  # long columns of few names
        _add_array(digest, codes)
    for item in flat:
        _add(digest, item)


def _add_extension(digest: Any, array: Any) -> None:
    name = str(array.dtype)
    if name == "geometry":
        from shapely import to_wkb

        for item in to_wkb(np.asarray(array)):
            _add(digest, item)
        return
    _add_array(digest, np.asarray(array))
