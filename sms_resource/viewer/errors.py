"""Why a scene cannot be shown, in words for the user."""

from __future__ import annotations

from pathlib import Path


class ViewerUnavailable(RuntimeError):
    """The machine cannot draw: no display, or no OpenGL library.

    Parameters
    ----------
    reason, remedy : str
        What is missing, and what to do.
    """

    def __init__(self, reason: str, remedy: str) -> None:
        self.reason, self.remedy = reason, remedy
        super().__init__(f"The scene cannot be drawn: {reason}. {remedy}")


class ResultsError(ValueError):
    """A file of the results is missing or broken.

    Parameters
    ----------
    file : path
    problem, remedy : str
        What is wrong with it, and what to do.
    """

    def __init__(
        self, file: str | Path, problem: str, remedy: str = "Run the study again into this folder."
    ) -> None:
        self.file = Path(file)
        super().__init__(f"{file}: {problem}. {remedy}")
