"""What each sentence does: a context and a tree go in, a new context and a value come out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

from spanwright import derivations, drawing, guessing, helping, settings, sweep
from spanwright.claims import decide
from spanwright.context import Context, Failure, Function, failure
from spanwright.evaluator import TRUTH_WORDS, Evaluator, brief, worst_coefficient
from spanwright.kernel import reduction
from spanwright.kernel.coefficients import Scalar
from spanwright.kernel.errors import KernelError, Pole
from spanwright.kernel.expansions import Expansion
from spanwright.kernel.families.registry import NAMES as FAMILY_NAMES
from spanwright.kernel.laurent import LaurentPolynomial
from spanwright.rendering import forms
from spanwright.rendering.text import text
from spanwright.values import (
    Definition,
    Infinity,
    ListValue,
    Setting,
    Text,
    as_scalar,
    is_element,
    is_operator,
    kind_name,
)
from spanwright_grammar import syntax
from spanwright_grammar.printing import print_tree
from spanwright_grammar.source import Source
from spanwright_grammar.spelling import nearest
from spanwright_grammar.vocabulary import RESERVED, lookup_all


@dataclass(frozen=True, slots=True)
class Step:
    """What a sentence leaves: the context after it, its value, whether it counts as held."""

    context: Context
    value: Any
    is_tagged: bool = False
    has_failed: bool = False
    remark: str = ""


@dataclass(frozen=True, slots=True)
class Surface:
    """What a sentence may ask of the outside: reading and writing are the session's business."""

    source: Source
    use: Callable[[str, syntax.Node], Context]
    read: Callable[[str, syntax.Node], Any]
    write: Callable[[str, str, syntax.Node], str]


def carry_out(sentence: syntax.Sentence, context: Context, surface: Surface) -> Step:
    """Carry one sentence out; raises Failure, and then nothing has changed."""
    try:
        return _SENTENCES[type(sentence)](sentence, context, surface)
    except KernelError as error:
        # outside every expression: the sentence is the place
        raise Evaluator(context).placed(error, sentence) from error


def shown(value: Any, context: Context) -> str:
    """A value as text in the way that the settings ask for."""
    return text(value, context.settings.show)


# settings


def _fix(node: syntax.Fix, context: Context, surface: Surface) -> Step:
    name = node.setting
    rule = _SETTINGS.get(name)
    if rule is None:
        near = nearest(name, _SETTINGS)
        raise failure("unknown-setting", node.place, f"there is no setting {name}",
                      f"fix {near} = …" if near else "fix n = 3")
    value = rule(node, context)
    changed = replace(context, settings=context.settings.changed(**{name: value}))
    return Step(changed, Setting(name, f"{name} = {_setting_text(name, value, node)}"))


def _setting_text(name: str, value: Any, node: syntax.Fix) -> str:
    if value is None:
        return "free"
    if name == "memory":
        return print_tree(node.value)
    return text(value) if isinstance(value, Scalar) else str(value)


def _whole(
    low: int, high: int, *, may_be_free: bool = False
) -> Callable[[syntax.Fix, Context], Any]:
    def rule(node: syntax.Fix, context: Context) -> int | None:
        if may_be_free and _is_free(node):
            return None
        found = Evaluator(context).integer(node.value, f"the setting {node.setting}")
        if not low <= found <= high:
            raise failure(
                "setting-out-of-range", node.value.place,
                f"{node.setting} lies between {low} and {high:,}; this is {brief(found)}",
                f"fix {node.setting} = {min(max(found, low), high)}")
        return found

    return rule


def _is_free(node: syntax.Fix) -> bool:
    return isinstance(node.value, syntax.Name) and node.value.name == "free"


def _word(node: syntax.Fix, context: Context) -> str:
    allowed = settings.WORDS[node.setting]
    found = node.value.name if isinstance(node.value, syntax.Name) else ""
    if found not in allowed:
        near = nearest(found, allowed) or allowed[0]
        raise failure("setting-out-of-range", node.value.place,
                      f"{node.setting} is one of {', '.join(allowed)}",
                      f"fix {node.setting} = {near}")
    return found


