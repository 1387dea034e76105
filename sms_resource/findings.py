"""What a check found, in a form that a person can act on and a program can read."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

if TYPE_CHECKING:
    import pandas as pd

Severity = Literal["error", "warning", "note"]
SEVERITIES: tuple[Severity, ...] = ("error", "warning", "note")


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that a check found.

    Parameters
    ----------
    severity : "error" | "warning" | "note"
        An error stops a run; a warning is printed in the report; a note informs.
    code : str
        Stable name of the kind of finding, in kebab case, such as ``interval-overlap``.
    message : str
        What is wrong, with the figures.
    remedy : str
        What to do about it.
    file, row, column : str, int, str, optional
        Where it is. ``row`` is the row that a person sees in the file: the header is row 1.
    """

    severity: Severity
    code: str
    message: str
    remedy: str = ""
    file: str | None = None
    row: int | None = None
    column: str | None = None

    @property
    def where(self) -> str:
        """File, row and column as one phrase; empty where the finding has no place."""
        parts = [self.file or ""]
        if self.row is not None:
            parts.append(f"row {self.row}")
        if self.column:
            parts.append(f"column {self.column}")
        return ", ".join(part for part in parts if part)


class Findings:
    """A list of findings that knows how to sort, count and show itself."""

    def __init__(self, items: Iterable[Finding] = ()) -> None:
        self._items: list[Finding] = list(items)

    def add(
        self,
        severity: Severity,
        code: str,
        message: str,
        remedy: str = "",
        *,
        file: str | None = None,
        row: int | None = None,
        column: str | None = None,
    ) -> None:
        """Append one finding; ``row`` may be any integer-like or missing number."""
        if row is not None:
            row = None if isinstance(row, float) and math.isnan(row) else int(row)
        self._items.append(Finding(severity, code, message, remedy, file, row, column))

    def error(self, code: str, message: str, remedy: str = "", **where: Any) -> None:
        """Append an error: the run stops."""
        self.add("error", code, message, remedy, **where)

    def warning(self, code: str, message: str, remedy: str = "", **where: Any) -> None:
        """Append a warning: the run goes on and the report prints it."""
        self.add("warning", code, message, remedy, **where)

    def note(self, code: str, message: str, remedy: str = "", **where: Any) -> None:
        """Append a note."""
        self.add("note", code, message, remedy, **where)

    def extend(self, others: Iterable[Finding]) -> None:
        """Append all of ``others``."""
        self._items.extend(others)

    def of(self, severity: Severity) -> list[Finding]:
        """Findings of one severity."""
        return [item for item in self._items if item.severity == severity]

    @property
    def errors(self) -> list[Finding]:
        """The errors alone."""
        return self.of("error")

    @property
    def has_errors(self) -> bool:
        """Whether any finding is an error."""
        return any(item.severity == "error" for item in self._items)

    def counts(self) -> dict[str, int]:
        """How many findings there are of each severity."""
        return {severity: len(self.of(severity)) for severity in SEVERITIES}

    def to_records(self) -> list[dict[str, Any]]:
        """One dictionary a finding, ready for JSON."""
        return [asdict(item) for item in self._items]

    def to_frame(self) -> pd.DataFrame:
        """One row a finding."""
        import pandas as pd

        columns = ["severity", "code", "message", "remedy", "file", "row", "column"]
        return pd.DataFrame(self.to_records(), columns=columns)

    def __iter__(self) -> Iterator[Finding]:
        return iter(self._items)

    def __len__(self) -> int:
        return len(self._items)

    def __getitem__(self, index: int) -> Finding:
        return self._items[index]

    def __repr__(self) -> str:
        counts = self.counts()
        return f"Findings({counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes)"
