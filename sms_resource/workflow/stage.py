"""What a stage is, and how stages are run one after another."""

from __future__ import annotations

import hashlib
import json
import logging
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from typing import Any, Protocol

from sms_resource.findings import Finding, Findings
from sms_resource.study import Study, StudyConfig
from sms_resource.workflow.extended import lengthened, shortened


class Progress(Protocol):
    """Who is told of the progress of a run."""

    def started(self, name: str, label: str) -> None:
        """A stage begins."""

    def finished(self, name: str, seconds: float, detail: str, from_cache: bool) -> None:
        """A stage has ended."""


class StageStop(Exception):
    """A stage cannot go on; an error among its findings says why."""


class Silent:
    """Progress that nobody sees."""

    def started(self, name: str, label: str) -> None:
        """Say nothing."""

    def finished(self, name: str, seconds: float, detail: str, from_cache: bool) -> None:
        """Say nothing."""


class ConfigView:
    """The sections of a study that a stage has declared; any other is out of its reach.

    The key of a stage in the cache is made from these sections, so a stage that read more than it declared would be
    served stale results.
    """

    def __init__(self, config: StudyConfig, sections: tuple[str, ...]) -> None:
        self._config = config
        self._sections = sections

    def __getattr__(self, name: str) -> Any:
        if name not in self._sections:
            raise AttributeError(f"the stage has not declared that it reads [{name}]")
        section = getattr(self._config, name)
        return one_domain(section) if name == "domains" else section

    def canonical(self) -> dict[str, Any]:
        """The declared sections as plain data."""
        return {
            name: getattr(self._config, name).model_dump(mode="json", exclude={"threads"})
            for name in sorted(self._sections)
        }


def one_domain(domains: Any) -> Any:
    """Domains as the stages see them: with ``layout = "single"`` every sulphide code leads to one domain, "sulphide".

    What the study gives by domain (cuts, models, densities) is for the domains that it names, so none of it holds for
    the one that joins them.
    """
    if domains.layout != "single" or len(domains.sulphide) < 2:
        return domains
    codes = {
        code: "sulphide" if domain in domains.sulphide else domain for code, domain in domains.codes.items()
    }
    return domains.model_copy(update={"codes": codes, "sulphide": ("sulphide",), "thickness_m": {}})


@dataclass
class Context:
    """What a stage is given.

    Attributes
    ----------
    config : ConfigView
        The declared sections of the study.
    done : dict
        Outputs of the stages before, by name.
    findings : Findings
        Where the stage puts what it found.
    study : Study
        The study, for the paths of its files.
    threads : int or None
        Threads of the kernels; results do not depend on it.
    """

    config: Any
    done: dict[str, Any]
    findings: Findings
    study: Study
    threads: int | None
    detail: str = ""


@dataclass(frozen=True)
class Also:
    """Sections and stages that a stage depends on only where a study asks for it.

    Attributes
    ----------
    where : callable
        Takes the whole study, tells whether it does.
    reads, needs : tuple of str
    """

    where: Callable[[StudyConfig], bool]
    reads: tuple[str, ...]
    needs: tuple[str, ...]


@dataclass(frozen=True)
class Stage:
    """One step of a study.

    Attributes
    ----------
    name, label : str
        Name, and what the line of progress says.
    reads : tuple of str
        Sections of the study that the stage depends on.
    needs : tuple of str
        Stages whose outputs it uses.
    work : callable
        Takes a Context, returns the output of the stage (anything that can be pickled).
    reads_files : bool
        Whether the contents of the study's files are part of its key.
    extends : str or None
        Stage to whose frame of blocks this one adds columns; only those are kept.
    also : Also or None
        What it depends on in some studies only.
    """

    name: str
    label: str
    reads: tuple[str, ...]
    needs: tuple[str, ...]
    work: Callable[[Context], Any]
    reads_files: bool = False
    extends: str | None = None
    also: Also | None = None

    def all_reads(self, config: StudyConfig) -> tuple[str, ...]:
        """Sections that the stage depends on in a given study."""
        return self.reads + (self.also.reads if self.also and self.also.where(config) else ())

    def all_needs(self, config: StudyConfig) -> tuple[str, ...]:
        """Stages whose outputs it uses in a given study."""
        return self.needs + (self.also.needs if self.also and self.also.where(config) else ())


@dataclass
class StageRecord:
    """How one stage went."""

    name: str
    seconds: float
    detail: str
    from_cache: bool
    key: str
    findings: tuple[Finding, ...] = ()