def _basis(node: syntax.Fix, context: Context) -> str | None:
    found = node.value.name if isinstance(node.value, syntax.Name) else ""
    if found == "free":
        return None
    if found not in (*FAMILY_NAMES, "x"):
        raise failure("setting-out-of-range", node.value.place,
                      f"a basis is one of x, {', '.join(FAMILY_NAMES)}, or free",
                      "fix basis = E")
    return found


def _parameter_value(node: syntax.Fix, context: Context) -> Any:
    if isinstance(node.value, syntax.Name) and node.value.name in ("free", node.setting):
        return None
    unfixed = replace(context, settings=context.settings.changed(**{node.setting: None}))
    evaluator = Evaluator(unfixed)
    value = evaluator.value(node.value)
    scalar = as_scalar(value)
    if scalar is not None:
        scalar = _finished(scalar, evaluator, node.value)
    if scalar is None:
        raise failure("wrong-kind", node.value.place,
                      f"{node.setting} takes a scalar; this is {kind_name(value)}",
                      f"fix {node.setting} = 1/2")
    if node.setting in scalar.parameters():
        raise failure("setting-out-of-range", node.value.place,
                      f"{node.setting} cannot be fixed at something that contains it",
                      f"fix {node.setting} = free")
    return scalar


_UNITS = {"kB": 10**3, "MB": 10**6, "GB": 10**9}


def _memory(node: syntax.Fix, context: Context) -> int | None:
    value = node.value
    if _is_free(node):
        return None
    if isinstance(value, syntax.Product) and len(value.factors) == 2:
        amount, unit = (f.node for f in value.factors)
        if isinstance(unit, syntax.Name) and unit.name in _UNITS:
            n_units = Evaluator(context).integer(amount, "an amount of memory")
            size = n_units * _UNITS[unit.name]
            if size >= 64 * 10**6:
                return size
            raise failure("setting-out-of-range", value.place,
                          "a sentence needs 64 MB at least", "fix memory = 2 GB")
    raise failure("setting-out-of-range", value.place,
                  "an amount of memory is a number with MB or GB", "fix memory = 2 GB")


_SETTINGS: dict[str, Callable[[syntax.Fix, Context], Any]] = {
    "n": _whole(1, settings.LARGEST_N), "q": _parameter_value, "t": _parameter_value,
    "basis": _basis, "convention": _word, "hecke": _word, "show": _word,
    "seconds": _whole(1, 10**7, may_be_free=True), "terms": _whole(1, 10**9), "memory": _memory,
    "jobs": _whole(1, 512), "certainty": _word, "counterexamples": _word,
    "seed": _whole(0, 10**18),
}


# definitions


def _check_name(name: str, node: syntax.Node, context: Context) -> None:
    if name in RESERVED or name in TRUTH_WORDS or name == "free":
        raise failure("name-taken", node.place,
                      f"{name} is a word of the language and cannot be given a new meaning",
                      f"let {name}1 = …")


def _let_value(node: syntax.LetValue, context: Context, surface: Surface) -> Step:
    _check_name(node.name, node, context)
    if isinstance(node.value, syntax.ReadFile):
        value = surface.read(node.value.path, node.value)
    else:
        evaluator = Evaluator(context)
        value = evaluator.value(node.value)
        value = _finished(value, evaluator, node.value)
    if isinstance(value, Infinity):
        raise failure("wrong-kind", node.value.place, "infinity is no value")
    changed = context.with_name(node.name, value)
    return Step(changed, Definition(node.name, f"{node.name} = {shown(value, context)}", value))


def _let_function(node: syntax.LetFunction, context: Context, surface: Surface) -> Step:
    _check_name(node.name, node, context)
    return _defined(node, node.name, node.parameters, node.value, context, surface, False, False)


def _let_family(node: syntax.LetFamily, context: Context, surface: Surface) -> Step:
    _check_name(node.name, node, context)
    return _defined(
        node, node.name, node.pattern, node.value, context, surface, True, node.is_whole_index)


