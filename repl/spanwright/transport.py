"""A context as plain data, for evaluators that were not forked from this one, and for hashes.

Values travel as text of the language together with their number of variables: what is printed
parses back.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import asdict, replace
from typing import Any

from spanwright.context import Context, Function
from spanwright.evaluator import Evaluator
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.expansions import Expansion
from spanwright.rendering.text import text
from spanwright.settings import Settings
from spanwright.values import ListValue, is_operator
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse, parse_expression
from spanwright_grammar.source import Source

# what changes neither values nor their text
NOT_SENT = ("jobs", "seconds", "memory")


def packed_value(value: Any, n: int | None) -> Any:
    """A value as JSON holds it: integers and indices as they are, others as text.

    The text of an expansion or an operator does not say in which convention it stands, and the
    one in force may be another by now: it goes along.
    """
    if isinstance(value, int) and not isinstance(value, bool):
        return value
    if isinstance(value, tuple) and all(isinstance(part, int) for part in value):
        return list(value)
    if isinstance(value, ListValue):
        return {"items": [packed_value(item, n) for item in value.items]}
    found: dict[str, Any] = {"n": _n_of(value) or n, "text": text(value)}
    if isinstance(value, Expansion) and value.family.name == "E (reversed)":
        found["convention"] = "reversed"
    if is_operator(value):
        found["hecke"] = value.normalisation
    return found


def unpacked_value(data: Any, context: Context) -> Any:
    """The inverse of `packed_value`."""
    if isinstance(data, int):
        return data
    if isinstance(data, list):
        return tuple(data)
    if "items" in data:
        return ListValue(tuple(unpacked_value(item, context) for item in data["items"]))
    settings = Settings(
        n=data["n"], hecke=data.get("hecke", context.settings.hecke),
        convention=data.get("convention", "standard"))
    plain = Context(settings, {}, context.parameters)
    evaluator = Evaluator(plain)
    return evaluator.algebra.reduced(evaluator.value(parse_expression(data["text"])))


def _n_of(value: Any) -> int | None:
    found = getattr(value, "n", None)
    return found if isinstance(found, int) else None


def packed_context(context: Context, sentence: syntax.Node) -> dict[str, Any]:
    """What of a context the sentence can look up, as plain data."""
    settings = {
        key: text(value) if isinstance(value, Scalar) else value
        for key, value in ((f, getattr(context.settings, f)) for f in asdict(Settings()))
        if key not in NOT_SENT}
    n = context.settings.n
    names = {}
    mentioned = _mentioned(sentence, context)
    for name, value in {**context.names, **context.local}.items():
        if name in mentioned:
            names[name] = ({"let": value.text} if isinstance(value, Function)
                           else packed_value(value, n))
    results = {}
    if "eq" in mentioned:
        results = {str(tag): packed_value(v, n) for tag, v in context.results.items()}
    return {"settings": settings, "parameters": list(context.parameters), "names": names,
            "results": results}


def unpacked_context(data: dict[str, Any]) -> Context:
    """The inverse of `packed_context`, for what the sentence can look up."""
    plain = Context(Settings(hecke=data["settings"]["hecke"]), {}, tuple(data["parameters"]))
    images = {name: None if data["settings"][name] is None else unpacked_value(
        {"n": 1, "text": data["settings"][name]}, plain) for name in ("q", "t")}
    settings = Settings(**{**data["settings"], **images})
    context = replace(plain, settings=settings)
    names = {name: _function(v["let"]) if isinstance(v, dict) and "let" in v
             else unpacked_value(v, context) for name, v in data["names"].items()}
    results = {int(tag): unpacked_value(v, context) for tag, v in data["results"].items()}
    return replace(context, names=names, results=results)


def _function(sentence: str) -> Function:
    node = next(chunk.sentence for chunk in parse(Source(sentence, "definition")).chunks)
    if isinstance(node, syntax.LetFunction):
        return Function(node.name, node.parameters, node.value, False, False, sentence)
    assert isinstance(node, syntax.LetFamily)
    return Function(node.name, node.pattern, node.value, True, node.is_whole_index, sentence)


def _mentioned(sentence: syntax.Node, context: Context) -> frozenset[str]:
    """All names that a sentence mentions, through the definitions that it uses."""
    found: set[str] = set()
    waiting: list[syntax.Node] = [sentence]
    while waiting:
        for name in names_in(waiting.pop()):
            if name not in found:
                found.add(name)
                value = context.names.get(name)
                if isinstance(value, Function):
                    waiting.append(value.body)
    return frozenset(found)


def names_in(node: syntax.Node) -> Iterable[str]:
    """The names that stand in a tree."""
    for inner in syntax.walk(node):
        if isinstance(inner, syntax.Name):
            yield inner.name
        elif isinstance(inner, syntax.Subscripted):
            yield inner.head
        elif isinstance(inner, syntax.Call):
            yield inner.function
