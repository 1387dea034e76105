"""How the commands speak: lines of progress, findings, guesses and the table of tonnes."""

from __future__ import annotations

import json
import os
import signal
import sys
from typing import Any


def print_json(content: Any) -> None:
    """Print JSON and nothing else."""
    json.dump(content, sys.stdout, indent=1, ensure_ascii=False)
    sys.stdout.write("\n")


def console_of(stderr: bool = False) -> Any:
    """A console as wide as the terminal; 110 characters where nobody watches."""
    from rich.console import Console

    class Patient(Console):
        """A console that falls silent where its reader has gone; the work goes on."""

        def on_broken_pipe(self) -> None:
            """Print nothing any more."""
            self.quiet = True
            os.dup2(os.open(os.devnull, os.O_WRONLY), self.file.fileno())

    return Patient(stderr=stderr, soft_wrap=False, width=None if sys.stdout.isatty() else 110)


class Stoppable:
    """Progress that stops the run once it is asked to, even where a library has swallowed the exception."""

    def __init__(self, inner: Any) -> None:
        self.inner = inner
        self.asked = False
        self._before = signal.signal(signal.SIGINT, self._ask)

    def close(self) -> None:
        """Give the signal back."""
        signal.signal(signal.SIGINT, self._before)

    def _ask(self, *_: Any) -> None:
        self.asked = True
        raise KeyboardInterrupt

    def started(self, name: str, label: str) -> None:
        """Hand on, or stop."""
        self._look()
        self.inner.started(name, label)

    def finished(self, name: str, seconds: float, detail: str, from_cache: bool) -> None:
        """Hand on, or stop; the last stage is told before the results take their place."""
        self._look()
        self.inner.finished(name, seconds, detail, from_cache)

    def _look(self) -> None:
        if self.asked:
            raise KeyboardInterrupt


class Lines:
    """One line a stage: what it did, and how long it took."""

    def __init__(self, console: Any) -> None:
        self.console = console
        self.status: Any = None

    def started(self, name: str, label: str) -> None:
        """Show what is under way, where a person watches."""
        if self.console.is_terminal:
            self.status = self.console.status(f"{label} …")
            self.status.start()

    def finished(self, name: str, seconds: float, detail: str, from_cache: bool) -> None:
        """Print the line of the stage."""
        if self.status is not None:
            self.status.stop()
            self.status = None
        kept = " (kept from before)" if from_cache else ""
        self.console.print(f"{name:<11}{seconds:7.2f} s  {detail}{kept}", highlight=False, markup=False)


_STYLES = {"error": "bold red", "warning": "yellow", "note": "dim"}


def print_findings(console: Any, findings: Any, quiet: bool) -> None:
    """Findings by kind; many of one kind are folded after the first few, and counted."""
    from rich.text import Text

    most = 8
    seen: dict[tuple[str, str, str | None], int] = {}
    for severity in ("error",) if quiet else ("error", "warning", "note"):
        for item in findings.of(severity):
            kind = (severity, item.code, item.file)
            seen[kind] = seen.get(kind, 0) + 1
            if seen[kind] > most:
                continue
            line = Text(f"{severity} ", style=_STYLES[severity])
            line.append(f"[{item.code}] ", style="bold")
            line.append(f"{item.where}: " if item.where else "")
            line.append(item.message)
            if item.remedy:
                line.append(f"  -> {item.remedy}", style="cyan")
            console.print(line, highlight=False)
    for (severity, code, file), count in seen.items():
        if count > most:
            rest = f"{severity} [{code}] {file or ''}: and {count - most} more; --json lists every one"
            console.print(rest, highlight=False, markup=False, style=_STYLES[severity])


def print_guesses(console: Any, guesses: Any) -> None:
    """What ``new`` guessed, and why."""
    from rich.table import Table

    table = Table(title="What was guessed, and why", title_justify="left")
    for name in ("file", "what", "guess", "because"):
        table.add_column(name, overflow="fold")
    for guess in guesses:
        table.add_row(guess.file, guess.what, guess.value, guess.because)
    console.print(table)


def print_summary(console: Any, result: Any) -> None:
    """The table of tonnes, the count of findings, and where the report is."""
    from rich.table import Table

    counts = result.findings.counts()
    if result.out is None:
        console.print(
            f"\nNot run: {counts['error']} errors. Earlier results, if any, are as they were.",
            style="bold red",
        )
        return
    summary = result.summary
    table = Table(title=summary.title, title_justify="left", caption=summary.caption, caption_justify="left")
    for number, name in enumerate(summary.columns):
        table.add_column(name, justify="left" if number == 0 else "right")
    for row in summary.rows:
        table.add_row(*row)
    console.print()
    console.print(table)
    console.print(
        f"Findings: {counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes "
        f"(in {result.out / 'findings.json'})",
        highlight=False, markup=False, soft_wrap=True,
    )  # fmt: skip
    console.print(f"Report:   {result.out / 'report.html'}", highlight=False, markup=False, soft_wrap=True)
