"""Read a study file; every fault becomes a finding."""

from __future__ import annotations

import json
import tomllib
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, get_args

from pydantic import BaseModel, ValidationError

from sms_resource.findings import Finding, Findings
from sms_resource.study.exploration import target_faults
from sms_resource.study.faults import one_each, place_of, shown, wanted
from sms_resource.study.files import GRID_ROLES, LAYER_ROLES, TABLE_ROLES
from sms_resource.study.locate import key_rows, nearest, row_of
from sms_resource.study.schema import StudyConfig
from sms_resource.study.sense import value_faults


class StudyError(Exception):
    """A study that cannot be run. ``findings`` lists every fault."""

    def __init__(self, findings: Findings) -> None:
        self.findings = findings
        lines = [f"{item.where}: {item.message} {item.remedy}".strip() for item in findings.errors]
        super().__init__("\n".join(lines) or "the study has errors")


@dataclass(frozen=True)
class Study:
    """One estimate: its decisions and where its files are.

    Attributes
    ----------
    config : StudyConfig
        Every decision, typed and with defaults filled in.
    path : Path
        The study file.
    given : dict
        What the file (and overrides) state, before defaults.
    findings : Findings
        Warnings and notes about the study file itself.
    """

    config: StudyConfig
    path: Path
    given: dict[str, Any]
    findings: Findings = field(default_factory=Findings)

    @property
    def folder(self) -> Path:
        """Folder of the study file; paths in the study start here."""
        return self.path.parent

    @property
    def without_drilling(self) -> bool:
        """Whether the study has no holes, so that it ends in an exploration target."""
        return self.config.data.collars is None

    def resolve(self, name: str) -> Path:
        """Absolute path of a file that the study names."""
        return (self.folder / name).resolve()

    def files(self) -> dict[str, str]:
        """File of each role that the study names, as the study spells it."""
        data = self.config.data
        named = {
            role: getattr(data, role).file
            for role in (*TABLE_ROLES, *GRID_ROLES, *LAYER_ROLES)
            if getattr(data, role) is not None
        }
        if data.truth:
            named["truth"] = data.truth
        return named

    def with_overrides(self, changes: dict[str, Any]) -> Study:
        """The same study with some dotted keys set to other values.

        Raises
        ------
        StudyError
            If a key is not known or a value does not fit.
        """
        raw = json.loads(json.dumps(self.given, default=str))
        for dotted, value in changes.items():
            place = raw
            *tables, last = dotted.split(".")
            for table in tables:
                place = place.setdefault(table, {})
                if not isinstance(place, dict):
                    findings = Findings()
                    findings.error(
                        "study-key",
                        f"'{dotted}' cannot be set: '{table}' is not a table",
                        file=self.path.name,
                    )
                    raise StudyError(findings)
            place[last] = value
        config, findings = _validate(raw, "", self.path.name)
        if config is None:
            raise StudyError(findings)
        changed = replace(self, config=config, given=raw)
        _check_sense(changed, {}, findings)
        if findings.has_errors:
            raise StudyError(findings)
        return changed

    def __repr__(self) -> str:
        return f"Study({self.config.study.name!r}, {self.path.name})"


def load_study(path: str | Path) -> Study:
    """Read and check a study file.

    Parameters
    ----------
    path : str or Path
        A TOML file; the keys are described in docs/study-file.md.

    Returns
    -------
    Study

    Raises
    ------
    StudyError
        Lists every fault of the file, each with its row and the way to mend it.
    """
    path = Path(path).absolute()
    findings = Findings()
    try:
        text = path.read_bytes().decode("utf-8-sig")
        raw = tomllib.loads(text)
    except (FileNotFoundError, IsADirectoryError, PermissionError) as error:
        findings.error("study-missing", f"the study file cannot be read: {error.strerror}",
                       "Check the path, or write a study with `sms-resource new`.", file=str(path.name))  # fmt: skip
        raise StudyError(findings) from None
    except UnicodeDecodeError:
        findings.error(
            "study-encoding", "the study file is not UTF-8 text", "Save it as UTF-8.", file=path.name
        )
        raise StudyError(findings) from None
    except tomllib.TOMLDecodeError as error:
        findings.error("study-syntax", f"the study file is not valid TOML: {error}",
                       "Mend the line that is named; text needs quotes, tables need [brackets].",
                       file=path.name, row=_toml_row(str(error)))  # fmt: skip
        raise StudyError(findings) from None
    config, found = _validate(raw, text, path.name)
    findings.extend(found)
    if config is None:
        raise StudyError(findings)
    study = Study(config, path, raw, findings)
    _check_sense(study, key_rows(text), findings)
    if findings.has_errors:
        raise StudyError(findings)
    return study


