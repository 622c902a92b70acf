"""The pages of `help` and `recall`, made from the vocabulary and from what a session holds."""

from __future__ import annotations

from spanwright.context import Context, Function
from spanwright.kernel.coefficients import Scalar
from spanwright.limits import LIMITS
from spanwright.rendering.text import text
from spanwright.settings import Settings
from spanwright.values import kind_name
from spanwright_grammar.spelling import nearest
from spanwright_grammar.vocabulary import VOCABULARY, Entry, by_kind, lookup_all

_HEADS = {
    "sentence": "Sentences", "family": "Families", "operator": "Operators",
    "function": "Functions", "set": "Index sets", "setting": "Settings", "word": "Words and signs",
    "parameter": "Parameters",
}

RECALLED_WIDTH = 100
"""A definition or result is cut to this many characters in the list of all."""


def page(topic: str | None) -> str | None:
    """A help page; None when there is none under this word."""
    if topic is None:
        return _overview()
    word = topic.strip()
    if word.lower() in ("limits", "limit"):
        return _limits()
    # an element or an operator with its subscript, as it stands in a formula
    entries = lookup_all(word) or lookup_all(word.partition("_")[0] if "_" in word else word)
    if entries:
        return "\n\n".join(_entry(e) for e in entries)
    for kind, head in _HEADS.items():
        if word.lower() in (kind, f"{kind}s", head.lower(), "families" if kind == "family" else ""):
            return _listing(kind, head)
    return None


def own_page(topic: str, context: Context) -> str | None:
    """What the session's own name means; None when it has none of this name."""
    value = context.names.get(topic.strip())
    if value is None:
        return None
    if isinstance(value, Function):
        return f"defined in this session: {_short(value.text.strip())}"
    shown = _short(f"{topic.strip()} = {text(value, context.settings.show)}")
    return f"{kind_name(value)}, defined in this session: {shown}"


def setting_line(name: str, settings: Settings) -> str:
    """A setting and its value, as `fix` answers."""
    value = getattr(settings, name)
    if value is None:
        return f"{name} = free"
    if name == "memory":
        unit, size = ("GB", 10**9) if value % 10**9 == 0 else ("MB", 10**6)
        return f"memory = {value // size} {unit}"
    return f"{name} = {text(value) if isinstance(value, Scalar) else value}"


def nearest_topic(word: str) -> str | None:
    """The nearest word that help knows."""
    heads = (head.lower() for head in _HEADS.values())
    return nearest(word, [*(e.name for e in VOCABULARY), *heads, "limits"])


def _overview() -> str:
    lines = [
        "Write products of generators, basis elements and operators as on paper: x_2 E_(1,0,2).",
        "Fix the number of variables first: fix n = 3. Each result gets a tag, (7); later eq_7.",
        "",
    ]
    for kind, head in _HEADS.items():
        names = dict.fromkeys(e.name for e in by_kind(kind))
        lines.append(f"{head}: {' '.join(names)}")
    lines += ["", "help and a word explains it: help E, help claim, help settings, help limits."]
    return "\n".join(lines)


def _limits() -> str:
    rows = [(f"{e.family} at {e.values}", e.becomes, e.claim, e.source) for e in LIMITS]
    width = max(len(r[0]) for r in rows)
    lines = ["What the families become at special parameters (n = 3 in the claims):"]
    for head, becomes, claim, source in rows:
        lines += [f"  {head.ljust(width)}  {becomes}", f"      {claim}", f"      {source}"]
    return "\n".join(lines)


def _listing(kind: str, head: str) -> str:
    entries = by_kind(kind)
    width = max(len(e.signature) for e in entries if len(e.signature) <= 30)
    rows = []
    for e in entries:
        if len(e.signature) <= width:
            rows.append(f"  {e.signature.ljust(width)}  {e.meaning}")
        else:
            rows += [f"  {e.signature}", f"  {' ' * width}  {e.meaning}"]
    return "\n".join([head, *rows])


def _entry(entry: Entry) -> str:
    lines = [f"{entry.signature}: {entry.meaning}"]
    if entry.inputs:
        lines.append(f"  takes: {entry.inputs}")
    if entry.aliases:
        lines.append(f"  also written: {' '.join(entry.aliases)}")
    example = entry.example.replace("\n", "\n           ")
    lines += [f"  example: {example}", f"  source: {entry.source}"]
    return "\n".join(lines)


def _short(shown: str) -> str:
    first = shown.split("\n")[0]
    if len(first) > RECALLED_WIDTH or first != shown:
        return first[: RECALLED_WIDTH - 2].rstrip() + " …"
    return first


def everything(context: Context) -> str:
    """All definitions, parameters, settings and tagged results, a line each."""
    settings = context.settings
    ring = f"n = {settings.n}" if settings.n is not None else "n is not fixed"
    lines = [f"ring: {ring}; {', '.join(('q', 't', *context.parameters))} are parameters"]
    usual = Settings(n=settings.n)
    lines += [setting_line(name, settings) for name in Settings.__dataclass_fields__
              if getattr(settings, name) != getattr(usual, name)]
    for name, value in context.names.items():
        if isinstance(value, Function):
            lines.append(_short(value.text.strip()))
        else:
            lines.append(_short(f"{name} = {text(value, settings.show)}"))
    for tag, value in context.results.items():
        lines.append(_short(f"eq_{tag} = {text(value, settings.show)}"))
    return "\n".join(lines)
