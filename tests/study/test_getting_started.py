"""The examples of the guide are studies that load."""

from __future__ import annotations

import re
import textwrap
import tomllib
from pathlib import Path
from typing import Any

import pytest

from sms_resource.study.schema import StudyConfig
from tests.end_to_end.small_study import decisions

GUIDE = Path(__file__).parents[2] / "docs" / "getting-started.md"
EXAMPLES = [
    tomllib.loads(textwrap.dedent(text))
    for text in re.findall(r"```toml\n(.*?)```", GUIDE.read_text(encoding="utf-8"), flags=re.DOTALL)
]


def test_the_guide_has_examples() -> None:
    assert {next(iter(example)) for example in EXAMPLES} == {"domains", "scenarios", "cutoff", "exploration"}


@pytest.mark.parametrize("example", EXAMPLES, ids=lambda example: next(iter(example)))
def test_an_example_fits_the_schema(example: dict[str, Any]) -> None:
    """Every key is known and every value fits."""
    whole: dict[str, Any] = decisions()
    whole.update(example)
    config = StudyConfig.model_validate(whole)
    for section in example:
        assert getattr(config, section) is not None
