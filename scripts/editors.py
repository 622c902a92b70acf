"""Writes grammar/editors/*.json from the vocabulary; with --check only says whether they are so."""

from __future__ import annotations

import json
import re
import sys
from collections.abc import Iterable
from pathlib import Path

from spanwright_grammar.lexing import GREEK_LETTERS, INNER_WORDS, SENTENCE_WORDS, SIGNS
from spanwright_grammar.vocabulary import by_kind

FOLDER = Path(__file__).resolve().parent.parent / "grammar" / "editors"
SCOPE = "source.spanwright"
_GREEK = "".join(GREEK_LETTERS)
# A word ends where no letter or digit follows; a letter of the Greek alphabet is a word by itself.
_BEFORE = r"(?<![A-Za-z0-9\\])"
_AFTER = r"(?![A-Za-z0-9])"


def words(names: Iterable[str], *, then: str = _AFTER) -> str:
    """A pattern for whole words in any of their spellings, with what must follow."""
    spellings = sorted(set(names), key=lambda name: (-len(name), name))
    ascii_names = [re.escape(name) for name in spellings if name.isascii()]
    greek = [name for name in spellings if not name.isascii()]
    parts = [f"{_BEFORE}(?:{'|'.join(ascii_names)})"] if ascii_names else []
    if greek:
        parts.append(f"[{''.join(greek)}]")
    return f"(?:{'|'.join(parts)}){then}"


def names_of(kind: str) -> list[str]:
    """The names of a kind's entries, with their spellings that are words or letters."""
    return [
        name
        for entry in by_kind(kind)
        for name in (entry.name, *entry.aliases)
        if re.fullmatch(rf"\\?[A-Za-z]+|[{_GREEK}∂∑∏∞]", name)
    ]


def textmate_grammar() -> dict[str, object]:
    """Colours for editors that know no language server, or wait for it."""

    def rule(scope: str, pattern: str) -> dict[str, str]:
        return {"name": f"{scope}.spanwright", "match": pattern}

    subscripted = {kind: names_of(kind) for kind in ("family", "operator")}
    both = set(subscripted["family"]) & set(subscripted["operator"])
    signs = "".join(sorted(set(SIGNS) - set("∑∏")))
    patterns: list[dict[str, object]] = [
        rule("comment.line.number-sign.result", r"#=.*$"),
        rule("comment.line.number-sign", r"#.*$"),
        {
            "name": "string.quoted.double.spanwright",
            "begin": '"',
            "end": '"|$',
            "patterns": [rule("constant.character.escape", r'\\["\\]')],
        },
        rule("keyword.control", words(["sum", "prod", "\\sum", "\\prod"], then=r"(?=_)") + "|[∑∏]"),
        rule("keyword.control", words(SENTENCE_WORDS)),
        rule("keyword.other", words(INNER_WORDS)),
        # s_(2,1) is a family's, s_1 the reflection.
        rule("entity.name.type", words(both, then=r"(?=_[({])")),
        rule("entity.name.type", words(set(subscripted["family"]) - both, then=r"(?=_)")),
        rule("support.function.operator", words(subscripted["operator"], then=r"(?=_)")),
        rule(
            "support.function.operator",
            words(name for name in subscripted["operator"] if len(name.lstrip("\\")) > 3),
        ),
        rule("support.function", words([*names_of("function"), *names_of("set")], then=r"(?=\()")),
        rule("entity.name.function", rf"{_BEFORE}[A-Za-z][A-Za-z0-9]*(?=\()"),
        rule("constant.language", words([*names_of("parameter"), "infinity", "\\infty", "∞"])),
        rule("constant.numeric", r"(?<![A-Za-z0-9])[0-9]+"),
        rule("variable.other", rf"\\[A-Za-z]+[0-9]*|[A-Za-z][A-Za-z0-9]*|[{_GREEK}∂][0-9]*"),
        rule("keyword.operator", rf"\.\.|->|<=|>=|!=|[-+*/^=<>|{re.escape(signs)}]"),
        rule("punctuation.separator", r"[,;:_]"),
    ]
    return {
        "name": "Spanwright",
        "scopeName": SCOPE,
        "fileTypes": ["span"],
        "patterns": patterns,
    }


def language_configuration() -> dict[str, object]:
    """Comments, brackets and indentation."""
    pairs = [["(", ")"], ["{", "}"], ["[", "]"]]
    return {
        "comments": {"lineComment": "#"},
        "brackets": pairs,
        "autoClosingPairs": [
            *({"open": left, "close": right} for left, right in pairs),
            {"open": '"', "close": '"', "notIn": ["string", "comment"]},
        ],
        "surroundingPairs": [*pairs, ['"', '"'], ["|", "|"]],
        "wordPattern": rf"\\?[A-Za-z][A-Za-z0-9]*|[{_GREEK}∂][0-9]*|[0-9]+",
        "indentationRules": {
            "increaseIndentPattern": r"^\s*for\b.*:\s*(#.*)?$",
            "decreaseIndentPattern": r"^\s*end\s*(#.*)?$",
        },
        "folding": {"offSide": False},
    }


FILES = {
    "spanwright.tmLanguage.json": textmate_grammar,
    "language-configuration.json": language_configuration,
}


def main() -> int:
    """Write the files; with --check write nothing and return 1 when one is out of date."""
    only_checks = sys.argv[1:] == ["--check"]
    if sys.argv[1:] and not only_checks:
        print("usage: scripts/write-editors [--check]", file=sys.stderr)
        return 2
    status = 0
    for name, make in FILES.items():
        path = FOLDER / name
        text = json.dumps(make(), indent=2, ensure_ascii=False) + "\n"
        if path.exists() and path.read_text(encoding="utf-8") == text:
            continue
        if only_checks:
            print(f"{name} is out of date: run scripts/write-editors", file=sys.stderr)
            status = 1
        else:
            path.write_text(text, encoding="utf-8")
    return status


if __name__ == "__main__":
    sys.exit(main())
