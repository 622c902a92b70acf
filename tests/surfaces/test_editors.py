"""The files for editors are those that the vocabulary gives; a real editor shows a finding."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from spanwright_grammar.parsing import tokens
from spanwright_grammar.vocabulary import VOCABULARY

ROOT = Path(__file__).resolve().parent.parent.parent
EDITORS = ROOT / "grammar" / "editors"
EDITOR = shutil.which("nvim")
# What each kind of the lexer is for an editor without a server.
SCOPES = {
    "number": {"constant.numeric"},
    "keyword": {"keyword.control", "keyword.other"},
    "family": {"entity.name.type"},
    "operator": {"support.function.operator"},
    "function": {"support.function", "entity.name.function"},
    "parameter": {"constant.language"},
    "string": {"string.quoted.double"},
    "comment": {"comment.line.number-sign"},
    "result": {"comment.line.number-sign.result"},
}


def test_the_files_are_up_to_date() -> None:
    script = ROOT / "scripts" / "editors.py"
    found = subprocess.run(
        [sys.executable, script, "--check"], capture_output=True, text=True, check=False
    )
    assert (found.returncode, found.stderr) == (0, "")


def coloured(text: str, patterns: list[dict[str, Any]]) -> dict[int, str]:
    """The scope at each start of a match: the first pattern that fits, as an editor does it."""
    found = {}
    place = 0
    while place < len(text):
        for pattern in patterns:
            shape = pattern.get("match") or '"[^"]*"'
            match = re.compile(shape, re.MULTILINE).match(text, place)
            if match and match.end() > place:
                found[place] = pattern["name"].removesuffix(".spanwright")
                place = match.end()
                break
        else:
            place += 1
    return found


@pytest.mark.parametrize("name", sorted({entry.name for entry in VOCABULARY}))
def test_colours_agree_with_the_lexer(name: str) -> None:
    patterns = json.loads((EDITORS / "spanwright.tmLanguage.json").read_text())["patterns"]
    for entry in VOCABULARY:
        if entry.name != name:
            continue
        found = coloured(entry.example, patterns)
        for kind, start, end in tokens(entry.example):
            if kind in SCOPES:
                shown = entry.example[start:end]
                assert found.get(start) in SCOPES[kind], (entry.example, shown, kind)


def test_indentation_patterns_know_blocks() -> None:
    rules = json.loads((EDITORS / "language-configuration.json").read_text())["indentationRules"]
    deeper, back = (re.compile(rules[name]) for name in
                    ("increaseIndentPattern", "decreaseIndentPattern"))  # fmt: skip
    assert deeper.match("for i in 1..2:  # why") and not deeper.match("for i in 1..2: claim i = i")
    assert back.match("  end # done") and not back.match("ending")


def blocks(language: str) -> list[str]:
    """The blocks of a language in the page for editors."""
    text = (EDITORS / "README.md").read_text(encoding="utf-8")
    return re.findall(rf"```{language}\n(.*?)```", text, re.DOTALL)


@pytest.mark.parametrize("language", ["lua", "elisp"])
def test_the_two_pages_give_the_same_configurations(language: str) -> None:
    front = (ROOT / "README.md").read_text(encoding="utf-8")
    assert re.findall(rf"```{language}\n(.*?)```", front, re.DOTALL) == blocks(language) != []


def test_configurations_are_well_formed() -> None:
    import tomllib

    (helix,) = blocks("toml")
    assert tomllib.loads(helix)["language-server"]["spanwright"]["args"] == ["serve"]
    (package,) = blocks("json")
    parts = json.loads(package)["contributes"]
    for path in (parts["languages"][0]["configuration"], parts["grammars"][0]["path"]):
        assert (EDITORS / path).is_file()
    (lisp,) = blocks("elisp")
    bare = re.sub(r'"(?:[^"\\]|\\.)*"', "", lisp)
    assert bare.count("(") == bare.count(")") > 5
    (lua,) = blocks("lua")
    assert 'cmd = { "spanwright", "serve" }' in lua
    openers = len(re.findall(r"\b(?:function|then)\b", lua))
    assert openers - len(re.findall(r"\belse(?:if)\b", lua)) == len(re.findall(r"\bend\b", lua))


REPORT = """
vim.wait(30000, function() return #vim.diagnostic.get(0) > 0 end, 50)
local found = {}
for _, item in ipairs(vim.diagnostic.get(0)) do
  table.insert(found, { line = item.lnum, column = item.col, message = item.message })
end
vim.fn.writefile({ vim.fn.json_encode(found) }, "found.json")
vim.cmd("qa!")
"""


def test_a_real_editor_attaches_and_shows_a_finding(tmp_path: Path) -> None:
    (lua,) = blocks("lua")
    if EDITOR is None:
        # without the editor at hand, the configuration is what can be looked at
        assert "vim.lsp.start_client(server)" in lua
        return
    command = tmp_path / "bin" / "spanwright"
    command.parent.mkdir()
    command.write_text(
        f"#!/bin/sh\nexec {sys.executable} -c "
        "'import sys; from spanwright.editor_commands import serve; sys.exit(serve())'\n"
    )
    command.chmod(0o755)
    (tmp_path / "init.lua").write_text(lua)
    (tmp_path / "report.lua").write_text(REPORT)
    (tmp_path / "script.span").write_text("fix n = 2\n\U0001d465_1 + x_3\n")
    environment = {
        **os.environ,
        "PATH": f"{command.parent}{os.pathsep}{os.environ['PATH']}",
        **{f"XDG_{name}_HOME": str(tmp_path / name) for name in ("CONFIG", "DATA", "STATE")},
    }
    subprocess.run(
        [EDITOR, "--headless", "-n", "-i", "NONE", "-u", "init.lua", "script.span",
         "-c", "luafile report.lua"],
        cwd=tmp_path, env=environment, check=True, capture_output=True, timeout=90,
    )  # fmt: skip
    (finding,) = json.loads((tmp_path / "found.json").read_text())
    assert finding["line"] == 1
    assert finding["message"].startswith("x_3 does not exist")
    # the editor counts bytes: four for the wide letter, then `_1 + x_`
    assert finding["column"] == 4 + len("_1 + x_")
