"""README.md holds what the program really prints."""

from __future__ import annotations

import importlib.util
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def test_readme_is_up_to_date() -> None:
    place = ROOT / "scripts" / "readme.py"
    spec = importlib.util.spec_from_file_location("readme", place)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    assert module.renewed(text) == text, "run scripts/write-readme"