def _defined(
    node: syntax.Node, name: str, parameters: tuple[str, ...], body: syntax.Expression,
    context: Context, surface: Surface, is_family: bool, is_whole_index: bool,
) -> Step:
    for parameter in parameters:
        _check_name(parameter, node, context)
    if len(set(parameters)) < len(parameters):
        raise failure("name-taken", node.place, "two arguments have the same name")
    text_of = surface.source.slice(node.place)
    function = Function(
        name, parameters, body, is_family, is_whole_index, text_of, context.local)
    return Step(context.with_name(name, function), Definition(name, text_of.strip(), function))


def _let_parameters(node: syntax.LetParameters, context: Context, surface: Surface) -> Step:
    for name in node.names:
        # q, t, alpha and beta are parameters already, and may be said to be
        if not any(entry.kind == "parameter" for entry in lookup_all(name)):
            _check_name(name, node, context)
    names = tuple(dict.fromkeys((*context.parameters, *node.names)))
    remaining = {k: v for k, v in context.names.items() if k not in node.names}
    changed = replace(context, parameters=names, names=remaining)
    fresh = tuple(dict.fromkeys(node.names))
    listed = ", ".join(fresh)
    verb = "is a parameter" if len(fresh) == 1 else "are parameters"
    return Step(changed, Definition(listed, f"{listed} {verb}"))


# expressions


def _finished(value: Any, evaluator: Evaluator, node: syntax.Node) -> Any:
    """A value as it is shown and kept: settings applied."""
    basis = evaluator.context.settings.basis
    try:
        value = _fixed(value, evaluator, node)
        if basis and isinstance(value, LaurentPolynomial | Expansion):
            value = in_basis(value, basis, evaluator)
            # coefficients of a change of basis contain parameters that may be fixed
            value = _fixed(value, evaluator, node)
        return value
    except KernelError as error:
        raise evaluator.placed(error, node) from error


def _fixed(value: Any, evaluator: Evaluator, node: syntax.Node) -> Any:
    """A value with `fix q = …` and `fix t = …` applied to its coefficients."""
    try:
        return evaluator.algebra.specialised_coefficients(value)
    except Pole as error:
        images = evaluator.context.settings.images()
        point = ", ".join(f"{name} = {text(v)}" for name, v in images.items())
        order, element = worst_coefficient(value, images) or (error.order, "")
        named = "a pole" if order == 1 else f"a pole of order {order}"
        place = f" in the coefficient of {element}" if element else ""
        hints = [f"fix {name} = free" for name in images]
        raise failure("pole", node.place, f"{named} at {point}{place}", *hints) from error


def in_basis(value: Any, basis: str, evaluator: Evaluator) -> Any:
    """A value expanded in a family, or in monomials for `x`."""
    n = evaluator.n or value.n
    if basis == "x":
        return reduction.to_polynomial(value, n)
    return reduction.expand(value, evaluator.algebra.family(basis), n)


def _expression(
    node: syntax.ExpressionSentence, context: Context, surface: Surface
) -> Step:
    evaluator = Evaluator(context)
    value = _reduced(evaluator.value(node.expression), evaluator, node.expression)
    if isinstance(value, Infinity):
        raise failure("wrong-kind", node.place, "infinity is the target of a limit, no value")
    remark = evaluator.remark if isinstance(value, LaurentPolynomial) else ""
    return Step(context, value, is_tagged=True, remark=remark)


def _reduced(value: Any, evaluator: Evaluator, node: syntax.Node) -> Any:
    """A value in canonical form, operator words straightened, settings applied."""
    try:
        value = evaluator.algebra.reduced(value)
    except KernelError as error:
        raise evaluator.placed(error, node) from error
    return _finished(value, evaluator, node)


def _expand(node: syntax.Expand, context: Context, surface: Surface) -> Step:
    evaluator = Evaluator(context)
    value = evaluator.value(node.expression)
    try:
        return Step(context, expanded(value, node.targets, evaluator, node), is_tagged=True)
    except KernelError as error:
        raise evaluator.placed(error, node.expression) from error


