"""Public names are found whatever was imported before them (a rule of the import system; no data).

Importing a submodule binds it on its package under its own name, so a public name that is also a module's
would be the function or the module according to who came first.
"""

from __future__ import annotations

import pkgutil
from importlib import import_module

import pytest

from sms_resource import geostatistics

MODULES = {found.name for found in pkgutil.iter_modules(geostatistics.__path__)}


@pytest.mark.parametrize("name", sorted(geostatistics._HOME))
def test_a_name_is_not_its_modules(name: str) -> None:
    home = geostatistics._HOME[name]
    assert name not in MODULES
    assert getattr(geostatistics, name) is getattr(import_module(f"{geostatistics.__name__}.{home}"), name)
