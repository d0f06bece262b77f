"""The examples of README and docstrings run and give what they say."""

import doctest
import importlib
import pkgutil
from pathlib import Path

import pytest

import geomcore

ROOT = Path(__file__).resolve().parents[2]
MODULES = [m.name for m in pkgutil.iter_modules(geomcore.__path__)]


@pytest.mark.parametrize("name", MODULES)
def test_docstring_examples_run(name):
    """What a docstring shows is what the function gives."""
    module = importlib.import_module(f"geomcore.{name}")
    assert doctest.testmod(module).failed == 0


def test_readme_examples_run():
    """A newcomer who copies the README's lines gets its numbers."""
    result = doctest.testfile(str(ROOT / "README.md"), module_relative=False)
    assert result.attempted > 5
    assert result.failed == 0
