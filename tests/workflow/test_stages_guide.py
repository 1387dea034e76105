"""The table of the guide that says which stages a changed section makes again, against the stages themselves."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from sms_resource.study import schema
from sms_resource.workflow.stage import Also
from sms_resource.workflow.stages import ESTIMATE_STAGES

GUIDE = Path(__file__).parents[2] / "docs" / "getting-started.md"
ORDER = [stage.name for stage in ESTIMATE_STAGES]
UNREAD = {"exploration"}  # of a study without drilling, which has no such stages


def again(section: str) -> list[str]:
    """Stages that read a section, and all that need one of those, in whatever study."""
    made: list[str] = []
    for stage in ESTIMATE_STAGES:
        also = stage.also or Also(bool, (), ())
        if section in (*stage.reads, *also.reads) or any(
            name in made for name in (*stage.needs, *also.needs)
        ):
            made.append(stage.name)
    return made


def table() -> dict[str, list[str]]:
    """Stages by section, as the guide has them."""
    lines = GUIDE.read_text(encoding="utf-8").partition("| section changed |")[2].splitlines()[2:]
    found = {}
    for line in lines:
        if not line.startswith("|"):
            break
        sections, stages = line.strip("|").split("|")
        names = re.findall(r"`(\w+)`", stages)
        if stages.strip().startswith("all, from"):
            names = ORDER[ORDER.index(names[0]) :]
        for section in re.findall(r"`(\w+)`", sections):
            found[section] = names
    return found


@pytest.mark.parametrize("section", sorted(set(schema.StudyConfig.model_fields) - UNREAD))
def test_the_guide_names_what_a_change_makes_again(section: str) -> None:
    assert table()[section] == again(section)
