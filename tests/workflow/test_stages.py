"""Stages declare what they read: no stage sees more, and a key of the cache changes with what a stage reads alone."""

from __future__ import annotations

import typing
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pydantic import BaseModel

from sms_resource import StudyError, load_study
from sms_resource.findings import Findings
from sms_resource.study import Study, StudyConfig
from sms_resource.workflow.stage import (
    ConfigView,
    Context,
    Stage,
    StageStop,
    code_fingerprint,
    one_domain,
    run_stages,
    stage_key,
)
from sms_resource.workflow.stages import CHECK_STAGES, ESTIMATE_STAGES
from tests.end_to_end.small_study import SmallStudy

SECTIONS = tuple(StudyConfig.model_fields)
FILES = {"collars": "a", "assays": "b"}


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Study:
    return load_study(SmallStudy(tmp_path_factory.mktemp("stages")).write())


def keys_of(study: Study, files: dict[str, str] | None = None) -> dict[str, str]:
    """Key of each stage, nothing run."""
    keys: dict[str, str] = {}
    for stage in ESTIMATE_STAGES:
        keys[stage.name] = stage_key(stage, study, keys, files or FILES)
    return keys


def upstream(stage: Stage, config: StudyConfig) -> set[str]:
    """The stage and all that it needs, and what they need."""
    by_name = {item.name: item for item in ESTIMATE_STAGES}
    found, left = set(), [stage.name]
    while left:
        name = left.pop()
        if name not in found:
            found.add(name)
            left += by_name[name].all_needs(config)
    return found


def reads(stage: Stage, config: StudyConfig) -> set[str]:
    """Sections that a stage depends on, through what it needs as well."""
    above = upstream(stage, config)
    return {section for item in ESTIMATE_STAGES if item.name in above for section in item.all_reads(config)}


def test_a_stage_sees_its_own_sections_only(study: Study) -> None:
    view = ConfigView(study.config, ("cutoff",))
    assert view.cutoff.at == 4.0
    for section in set(SECTIONS) - {"cutoff"}:
        with pytest.raises(AttributeError, match="has not declared"):
            getattr(view, section)


def test_stages_are_declared_in_order_and_of_known_parts() -> None:
    done: set[str] = set()
    for stage in ESTIMATE_STAGES:
        assert set(stage.reads) <= set(SECTIONS), stage.name
        assert set(stage.needs) <= done, stage.name
        assert len(set(stage.reads)) == len(stage.reads) and len(set(stage.needs)) == len(stage.needs)
        done.add(stage.name)
    assert ESTIMATE_STAGES[:2] == CHECK_STAGES


@pytest.mark.parametrize("variable", ["cu", "value", "equivalent"])
def test_every_stage_of_a_study_runs_with_what_it_declares(study: Study, variable: str) -> None:
    """Outputs of stages that are not declared are out of reach, too."""
    study = study.with_overrides({"cutoff.variable": variable})
    config = study.config

    class Declared(dict[str, Any]):
        def __init__(self, done: dict[str, Any], stage: Stage) -> None:
            super().__init__({name: done[name] for name in stage.all_needs(config)})

        def __missing__(self, name: str) -> Any:
            raise AssertionError(f"the stage has not declared that it needs {name}")

    def guarded(stage: Stage) -> Stage:
        def work(context: Context) -> Any:
            narrow = Context(
                context.config,
                Declared(context.done, stage),
                context.findings,
                context.study,
                context.threads,
            )
            return stage.work(narrow)

        return replace(stage, work=work)

    outcome = run_stages(tuple(guarded(stage) for stage in ESTIMATE_STAGES), study, threads=1)
    assert not outcome.findings.has_errors, outcome.findings.errors
    assert set(outcome.done) == {stage.name for stage in ESTIMATE_STAGES}


