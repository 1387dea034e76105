"""What a guess is: a value, why it was guessed, and how sure that is."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

Confidence = Literal["sure", "likely", "doubtful"]


@dataclass(frozen=True)
class Guess:
    """One guessed value.

    Parameters
    ----------
    key : str
        What was guessed: a canonical column, an element, "crs", "vertical", ...
    value : str
        The file's column, the unit, the system, ...
    because : str
        Why, as the end of the sentence "guessed because ...".
    confidence : "sure" | "likely" | "doubtful"
        Sure: the file states it. Likely: a usual name or value. Doubtful: a person must look.
    """

    key: str
    value: str
    because: str
    confidence: Confidence = "likely"

    @property
    def sentence(self) -> str:
        """The guess and its reason in words."""
        return f"{self.key} = {self.value}: guessed because {self.because} ({self.confidence})"


@dataclass(frozen=True)
class GuessedFile:
    """One file, sheet or layer, and what it seems to be.

    Parameters
    ----------
    path : Path
    kind : "table" | "grid" | "layer"
        Which keys of the study file describe it.
    role : Guess
        Its role in the study ("collars", "assays", "bathymetry", "outline", ...).
    columns, units : tuple of Guess
        Canonical column to the file's; element to unit.
    form : tuple of Guess
        sheet, layer, header_row, delimiter, decimal, encoding, vertical: what applies and is not the default;
        crs_inside: the system that a grid or layer states.
    unused : tuple of str
        Columns that were given no meaning.
    missing : tuple of str
        Canonical columns that the role needs and that were not found.
    hint : Guess, optional
        A projected system that would suit a grid in degrees.
    score : float
        How well the file fits its role, for choosing between two.
    """

    path: Path
    kind: Literal["table", "grid", "layer"]
    role: Guess
    columns: tuple[Guess, ...] = ()
    units: tuple[Guess, ...] = ()
    form: tuple[Guess, ...] = ()
    unused: tuple[str, ...] = ()
    missing: tuple[str, ...] = ()
    hint: Guess | None = None
    score: float = 0.0

    @property
    def column_map(self) -> dict[str, str]:
        """Canonical column or element to the file's column, as the study file writes it."""
        return {guess.key: guess.value for guess in self.columns}

    @property
    def unit_map(self) -> dict[str, str]:
        """Element to unit."""
        return {guess.key: guess.value for guess in self.units}

    @property
    def form_map(self) -> dict[str, str]:
        """Sheet, layer, delimiter and so on, where they are not the default."""
        return {guess.key: guess.value for guess in self.form}


@dataclass(frozen=True)
class GuessedStudy:
    """What a set of files seems to be.

    Parameters
    ----------
    files : tuple of GuessedFile
        At most one a role, in the order of the study file.
    crs : Guess or None
        Projected system of the study; None where no file states one.
    elements : tuple of str
        Elements of the assays.
    others : tuple of (Path, str)
        Files that were given no role, each with the reason.
    """

    files: tuple[GuessedFile, ...] = ()
    crs: Guess | None = None
    elements: tuple[str, ...] = ()
    others: tuple[tuple[Path, str], ...] = field(default_factory=tuple)

    def by_role(self) -> dict[str, GuessedFile]:
        """Files by their role."""
        return {file.role.value: file for file in self.files}

    def sentences(self) -> list[str]:
        """Everything that was guessed, one sentence each, the doubtful ones first within a file."""
        out = [self.crs.sentence] if self.crs else []
        rank = {"doubtful": 0, "likely": 1, "sure": 2}
        for file in self.files:
            guesses = sorted(
                (*file.columns, *file.units, *file.form), key=lambda guess: rank[guess.confidence]
            )
            out.append(f"{file.path.name}: {file.role.sentence}")
            out += [f"{file.path.name}: {guess.sentence}" for guess in guesses]
            out += [
                f"{file.path.name}: nothing was found for {name}, which {file.role.value} need"
                for name in file.missing
            ]
        return out + [f"{path.name}: {why}" for path, why in self.others]