@dataclass
class Outcome:
    """Outputs of all stages that were run."""

    done: dict[str, Any] = field(default_factory=dict)
    records: list[StageRecord] = field(default_factory=list)
    findings: Findings = field(default_factory=Findings)


class StageCache(Protocol):
    """Where outputs of stages are kept between runs."""

    def get(self, key: str, default: Any = None) -> Any:
        """The output under a key, or ``default``."""

    def put(self, key: str, value: Any) -> Any:
        """Keep an output."""


@cache
def code_fingerprint() -> str:
    """Hash of the package's own source, so that a cache never outlives the code that filled it."""
    digest = hashlib.sha256()
    package = Path(__file__).resolve().parents[1]
    for path in sorted(package.rglob("*.py")):
        digest.update(str(path.relative_to(package)).encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()


def file_hash(path: Path) -> str:
    """SHA-256 of a file, read in pieces."""
    digest = hashlib.sha256()
    with path.open("rb") as stream:
        while piece := stream.read(1 << 20):
            digest.update(piece)
    return digest.hexdigest()


def stage_key(stage: Stage, study: Study, keys: dict[str, str], files: dict[str, str]) -> str:
    """Name of a stage's output in the cache: what it reads, what it needs, and the code that makes it."""
    view = ConfigView(study.config, stage.all_reads(study.config))
    content = {
        "stage": stage.name,
        "code": code_fingerprint(),
        "reads": view.canonical(),
        "needs": [keys[name] for name in stage.all_needs(study.config)],
        "files": files if stage.reads_files else {},
    }
    return hashlib.sha256(json.dumps(content, sort_keys=True).encode()).hexdigest()


def named_files(files: dict[str, str], study: Study) -> dict[str, str]:
    """Hashes of the inputs, with the name of the study file, which findings carry."""
    return {**files, "study": study.path.name}


def _worked(stage: Stage, context: Context) -> Any:
    """Output of a stage; None where it stopped with an error, or a room refused a value that it was given."""
    try:
        return stage.work(context)
    except StageStop:
        return None
    except ValueError as error:
        # Rooms check what they are given and name the argument; the study is where it comes from.
        logging.getLogger(__name__).debug("stage %s refused", stage.name, exc_info=True)
        context.findings.error(
            "stage-refused", f"{stage.label} stopped: {error}",
            "Change that value in the study. If nothing there explains it, it is a fault of this tool.",
            file=context.study.path.name,
        )  # fmt: skip
        return None


def run_stages(
    stages: tuple[Stage, ...],
    study: Study,
    *,
    progress: Progress | None = None,
    store: StageCache | None = None,
    threads: int | None = None,
    files: dict[str, str] | None = None,
    keep_on: bool = False,
) -> Outcome:
    """Run stages in order; stop after the first that finds an error, unless told to keep on.

    Parameters
    ----------
    stages : tuple of Stage
    study : Study
    progress : Progress, optional
    store : StageCache, optional
        Outputs found there are not made again.
    threads : int, optional
    files : dict, optional
        Hash of each input file by role.
    keep_on : bool
        Whether to go on after errors, so that all are listed.

    Returns
    -------
    Outcome
        ``findings.has_errors`` tells whether the stages were all run.
    """
    progress = progress or Silent()
    outcome = Outcome()
    outcome.findings.extend(study.findings)
    keys: dict[str, str] = {}
    named = named_files(files or {}, study)
    for stage in stages:
        progress.started(stage.name, stage.label)
        begun = time.perf_counter()
        view = ConfigView(study.config, stage.all_reads(study.config))
        key = stage_key(stage, study, keys, named)
        keys[stage.name] = key
        kept = store.get(key) if store is not None else None
        base = outcome.done[stage.extends].frame if stage.extends else None
        if kept is not None:
            output, found, detail = kept
            output = output if base is None else lengthened(output, base)
        else:
            findings = Findings()
            context = Context(view, outcome.done, findings, study, threads)
            output = _worked(stage, context)
            found, detail = tuple(findings), context.detail
            if store is not None and not findings.has_errors:
                store.put(key, (output if base is None else shortened(output, base), found, detail))
        seconds = time.perf_counter() - begun
        outcome.done[stage.name] = output
        outcome.findings.extend(found)
        outcome.records.append(StageRecord(stage.name, seconds, detail, kept is not None, key, found))
        progress.finished(stage.name, seconds, detail, kept is not None)
        if output is None or (not keep_on and any(item.severity == "error" for item in found)):
            break
    return outcome
