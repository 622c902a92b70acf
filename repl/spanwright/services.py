"""What shell and language server ask about a text: plain data in and out, no algebra.

Texts may be half-typed. `state` is what the session holds before the text's first sentence; what
the text itself defines before the cursor counts too.
"""

from __future__ import annotations

from pathlib import Path

from spanwright.replies import State
from spanwright_grammar import checks, completion, formatting
from spanwright_grammar import hover as hovering
from spanwright_grammar.bindings import Scope, scope_at
from spanwright_grammar.completion import Completion
from spanwright_grammar.diagnostics import Diagnostic
from spanwright_grammar.hover import Hover, Signature
from spanwright_grammar.parsing import Token, is_incomplete, parse, tokens
from spanwright_grammar.source import Source

__all__ = [
    "Completion", "Diagnostic", "Hover", "Signature", "Token", "complete", "diagnostics",
    "diagnostics_while_typing", "house_style", "hover", "is_incomplete", "scope_of",
    "script_paths", "signature", "tokens",
]  # fmt: skip

SUFFIX = ".span"
_MAX_FILES = 200

# What is wrong only because the end has not been typed yet.
_UNFINISHED = frozenset({"unexpected-end", "missing-bracket", "unclosed-string", "unclosed-block"})


def scope_of(state: State) -> Scope:
    """The session's state as the grammar's services take it."""
    return Scope(state.n, state.names, state.parameters, state.last_tag)


def complete(
    text: str, offset: int, state: State, folder: Path | None = None
) -> list[Completion]:
    """The proposals at an offset of the text; `folder` is where the paths of `use` start."""
    root = folder or Path.cwd()
    return completion.complete(
        text, offset, _scope(text, offset, state), lambda path: script_paths(root, path)
    )


def signature(text: str, offset: int, state: State) -> Signature | None:
    """How the word at an offset is written."""
    return hovering.signature(text, offset, _scope(text, offset, state))


def hover(text: str, offset: int, state: State) -> Hover | None:
    """All that is known of the word at an offset."""
    parsed = parse(Source(text))
    return hovering.hover(parsed, offset, scope_at(parsed, offset, scope_of(state)))


def diagnostics(text: str, state: State) -> tuple[Diagnostic, ...]:
    """All that can be found wrong with a text without computing."""
    return checks.check(parse(Source(text)), scope_of(state))


def diagnostics_while_typing(text: str, offset: int, state: State) -> tuple[Diagnostic, ...]:
    """The findings that concern what has been typed, not what is still being typed at an offset."""
    found = diagnostics(text, state)
    end = len(text.rstrip())
    if any(_is_unfinished(item, end) for item in found):
        found = _mended_findings(text, state) or found
    return tuple(
        item
        for item in found
        if not _is_unfinished(item, end)
        and item.span.start < end
        and item.span.end <= len(text)
        and not (item.span.end == offset and item.code in ("unknown-name", "reserved-word"))
        and not (item.code == "unknown-symbol" and item.span.start <= offset <= item.span.end)
    )


def house_style(text: str) -> str:
    """A pasted block with its spaces and indentation set right; broken sentences as they are."""
    after = formatting.formatted(parse(Source(text)))
    return after if text.endswith(("\n", "\r")) else after.rstrip("\r\n")


def _is_unfinished(found: Diagnostic, end: int) -> bool:
    return found.code in _UNFINISHED and found.span.end >= end


def _mended_findings(text: str, state: State) -> tuple[Diagnostic, ...]:
    """What is found once the open brackets are closed, and a missing operand is put in."""
    closers = completion.missing_closers(text)
    for filler in ("", "0"):
        found = diagnostics(text + filler + closers, state)
        if not any(item.code in _UNFINISHED or item.code == "unexpected-text" for item in found):
            return found
    return ()


def _scope(text: str, offset: int, state: State) -> Scope:
    """What is in force at an offset; the text's own definitions before it count."""
    scope = scope_of(state)
    before = text[:offset]
    return scope_at(parse(Source(before)), offset, scope) if _may_define(before) else scope


def _may_define(before: str) -> bool:
    return ";" in before or "\n" in before


def script_paths(root: Path, path: str) -> list[str]:
    """Scripts and folders that go on from the beginning of a path below a folder."""
    folder, _, beginning = path.rpartition("/")
    lead = f"{folder}/" if folder or path.startswith("/") else ""
    found = []
    try:
        for item in sorted((root / lead).iterdir()):
            name = item.name
            if not name.startswith(beginning) or (name.startswith(".") and not beginning):
                continue
            if item.is_dir():
                found.append(f"{lead}{name}/")
            elif name.endswith(SUFFIX):
                found.append(f"{lead}{name}")
            if len(found) >= _MAX_FILES:
                break
    except OSError:
        return []
    return found