def _toml_row(message: str) -> int | None:
    _, _, rest = message.partition("at line ")
    digits = rest.split(",")[0].split(")")[0].strip()
    return int(digits) if digits.isdigit() else None


def _validate(raw: dict[str, Any], text: str, name: str) -> tuple[StudyConfig | None, Findings]:
    rows = key_rows(text)
    findings = _without_drilling(raw, rows, name)
    try:
        config = StudyConfig.model_validate(raw)
        return (None if findings.has_errors else config), findings
    except ValidationError as error:
        for fault in one_each([dict(fault) for fault in error.errors()]):
            findings.extend([_fault_finding(fault, rows, name)])
        return None, findings


def _without_drilling(raw: dict[str, Any], rows: dict[str, int], name: str) -> Findings:
    """Collars and assays must be there, but for a study that ranges an exploration target from surface samples."""
    findings, data = Findings(), raw.get("data")
    if not isinstance(data, dict):
        return findings
    missing = [role for role in ("collars", "assays") if data.get(role) is None]
    surface = data.get("surface_samples") is not None
    if len(missing) == 2 and surface and "exploration" in raw:
        return findings
    for role in missing:
        dotted = f"data.{role}"
        if surface:
            findings.error(
                "study-no-drilling", f"'{dotted}' is not given: surface samples alone carry no block estimate",
                "They may support an exploration target at most: tonnes and grade as ranges, stated as conceptual, with too "
                "little exploration to estimate a resource. For that add [exploration] with a range of thickness; for an "
                "estimate add collars and assays.", file=name, row=row_of(rows, dotted), column=dotted,
            )  # fmt: skip
        else:
            findings.error("study-missing-key", f"'{dotted}' must be given", f"Add it: {describe(['data', role])}",
                           file=name, row=row_of(rows, dotted), column=dotted)  # fmt: skip
    return findings


def _fault_finding(fault: dict[str, Any], rows: dict[str, int], name: str) -> Finding:
    whole = [str(part) for part in fault["loc"]]
    place, which = place_of(tuple(fault["loc"]))
    dotted = ".".join(place)
    row = row_of(rows, dotted)
    if fault["type"] == "extra_forbidden":
        table = ".".join(place[:-1]) or "the top level"
        return Finding("error", "study-unknown-key", f"'{place[-1]}' is not a key of {table}",
                       nearest(place[-1], known_keys(place[:-1])), name, row, dotted)  # fmt: skip
    if fault["type"] == "missing" and whole[-1].isdigit():
        count = len(fault["input"]) if isinstance(fault.get("input"), list | tuple) else 0
        short = f"'{dotted}' is {shown(fault.get('input'))}: it has too few values ({count})"
        return Finding("error", "study-value", short, describe(place), name, row, dotted)
    if fault["type"] == "missing":
        return Finding("error", "study-missing-key", f"'{dotted}' must be given", f"Add it: {describe(place)}", name,
                       row, dotted)  # fmt: skip
    said = wanted(fault["type"], str(fault["msg"]), dict(fault.get("ctx") or {}))
    message = f"{which}'{dotted}' is {shown(fault.get('input'))}: {said}"
    return Finding("error", "study-value", message, describe(place), name, row, dotted)