def expanded(
    value: Any, targets: tuple[str, ...], evaluator: Evaluator, node: syntax.Node
) -> Any:
    """`expand … in …`: a family for elements, letters for operators."""
    if isinstance(value, ListValue):
        return ListValue(tuple(expanded(v, targets, evaluator, node) for v in value.items))
    if is_operator(value):
        from spanwright.kernel.operators.canonical import straighten

        word = value.to_operator() if hasattr(value, "to_operator") else value
        return evaluator.algebra.specialised_coefficients(straighten(word, targets))
    if not is_element(value):
        raise failure("wrong-kind", node.place, f"{kind_name(value)} has no expansion",
                      "expand x_1 E_mu in E")
    if len(targets) != 1 or targets[0] not in (*FAMILY_NAMES, "x"):
        wrong = next((t for t in targets if t not in (*FAMILY_NAMES, "x")), targets[0])
        raise failure("wrong-kind", node.place,
                      f"{wrong} is no basis here: one of x, {', '.join(FAMILY_NAMES)}",
                      "expand f in E")
    evaluator.require_n(node)
    scalar = as_scalar(value)
    element = value if scalar is None else scalar
    found = in_basis(evaluator.algebra.aligned(element), targets[0], evaluator)
    return _fixed(found, evaluator, node)


def _claim(node: syntax.Claim, context: Context, surface: Surface) -> Step:
    truth = decide(node.statement, context)
    return Step(context, truth, has_failed=not truth.holds)


# many cases


def _for(node: syntax.For, context: Context, surface: Surface) -> Step:
    tally = sweep.run_for(node, context, surface, carry_out)
    return Step(context, tally, has_failed=not tally.holds)


def _find(node: syntax.Find, context: Context, surface: Surface) -> Step:
    return Step(context, sweep.run_find(node, context, surface, carry_out), is_tagged=True)


def _tabulate(node: syntax.Tabulate, context: Context, surface: Surface) -> Step:
    return Step(context, sweep.run_tabulate(node, context, surface, carry_out))


def _guess(node: syntax.Guess, context: Context, surface: Surface) -> Step:
    return Step(context, guessing.run_guess(node, context))


# explanations and renderings


def _derive(node: syntax.Derive, context: Context, surface: Surface) -> Step:
    return Step(context, derivations.derive(node, Evaluator(context)))


def _draw(node: syntax.Draw, context: Context, surface: Surface) -> Step:
    evaluator = Evaluator(context)
    value = _finished(evaluator.value(node.expression), evaluator, node.expression)
    try:
        drawn = drawing.picture(value)
    except drawing.NotDrawable as error:
        raise failure("wrong-kind", node.expression.place, str(error), "draw (2,0,1)") from error
    if node.path is None:
        return Step(context, Text(drawing.as_text(drawn)))
    where = surface.write(node.path, drawing.as_svg(drawn), node)
    return Step(context, Text(f"# drawn in {where}"))


def _show(node: syntax.Show, context: Context, surface: Surface) -> Step:
    evaluator = Evaluator(context)
    value = _reduced(evaluator.value(node.expression), evaluator, node.expression)
    return Step(context, Text(_rendered(value, node.form, context, node)))


def _rendered(value: Any, form: str, context: Context, node: syntax.Node) -> str:
    found = forms.rendered(value, form, context.settings.show)
    if found is None:
        near = nearest(form, forms.NAMES) or "latex"
        raise failure("unknown-form", node.place,
                      f"there is no form {form}: one of {', '.join(forms.NAMES)}",
                      f"show f as {near}")
    return found


def _write(node: syntax.Write, context: Context, surface: Surface) -> Step:
    evaluator = Evaluator(context)
    value = _reduced(evaluator.value(node.expression), evaluator, node.expression)
    content = _rendered(value, node.form, context, node)
    where = surface.write(node.path, content + "\n", node)
    return Step(context, Text(f"{len(content) + 1:,} characters written to {where}"))


# memory


def _use(node: syntax.Use, context: Context, surface: Surface) -> Step:
    after = surface.use(node.path, node)
    fresh = [name for name in after.names if after.names[name] is not context.names.get(name)]
    names = f": {', '.join(fresh)}" if fresh else ""
    return Step(after, Definition(node.path, f"{node.path} read{names}"))


