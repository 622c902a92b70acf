"""The examples in docstrings give what they say."""

from __future__ import annotations

import doctest
import importlib
from pathlib import Path

import pytest

import spanwright
import spanwright_grammar

ROOTS = [Path(package.__file__).parent for package in (spanwright, spanwright_grammar)]
MODULES = sorted(
    ".".join(path.relative_to(root.parent).with_suffix("").parts).removesuffix(".__init__")
    for root in ROOTS for path in root.rglob("*.py") if ">>> " in path.read_text("utf-8")
)


@pytest.mark.parametrize("name", MODULES)
def test_examples_in_docstrings(name: str) -> None:
    found = doctest.testmod(importlib.import_module(name))
    assert found.attempted > 0
    assert found.failed == 0