def leaves(model: type[BaseModel], prefix: str) -> list[tuple[str, Any]]:
    """Dotted keys below a section, with their fields."""
    found = []
    for name, field in model.model_fields.items():
        inner = field.annotation
        if isinstance(inner, type) and issubclass(inner, BaseModel):
            found += leaves(inner, f"{prefix}.{name}")
        else:
            found.append((f"{prefix}.{name}", field))
    return found


LEAVES = [
    leaf
    for name, field in StudyConfig.model_fields.items()
    if isinstance(field.annotation, type) and issubclass(field.annotation, BaseModel) and name != "data"
    for leaf in leaves(field.annotation, name)
]


def other_value(field: Any, value: Any, chance: st.DataObject) -> Any:
    """Another value that a key may take, as far as its type tells."""
    options = typing.get_args(field.annotation)
    words = [item for item in options if isinstance(item, str)]
    if words:
        return chance.draw(st.sampled_from([word for word in words if word != value] or words))
    if isinstance(value, bool):
        return not value
    if isinstance(value, int | float):
        return type(value)(value * chance.draw(st.sampled_from((0.5, 0.9, 1.1, 2))))
    if isinstance(value, str):
        return value + "x"
    return value


@settings(max_examples=120, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_a_key_of_the_study_moves_the_stages_that_read_its_section_and_no_other(
    study: Study, data: st.DataObject
) -> None:
    dotted, field = data.draw(st.sampled_from(LEAVES))
    section = dotted.partition(".")[0]
    value: Any = study.config
    for name in dotted.split("."):
        value = getattr(value, name)
    changed_value = other_value(field, value, data)
    try:
        changed = study.with_overrides({dotted: changed_value})
    except StudyError:
        return
    now: Any = changed.config
    for name in dotted.split("."):
        now = getattr(now, name)
    before, after = keys_of(study), keys_of(changed)
    for stage in ESTIMATE_STAGES:
        touched = section in reads(stage, changed.config) and now != value and dotted != "kriging.threads"
        assert (before[stage.name] != after[stage.name]) == touched, (dotted, value, now, stage.name)


def test_the_contents_of_files_move_every_stage_and_their_names_do_not(study: Study) -> None:
    before = keys_of(study)
    after = keys_of(study, {**FILES, "assays": "c"})
    assert all(before[name] != after[name] for name in before)
    assert keys_of(study, dict(reversed(FILES.items()))) == before


def test_the_name_of_the_study_file_is_part_of_a_key(study: Study, tmp_path: Path) -> None:
    """Findings name the study file, so those of another file are not taken for its own."""
    store = Store()

    def note(context: Context) -> int:
        context.findings.note("neighbourhood-study", "look", file=context.study.path.name)
        return 1

    stages = (Stage("load", "Reading", (), (), note, reads_files=True),)
    other = replace(study, path=study.folder / "other.toml")
    files = [run_stages(stages, item, store=store).findings[0].file for item in (study, other, study)]
    assert files == ["study.toml", "other.toml", "study.toml"] and len(store) == 2


def test_threads_are_no_part_of_a_key(study: Study) -> None:
    assert keys_of(study.with_overrides({"kriging.threads": 1})) == keys_of(
        study.with_overrides({"kriging.threads": 7})
    )


def test_the_code_is_part_of_every_key(study: Study, monkeypatch: pytest.MonkeyPatch) -> None:
    before = keys_of(study)
    assert len(code_fingerprint()) == 64
    monkeypatch.setattr("sms_resource.workflow.stage.code_fingerprint", lambda: "other")
    after = keys_of(study)
    assert all(before[name] != after[name] for name in before)


def stage_of(work: Any, name: str = "one", needs: tuple[str, ...] = ()) -> Stage:
    return Stage(name, "Doing something", (), needs, work)


class Store(dict[str, Any]):
    """A cache in memory."""

    def put(self, key: str, value: Any) -> None:
        self[key] = value


def test_a_stage_that_errs_stops_the_next_and_is_not_kept(study: Study) -> None:
    def err(context: Context) -> int:
        context.findings.error("no-composites", "nothing here")
        return 1

    store, ran = Store(), []
    stages = (stage_of(err), stage_of(lambda context: ran.append(1), "two", ("one",)))
    outcome = run_stages(stages, study, store=store)
    assert outcome.findings.has_errors and not ran and not store
    assert [record.name for record in outcome.records] == ["one"]
    assert run_stages(stages, study, keep_on=True).records[-1].name == "two"


@pytest.mark.parametrize("how", ["stop", "refused"])
def test_a_stage_that_cannot_go_on_leaves_an_error_and_no_traceback(study: Study, how: str) -> None:
    def work(context: Context) -> Any:
        if how == "stop":
            context.findings.error("blocks-empty", "no block touches the body")
            raise StageStop
        raise ValueError("length_m must be positive, not -1")

    outcome = run_stages((stage_of(work), stage_of(lambda _: 1, "two", ("one",))), study, keep_on=True)
    (item,) = outcome.findings.errors
    assert item.code == ("blocks-empty" if how == "stop" else "stage-refused")
    assert [record.name for record in outcome.records] == ["one"]
    if how == "refused":
        assert "length_m must be positive" in item.message and item.file == "study.toml" and item.remedy


def test_findings_of_a_stage_come_back_from_the_cache(study: Study) -> None:
    def warn(context: Context) -> str:
        context.findings.warning("validation-flag", "look here")
        context.detail = "done"
        return "output"

    store = Store()
    first = run_stages((stage_of(warn),), study, store=store)
    second = run_stages((stage_of(warn),), study, store=store)
    assert [record.from_cache for record in (*first.records, *second.records)] == [False, True]
    assert second.done == first.done
    assert second.findings.to_records() == first.findings.to_records()
    assert second.records[0].detail == "done"


def test_one_domain_joins_the_sulphide_and_leaves_the_rest(study: Study) -> None:
    domains = study.config.domains
    assert one_domain(domains) is domains
    joined = one_domain(study.with_overrides({"domains.layout": "single"}).config.domains)
    assert joined.sulphide == ("sulphide",)
    assert joined.codes == {"CP": "sulphide", "MS": "sulphide", "AV": "waste"}


def test_recovery_is_that_of_runs_that_lie_mostly_in_the_body(study: Study) -> None:
    """Run by run from the rows of the files: a run counts for the layer that holds most of it, host rock for none."""
    made = SmallStudy(study.folder)
    done = run_stages(ESTIMATE_STAGES[:3], study).done["composite"].tables["recovery"].set_index("domain")
    wanted = {"cap": [0.0, 0.0], "massive": [0.0, 0.0]}
    names = {"CP": "cap", "MS": "massive"}
    for row in made.rows["runs"]:
        shares = {
            log["code"]: min(row["to_m"], log["to_m"]) - max(row["from_m"], log["from_m"])
            for log in made.rows["lithology"]
            if log["hole_id"] == row["hole_id"]
        }
        # half and half: the domain that comes first by name, and massive comes before waste
        code = max(
            sorted(shares, key=lambda item: names.get(item, "waste")), key=lambda item: round(shares[item], 6)
        )
        if code in names:
            wanted[names[code]][0] += 1.0
            wanted[names[code]][1] += row["recovered_length_m"]
    assert set(done.index) == {"cap", "massive", "all"}
    for domain, (length, core) in wanted.items():
        assert done.loc[domain, "length_m"] == pytest.approx(length)
        assert done.loc[domain, "recovery_pct"] == pytest.approx(100 * core / length)


def test_findings_of_the_study_file_come_first(tmp_path: Path) -> None:
    made = SmallStudy(tmp_path / "inner")
    made.write()
    (tmp_path / "assays.csv").write_bytes((made.folder / "assays.csv").read_bytes())
    made.toml["data"]["assays"]["file"] = "../assays.csv"
    outcome = run_stages((stage_of(lambda _: 1),), load_study(made.write()))
    assert [item.code for item in outcome.findings] == ["file-outside"]
    assert isinstance(outcome.findings, Findings)