def _section_at(place: list[str]) -> type[BaseModel] | None:
    model: type[BaseModel] | None = StudyConfig
    rest = list(place)
    while rest and model is not None:
        part = rest.pop(0)
        info = model.model_fields.get(part)
        if info is None:
            return None
        inner = _models_in(info.annotation)
        annotation = str(info.annotation)
        model = inner
        # A mapping or a list of tables: its own keys are the user's.
        while (
            rest
            and inner is not None
            and rest[0] not in inner.model_fields
            and ("dict[" in annotation or "tuple[" in annotation)
        ):
            rest.pop(0)
    return model


def _models_in(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in get_args(annotation):
        found = _models_in(inner)
        if found is not None:
            return found
    return None


def known_keys(place: list[str]) -> list[str]:
    """Keys that may stand in the table at ``place``."""
    model = _section_at(place)
    return list(model.model_fields) if model else []


def is_key(dotted: str) -> bool:
    """Whether a dotted name is a key of the study file (inside tables with names of the user's too)."""
    *table, last = dotted.split(".")
    return last in known_keys(table) or (bool(table) and not known_keys(table) and is_key(".".join(table)))


def describe(place: list[str]) -> str:
    """What the key at ``place`` means, from the schema; empty where the schema has none."""
    for stop in range(len(place), 0, -1):
        model = _section_at(place[: stop - 1])
        if model is not None and place[stop - 1] in model.model_fields:
            return model.model_fields[place[stop - 1]].description or ""
    return ""


def _check_sense(study: Study, rows: dict[str, int], findings: Findings) -> None:
    """Faults that a single key cannot show."""
    config, name = study.config, study.path.name

    def fault(dotted: str, code: str, message: str, remedy: str) -> None:
        findings.error(code, message, remedy, file=name, row=row_of(rows, dotted), column=dotted)

    for role, file in study.files().items():
        path = study.resolve(file)
        if path.is_dir():
            fault(f"data.{role}", "file-missing", f"a folder stands where the file of {role} should be: {file}",
                  "Name a file; the path starts at the folder of the study file.")  # fmt: skip
        elif not path.is_file():
            fault(f"data.{role}", "file-missing", f"the file of {role} does not exist: {file}",
                  "Correct the path; it starts at the folder of the study file.")  # fmt: skip
        elif not path.is_relative_to(study.folder.resolve()):
            findings.note("file-outside", f"the file of {role} lies outside the study's folder: {file}",
                          "The manifest names it; keep it with the study to make the run repeatable.",
                          file=name, row=row_of(rows, f"data.{role}"), column=f"data.{role}")  # fmt: skip
    known = {*config.domains.codes.values(), config.domains.unlogged}
    undecided = [code for code, domain in config.domains.codes.items() if domain.strip() in ("", "?")]
    if undecided:
        fault("domains.codes", "study-domain", f"no domain is named for {', '.join(undecided)}",
              "Replace each question mark by a domain: one of domains.sulphide, or such as \"waste\".")  # fmt: skip
    if config.domains.codes and not undecided:
        for domain in config.domains.sulphide:
            made = config.chimneys.source != "none" and domain == config.chimneys.domain
            if domain not in known and not made:
                fault("domains.sulphide", "study-domain", f"domain '{domain}' has no logged code",
                      nearest(domain, sorted(known)))  # fmt: skip
    if config.domains.codes and known >= set(config.domains.sulphide) and config.data.lithology is None:
        fault("domains.codes", "study-value-missing", "codes are mapped to domains, but no lithology is given",
              "Give data.lithology, or leave domains.codes out: every depth is then of the first sulphide domain.",
              )  # fmt: skip
    if config.domains.unlogged in config.domains.sulphide:
        fault("domains.unlogged", "study-domain", "unlogged depths would count as sulphide",
              "Name a domain outside domains.sulphide, such as \"waste\".")  # fmt: skip
    for section, used in (
        ("top_cuts.cuts", config.top_cuts.cuts),
        ("variograms.models", config.variograms.models),
    ):
        for domain in used:
            if domain not in config.domains.sulphide:
                fault(f"{section}.{domain}", "study-domain", f"domain '{domain}' is not in domains.sulphide",
                      nearest(domain, list(config.domains.sulphide)))  # fmt: skip
            for element in used[domain]:
                if element not in config.metals.estimate:
                    fault(f"{section}.{domain}.{element}", "study-metal", f"'{element}' is not estimated",
                          nearest(element, list(config.metals.estimate)))  # fmt: skip
    if config.chimneys.source != "none" and config.chimneys.domain != config.domains.sulphide[0]:
        fault("chimneys.domain", "study-domain", f"the domain '{config.chimneys.domain}' is not the first of the body",
              "Put it first in domains.sulphide.")  # fmt: skip
    if config.chimneys.source == "polygons" and config.data.chimneys is None:
        fault("chimneys.source", "study-value-missing", "chimneys are to come from polygons, but no file is given",
              "Add [data.chimneys], or set source = \"relief\".")  # fmt: skip
    variable = config.cutoff.variable
    if variable not in (*config.metals.estimate, "equivalent", "value"):
        fault("cutoff.variable", "study-metal", f"the cut-off is on '{variable}', which is not estimated",
              nearest(variable, [*config.metals.estimate, "equivalent", "value"]))  # fmt: skip
    if variable in ("equivalent", "value") and not config.value.metals:
        fault("cutoff.variable", "study-value-missing", f"a cut-off on {variable} needs prices, recoveries and payables",
              "Fill [value.metals], or cut on a metal.")  # fmt: skip
    if config.classes.judged_on not in config.metals.estimate:
        fault("classes.judged_on", "study-metal", f"'{config.classes.judged_on}' is not estimated",
              nearest(config.classes.judged_on, list(config.metals.estimate)))  # fmt: skip
    if config.top_cuts.apply == "given" and not config.top_cuts.cuts:
        fault("top_cuts.apply", "study-value-missing", "top cuts are to be applied as given, but none is given",
              "Add [top_cuts.cuts.DOMAIN] with a value by element, or set apply = \"proposed\".")  # fmt: skip
    if study.without_drilling:
        for dotted, code, message, remedy in target_faults(config):
            fault(dotted, code, message, remedy)
    elif (
        config.data.densities is None
        and not config.density.assigned_dry_tpm3
        and config.density.method != "mineralogy"
    ):
        fault("density.method", "study-value-missing", "no density is given: neither measurements nor assigned values",
              "Add [data.densities], or density.assigned_dry_tpm3 with a value for each domain.")  # fmt: skip
    if config.search.least_samples > config.search.most_samples:
        fault("search.least_samples", "study-value", "least_samples is above most_samples", "Lower it.")
    if config.prospects.judged and not (config.prospects.by and config.prospects.basis):
        fault("prospects.judged", "study-value-missing", "the prospects are said to be judged, but not by whom and on what",
              "Fill prospects.by and prospects.basis, or set judged = false.")  # fmt: skip
    for dotted in config.reasons:
        if not is_key(dotted):
            fault(f"reasons.{dotted}", "study-unknown-key", f"a reason is given for '{dotted}', which is not a key",
                  "Name a key of the study.")  # fmt: skip
    for dotted, message, remedy in value_faults(config):
        fault(dotted, "study-value", message, remedy)
    _check_crs(study, fault)


def _check_crs(study: Study, fault: Any) -> None:
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    try:
        crs = CRS.from_user_input(study.config.study.crs)
    except CRSError as error:
        fault("study.crs", "study-crs", f"the coordinate system is not known: {str(error).splitlines()[0]}",
              "Give an EPSG code of a projected system, such as \"EPSG:32702\".")  # fmt: skip
        return
    if not crs.is_projected:
        fault(
            "study.crs",
            "study-crs",
            f"'{crs.name}' is not a projected system",
            "Volumes need metres: name a UTM zone.",
        )
    elif any(abs(axis.unit_conversion_factor - 1.0) > 1e-12 for axis in crs.axis_info[:2]):
        fault(
            "study.crs", "study-crs", f"'{crs.name}' is not in metres", "Name a projected system in metres."
        )