def _recall(node: syntax.Recall, context: Context, surface: Surface) -> Step:
    subject = node.subject
    if subject is None:
        return Step(context, Text(helping.everything(context)))
    if isinstance(subject, syntax.Number):
        subject = syntax.Subscripted("eq", subject, subject.place)
    evaluator = Evaluator(context)
    if isinstance(subject, syntax.Name):
        found = context.names.get(subject.name)
        if isinstance(found, Function):
            return Step(context, Text(found.text.strip()))
        if found is None and subject.name in context.parameters:
            return Step(context, Text(f"{subject.name} is a parameter"))
        if found is None and subject.name in _SETTINGS:
            return Step(context, Text(helping.setting_line(subject.name, context.settings)))
        if found is None:
            raise _not_defined(subject, context)
        return Step(context, Text(f"{subject.name} = {shown(found, context)}"))
    value = evaluator.value(subject)
    return Step(context, Text(f"{print_tree(subject)} = {shown(value, context)}"))


def _not_defined(subject: syntax.Name, context: Context) -> Failure:
    """Why a name can be neither recalled nor forgotten."""
    name = subject.name
    if name in _SETTINGS:
        return failure("wrong-kind", subject.place,
                       f"{name} is a setting: it is changed by `fix`, not forgotten",
                       f"fix {name} = …")
    if name in RESERVED:
        return failure("wrong-kind", subject.place,
                       f"{name} is a word of the language, not a definition of this session",
                       f"help {name}")
    return Evaluator(context).unknown(name, subject.place)


def _tag_of(subject: syntax.Node, context: Context) -> int | None:
    """The tag that `7` or `eq_7` names, else None."""
    if isinstance(subject, syntax.Number):
        return Evaluator(context).integer(subject, "a tag")
    if isinstance(subject, syntax.Subscripted) and subject.head == "eq":
        return Evaluator(context).integer(subject.index, "a tag")
    return None


def _forget(node: syntax.Forget, context: Context, surface: Surface) -> Step:
    names = dict(context.names)
    results = dict(context.results)
    parameters = context.parameters
    for subject in node.subjects:
        if isinstance(subject, syntax.Name) and subject.name in names:
            del names[subject.name]
        elif isinstance(subject, syntax.Name) and subject.name in parameters:
            parameters = tuple(p for p in parameters if p != subject.name)
        elif (tag := _tag_of(subject, context)) is not None:
            if tag not in results:
                raise failure("unknown-name", subject.place, f"no result has the tag {brief(tag)}")
            del results[tag]
        elif isinstance(subject, syntax.Name):
            raise _not_defined(subject, context)
        else:
            raise failure("wrong-kind", subject.place, "a name or a tag can be forgotten",
                          "forget f", "forget 7")
    changed = replace(context, names=names, results=results, parameters=parameters)
    listed = ", ".join(print_tree(s) for s in node.subjects)
    return Step(changed, Definition(listed, f"{listed} forgotten"))


def _remark(node: syntax.Remark, context: Context, surface: Surface) -> Step:
    return Step(context, Text(node.text, "remark"))


def _help(node: syntax.Help, context: Context, surface: Surface) -> Step:
    found = helping.page(node.topic)
    if found is None and node.topic is not None:
        found = helping.own_page(node.topic, context)
    if found is None:
        near = helping.nearest_topic(node.topic or "")
        raise failure("unknown-topic", node.place, f"help has nothing under {node.topic}",
                      f"help {near}" if near else "help")
    return Step(context, Text(found, "help"))


def _quit(node: syntax.Quit, context: Context, surface: Surface) -> Step:
    return Step(context, Text("", "quit"))


_SENTENCES: dict[type, Callable[[Any, Context, Surface], Step]] = {
    syntax.Fix: _fix, syntax.LetValue: _let_value, syntax.LetFunction: _let_function,
    syntax.LetFamily: _let_family, syntax.LetParameters: _let_parameters,
    syntax.ExpressionSentence: _expression, syntax.Expand: _expand, syntax.Claim: _claim,
    syntax.For: _for, syntax.Find: _find, syntax.Tabulate: _tabulate, syntax.Guess: _guess,
    syntax.Derive: _derive, syntax.Draw: _draw, syntax.Show: _show, syntax.Write: _write,
    syntax.Use: _use, syntax.Recall: _recall, syntax.Forget: _forget, syntax.Remark: _remark,
    syntax.Help: _help, syntax.Quit: _quit,
}

