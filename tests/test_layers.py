"""Holds the project's shape: who may import whom, who may print or open files, what lies where.

The tables below are the rules; a new module needs a row in MAY_IMPORT before the suite is green.
Everything is read from the syntax tree, nothing is imported.
"""

from __future__ import annotations

import ast
import re
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from graphlib import TopologicalSorter
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
SOURCE_ROOTS = (ROOT / "grammar", ROOT / "repl")
PACKAGES = ("spanwright", "spanwright_grammar")

# --- the rules ------------------------------------------------------------------------------

_TREE = tuple(f"spanwright_grammar.{name}" for name in ("source", "diagnostics", "syntax"))
_WORDS = tuple(f"spanwright_grammar.{name}" for name in ("spelling", "vocabulary"))
_TEXT = (
    *_TREE,
    *_WORDS,
    *(f"spanwright_grammar.{name}" for name in ("lexing", "parsing", "printing")),
)
_LANGUAGE = (*_TEXT, "spanwright_grammar.bindings", "spanwright_grammar.checks")
_GRAMMAR = (
    *_LANGUAGE,
    *(
        f"spanwright_grammar.{name}"
        for name in (
            "completion",
            "document",
            "formatting",
            "highlighting",
            "hover",
            "navigation",
            "outline",
            "reference",
        )
    ),
)
# What those above the language see of it: the package's own names too.
_PUBLIC_GRAMMAR = (*_GRAMMAR, "spanwright_grammar")
_VALUES = ("spanwright.kernel", "spanwright.values")
_SHOWN = (*_VALUES, "spanwright.rendering")
_GROUND = (*_SHOWN, "spanwright.settings", "spanwright.context")
_COMPUTED = (*_GROUND, "spanwright.algebra", "spanwright.evaluator")
_ANSWERS = (
    *_COMPUTED,
    *(f"spanwright.{name}" for name in ("claims", "derivations", "helping", "limits")),
)
_AROUND = (
    *_ANSWERS,
    *(f"spanwright.{name}" for name in ("sentences", "files", "replies", "views")),
)
_MANY = tuple(f"spanwright.{name}" for name in (
    "cases", "finished", "gateway", "guessing", "means", "pool", "sweep", "tables", "tally",
    "transport"))
_SESSION = (*_AROUND, *_MANY, "spanwright.drawing", "spanwright.session")
_RECORDS = ("spanwright", *_LANGUAGE, "spanwright_grammar", *_SESSION)
_FRONT = (
    "spanwright",
    *(f"spanwright.{name}" for name in ("conversation", "replies", "services")),
    "spanwright.rendering",
)

# Each unit is a module, or a package with all below it; it may import itself and what its row
# names. The two top packages stand for their __init__ alone.
MAY_IMPORT: dict[str, tuple[str, ...]] = {
    # The language: source < diagnostics, syntax < lexing < parsing < bindings < checks < leaves.
    "spanwright_grammar.source": (),
    "spanwright_grammar.diagnostics": ("spanwright_grammar.source",),
    "spanwright_grammar.syntax": ("spanwright_grammar.source",),
    "spanwright_grammar.spelling": (),
    "spanwright_grammar.vocabulary": (),
    "spanwright_grammar.printing": ("spanwright_grammar.source", "spanwright_grammar.syntax"),
    "spanwright_grammar.lexing": (*_TREE, *_WORDS),
    "spanwright_grammar.parsing": (*_TREE, *_WORDS, "spanwright_grammar.lexing"),
    "spanwright_grammar.bindings": _TEXT,
    "spanwright_grammar.checks": (*_TEXT, "spanwright_grammar.bindings"),
    "spanwright_grammar.document": _LANGUAGE,
    "spanwright_grammar.outline": (*_LANGUAGE, "spanwright_grammar.document"),
    "spanwright_grammar.navigation": (
        *_LANGUAGE,
        "spanwright_grammar.document",
        "spanwright_grammar.formatting",
    ),
    "spanwright_grammar.completion": _LANGUAGE,
    "spanwright_grammar.formatting": _LANGUAGE,
    "spanwright_grammar.highlighting": (*_LANGUAGE, "spanwright_grammar.document"),
    "spanwright_grammar.hover": _LANGUAGE,
    "spanwright_grammar.reference": _WORDS,
    "spanwright_grammar": _GRAMMAR,
    # Computing: kernel < values < rendering, settings < context < algebra < builtins < evaluator
    # < sentences < session < records.
    "spanwright.kernel": (),
    "spanwright.values": ("spanwright.kernel",),
    "spanwright.settings": ("spanwright.kernel", "spanwright_grammar.vocabulary"),
    "spanwright.rendering": (*_VALUES, "spanwright.tally"),
    "spanwright.limits": (),
    "spanwright.context": (*_TREE, *_VALUES, "spanwright.settings"),
    "spanwright.algebra": (*_SHOWN, "spanwright.settings"),
    "spanwright.theory": (*_TREE, *_GROUND),
    "spanwright.builtins": (*_TREE, *_WORDS, *_GROUND, "spanwright.theory"),
    "spanwright.evaluator": (
        *_LANGUAGE,
        *_GROUND,
        "spanwright.algebra",
        "spanwright.builtins",
    ),
    "spanwright.modular_action": ("spanwright.kernel", "spanwright.algebra"),
    "spanwright.witness": (
        *_VALUES,
        "spanwright.settings",
        "spanwright.algebra",
        "spanwright.modular_action",
    ),
    "spanwright.claims": (*_TREE, *_COMPUTED, "spanwright.witness"),
    "spanwright.derivations": (*_TREE, *_COMPUTED),
    "spanwright.helping": (*_WORDS, *_GROUND, "spanwright.limits"),
    "spanwright.sentences": (*_LANGUAGE, *_ANSWERS, *_MANY, "spanwright.drawing"),
    "spanwright.views": _SHOWN,
    "spanwright.files": (),
    "spanwright.replies": (),
    "spanwright.session": (
        *_LANGUAGE,
        "spanwright_grammar",
        *_AROUND,
        "spanwright.means",
        "spanwright.reading",
    ),
    "spanwright": _SESSION,
    "spanwright.headers": (
        "spanwright",
        "spanwright.kernel",
        "spanwright.rendering",
        "spanwright.settings",
    ),
    "spanwright.log_marks": (),
    "spanwright.log_files": ("spanwright.log_marks",),
    "spanwright.log_format": (
        *_LANGUAGE, "spanwright.log_marks", "spanwright.rendering", "spanwright.replies"),
    "spanwright.journal": (
        *_LANGUAGE,
        *(f"spanwright.{name}" for name in (
            "files", "headers", "log_files", "log_format", "log_marks", "replies")),
    ),
    "spanwright.replay": (
        *_LANGUAGE,
        *(
            f"spanwright.{name}"
            for name in (
                "conversation", "files", "headers", "journal", "log_format", "replies",
                "settings")
        ),
    ),
    "spanwright.reading": (*_LANGUAGE, *_COMPUTED),
    # Many cases: tally, means, transport < cases < finished < pool < gateway < sweep < sentences.
    "spanwright.tally": (),
    "spanwright.tables": (),
    "spanwright.confinement": (),
    "spanwright.means": ("spanwright.files",),
    "spanwright.drawing": _SHOWN,
    "spanwright.transport": (*_LANGUAGE, *_COMPUTED),
    "spanwright.guessing": (*_LANGUAGE, *_COMPUTED, "spanwright.transport"),
    "spanwright.cases": (*_LANGUAGE, *_COMPUTED, "spanwright.transport"),
    "spanwright.finished": ("spanwright.cases",),
    "spanwright.pool": (
        "spanwright.kernel",
        *(f"spanwright.{name}" for name in ("cases", "confinement", "finished", "means")),
    ),
    "spanwright.gateway": tuple(f"spanwright.{name}" for name in ("cases", "finished", "pool")),
    "spanwright.sweep": (*_LANGUAGE, *_COMPUTED, "spanwright.files", "spanwright.confinement",
        *(name for name in _MANY if name not in ("spanwright.sweep", "spanwright.guessing"))),
    # Processes of their own: a worker, and the client of a cluster.
    "spanwright.casework": (*_LANGUAGE, *_SESSION, "spanwright.confinement"),
    "spanwright.cluster": ("spanwright.confinement",),
    "spanwright.report": (
        *_LANGUAGE,
        *_COMPUTED,
        "spanwright.drawing",
        "spanwright.log_format",
    ),
    "spanwright.log_commands": tuple(
        f"spanwright.{name}"
        for name in (
            "conversation",
            "files",
            "headers",
            "journal",
            "log_files",
            "replay",
            "report",
            "session",
            "settings",
        )
    ),
    # Processes: the front side sees plain data, the evaluator side the session.
    "spanwright.frames": (),
    "spanwright.process": ("spanwright.files", "spanwright.frames", "spanwright.replies"),
    "spanwright.conversation": (
        "spanwright_grammar.source",
        *(f"spanwright.{name}" for name in (
            "files", "process", "replies", "session", "settings")),
    ),
    "spanwright.crashes": (*_TREE, "spanwright.context"),
    "spanwright.evaluating": (
        *_TREE,
        "spanwright_grammar.parsing",
        *_SESSION,
        "spanwright.confinement",
        "spanwright.crashes",
        "spanwright.frames",
    ),
    # Showing: shell and server never see each other; cli sees all; nobody sees cli.
    "spanwright.services": ("spanwright", *_PUBLIC_GRAMMAR, "spanwright.replies"),
    "spanwright.shell": (
        *_FRONT,
        *_PUBLIC_GRAMMAR,
        *(f"spanwright.{name}" for name in ("files", "journal", "log_commands", "log_files")),
    ),
    "spanwright.workspace": (
        *_PUBLIC_GRAMMAR,
        *("spanwright", "spanwright.services", "spanwright.files"),
    ),
    "spanwright.server": (
        *_FRONT,
        *_PUBLIC_GRAMMAR,
        # its evaluator is a process of its own
        *(f"spanwright.{name}" for name in ("confinement", "files", "session", "workspace")),
    ),
    "spanwright.editor_commands": (
        *_PUBLIC_GRAMMAR,
        *(f"spanwright.{name}" for name in ("files", "server", "workspace")),
    ),
    "spanwright.cli": (
        *_PUBLIC_GRAMMAR,
        *_SESSION,
        "spanwright.conversation",
        *(
            f"spanwright.{name}"
            for name in (
                "editor_commands", "headers", "journal", "log_commands", "log_files", "replay",
                "sweep",
                "report", "services", "shell", "server",
            )
        ),
        "spanwright",
    ),
    "spanwright.__main__": ("spanwright.cli",),
}

# Packages of others: where each may be imported. A package without a row is not a dependency.
THIRD_PARTY: dict[str, tuple[str, ...]] = {
    "distributed": ("spanwright.cluster",),
    "pyarrow": ("spanwright.tables",),
    "flint": ("spanwright.kernel",),
    "lark": ("spanwright_grammar.parsing",),
    "lsprotocol": ("spanwright.server",),
    "platformdirs": ("spanwright.cli", "spanwright.log_files", "spanwright.shell"),
    "prompt_toolkit": ("spanwright.shell",),
    "pygls": ("spanwright.server",),
    "sympy": ("spanwright",),
}

# Slow to load, so imported inside the functions that need them (0.25 s and more, measured).
ONLY_INSIDE_FUNCTIONS = ("distributed", "spanwright.server", "spanwright.shell", "sympy")

PRINTS_IN = ("spanwright.cli", "spanwright.shell.loop")
OPENS_FILES_IN = (
    "spanwright.cli",
    "spanwright.files",
    # how much memory is free and mapped, which /proc says
    "spanwright.confinement",
    # the device that swallows what is printed
    "spanwright.evaluating",
    "spanwright.editor_commands",
    "spanwright.finished",
    "spanwright.pool",
    "spanwright.tables",
    "spanwright.journal",
    "spanwright.log_files",
    "spanwright.replay",
    "spanwright.report",
    "spanwright.shell.history",
    # The grammar itself, and the cache of its tables.
    "spanwright_grammar.parsing",
)

# The kernel has no clock, and its randomness is always random.Random(seed).
NOT_IN_KERNEL = ("datetime", "secrets", "time", "uuid")

TOP_LEVEL = {"DEVELOPERS.md", "LICENSE", "README.md", "grammar", "pyproject.toml", "repl"} | {
    "scripts",
    "tests",
}
# What building leaves behind; .gitignore names them too.
TOP_LEVEL_LEFT_BEHIND = {"__pycache__", "build", "dist"}

MACHINE_PATH = re.compile(r"(?<![\w.])(?:/(?:work|root)/|/(?:home|Users)/\w|[A-Z]:\\+Users)")

_FILE_METHODS = {"fdopen", "open", "read_bytes", "read_text", "write_bytes", "write_text"}

# --- the checker ----------------------------------------------------------------------------


def is_below(module: str, parent: str) -> bool:
    """Whether `module` is `parent` or lies in it."""
    return module == parent or module.startswith(parent + ".")


def is_below_any(module: str, parents: tuple[str, ...]) -> bool:
    """Whether `module` is one of `parents` or lies in one."""
    return any(is_below(module, parent) for parent in parents)


def unit_of(module: str) -> str | None:
    """The row of MAY_IMPORT that speaks for `module`: the longest that fits."""
    fitting = [
        unit
        for unit in MAY_IMPORT
        if module == unit or (unit not in PACKAGES and is_below(module, unit))
    ]
    return max(fitting, key=len, default=None)


def module_name(path: Path, root: Path) -> str:
    """The dotted name of a file below a source root."""
    parts = path.relative_to(root).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def source_files() -> list[tuple[str, Path]]:
    """Every module of the two packages, with its dotted name."""
    return sorted(
        (module_name(path, root), path) for root in SOURCE_ROOTS for path in root.rglob("*.py")
    )


MODULES = frozenset(name for name, _ in source_files())


@dataclass(frozen=True)
class Import:
    """One imported module: where, and whether it waits until a function is called."""

    line: int
    module: str
    is_late: bool


def _is_type_checking(node: ast.AST) -> bool:
    return isinstance(node, ast.If) and ast.unparse(node.test) in {
        "TYPE_CHECKING",
        "typing.TYPE_CHECKING",
    }


def _statements(node: ast.AST, is_late: bool = False) -> Iterator[tuple[ast.AST, bool]]:
    """Every node, with whether it lies in a function or in a block that only type checkers read."""
    for child in ast.iter_child_nodes(node):
        yield child, is_late
        is_function = isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
        if _is_type_checking(child):
            assert isinstance(child, ast.If)
            for statement in child.body:
                yield statement, True
                yield from _statements(statement, True)
            for statement in child.orelse:
                yield statement, is_late
                yield from _statements(statement, is_late)
        else:
            yield from _statements(child, is_late or is_function)


def imports(tree: ast.Module) -> Iterator[Import]:
    """Every absolute import of a module, those by a literal name at run time included."""
    for node, is_late in _statements(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield Import(node.lineno, alias.name, is_late)
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module:
            for alias in node.names:
                longer = f"{node.module}.{alias.name}"
                is_module = longer in MODULES or longer in MAY_IMPORT
                yield Import(node.lineno, longer if is_module else node.module, is_late)
        elif isinstance(node, ast.Call) and ast.unparse(node.func) in {
            "__import__",
            "import_module",
            "importlib.import_module",
        }:
            match node.args:
                case [ast.Constant(value=str(name)), *_]:
                    yield Import(node.lineno, name, is_late)


def form_faults(tree: ast.Module) -> Iterator[str]:
    """What is wrong with any Python file of ours, wherever it lies."""
    if not (ast.get_docstring(tree) or "").strip():
        yield "line 1: opens with no docstring"
    for node in ast.walk(tree):
        if isinstance(node, ast.ImportFrom):
            if node.level:
                yield f"line {node.lineno}: relative import"
            if any(alias.name == "*" for alias in node.names):
                yield f"line {node.lineno}: star import"


def import_faults(module: str, tree: ast.Module) -> Iterator[str]:
    """Imports that the tables do not allow."""
    unit = unit_of(module)
    if unit is None:
        yield f"{module} has no row in MAY_IMPORT of tests/test_layers.py"
        return
    for found in imports(tree):
        top = found.module.partition(".")[0]
        where = f"line {found.line}: {module} imports {found.module}"
        if top in PACKAGES:
            target = unit_of(found.module)
            if target is None:
                yield f"{where}, which has no row in MAY_IMPORT"
            elif target != unit and target not in MAY_IMPORT[unit]:
                yield f"{where}: {unit} may not see {target}"
        elif top in THIRD_PARTY:
            if not is_below_any(module, THIRD_PARTY[top]):
                yield f"{where}: only for {', '.join(THIRD_PARTY[top])}"
        elif top not in sys.stdlib_module_names:
            yield f"{where}: no row in THIRD_PARTY"
        elif is_below(module, "spanwright.kernel") and top in NOT_IN_KERNEL:
            yield f"{where}: the kernel has no clock and no unseeded randomness"
        for slow in ONLY_INSIDE_FUNCTIONS:
            if is_below(found.module, slow) and not is_below(module, slow) and not found.is_late:
                yield f"{where}: {slow} is imported inside the function that needs it"


def call_faults(module: str, tree: ast.Module) -> Iterator[str]:
    """Printing and opening files where it is not allowed."""
    for node in ast.walk(tree):
        if not isinstance(node, ast.Call):
            continue
        name = node.func.id if isinstance(node.func, ast.Name) else ""
        method = node.func.attr if isinstance(node.func, ast.Attribute) else ""
        where = f"line {node.lineno}: {module}"
        if name == "print" and module not in PRINTS_IN:
            yield f"{where} prints: only for {', '.join(PRINTS_IN)}"
        if (name == "open" or method in _FILE_METHODS) and module not in OPENS_FILES_IN:
            yield f"{where} opens a file: only for {', '.join(OPENS_FILES_IN)}"


def randomness_faults(module: str, tree: ast.Module) -> Iterator[str]:
    """Randomness in the kernel that is not random.Random(seed)."""
    if not is_below(module, "spanwright.kernel"):
        return
    for node in ast.walk(tree):
        match node:
            case ast.ImportFrom(module="random", names=names) if any(
                alias.name != "Random" for alias in names
            ):
                yield f"line {node.lineno}: {module} uses unseeded randomness"
            case ast.Attribute(value=ast.Name(id="random"), attr=attribute) if (
                attribute != "Random"
            ):
                yield f"line {node.lineno}: {module} uses unseeded randomness"
            case ast.Attribute(value=ast.Name(id="os"), attr="urandom"):
                yield f"line {node.lineno}: {module} uses unseeded randomness"
            case ast.Call(
                func=ast.Name(id="Random") | ast.Attribute(attr="Random"), args=[], keywords=[]
            ):
                yield f"line {node.lineno}: {module} seeds its randomness with nothing"


def faults(module: str, text: str) -> list[str]:
    """Every rule that the module's text breaks."""
    tree = ast.parse(text)
    return [
        *form_faults(tree),
        *import_faults(module, tree),
        *call_faults(module, tree),
        *randomness_faults(module, tree),
    ]


def strangers(names: set[str]) -> set[str]:
    """Names that do not belong at the top of the repository; dot-files may lie there."""
    return {name for name in names - TOP_LEVEL - TOP_LEVEL_LEFT_BEHIND if not name.startswith(".")}


def machine_paths(text: str) -> list[str]:
    """The lines of a text that name a place on somebody's machine."""
    return [line.strip() for line in text.splitlines() if MACHINE_PATH.search(line)]


def project_files() -> list[Path]:
    """Every file of ours: no caches, no environment, nothing that building left behind."""
    tops = [ROOT / name for name in TOP_LEVEL] + [ROOT / ".ci", ROOT / ".gitignore"]
    below = [path for top in tops for path in (top.rglob("*") if top.is_dir() else [top])]
    return sorted(
        path
        for path in below
        if path.is_file()
        and "__pycache__" not in path.parts
        and not any(part.startswith(".") for part in path.relative_to(ROOT).parts[1:])
    )


def other_python_files() -> list[Path]:
    """Python outside the packages: tests and scripts, those without a suffix included."""
    return [
        path
        for path in project_files()
        if path.relative_to(ROOT).parts[0] in {"scripts", "tests"}
        and (path.suffix == ".py" or (not path.suffix and _is_python(path)))
    ]


def _is_python(path: Path) -> bool:
    first_line = path.read_bytes().partition(b"\n")[0]
    return first_line.startswith(b"#!") and b"python" in first_line


# --- the project keeps the rules ------------------------------------------------------------


def _relative(path: Path) -> str:
    return path.relative_to(ROOT).as_posix()


@pytest.mark.parametrize(
    ("module", "path"), [pytest.param(*row, id=row[0]) for row in source_files()]
)
def test_module_keeps_the_rules(module: str, path: Path) -> None:
    assert faults(module, path.read_text(encoding="utf-8")) == []


@pytest.mark.parametrize("path", other_python_files(), ids=_relative)
def test_tests_and_scripts_keep_the_form(path: Path) -> None:
    assert list(form_faults(ast.parse(path.read_text(encoding="utf-8")))) == []


def test_the_walks_find_the_files() -> None:
    assert {"spanwright", "spanwright.kernel"} <= MODULES
    found = {_relative(path) for path in other_python_files()}
    assert {"tests/test_layers.py", "tests/conftest.py", "scripts/bench"} <= found
    assert {ROOT / ".ci/run", ROOT / "pyproject.toml"} <= set(project_files())


def test_nothing_strange_at_the_top() -> None:
    assert strangers({path.name for path in ROOT.iterdir()}) == set()


def test_no_file_names_a_place_on_a_machine() -> None:
    found = {
        _relative(path): lines
        for path in project_files()
        if (lines := machine_paths(path.read_bytes().decode("utf-8", errors="replace")))
    }
    assert found == {}


# --- the tables are sound -------------------------------------------------------------------


def test_rows_name_units_only() -> None:
    named = {unit for row in MAY_IMPORT.values() for unit in row}
    assert named <= set(MAY_IMPORT)


def test_layers_have_an_order() -> None:
    # static_order raises CycleError when two units may see each other.
    order = list(TopologicalSorter(MAY_IMPORT).static_order())
    assert order.index("spanwright.kernel") < order.index("spanwright.values")
    assert order.index("spanwright.session") < order.index("spanwright.cli")


def test_nobody_sees_the_command_line() -> None:
    seers = {unit for unit, row in MAY_IMPORT.items() if "spanwright.cli" in row}
    assert seers == {"spanwright.__main__"}


# --- the checker sees what it should --------------------------------------------------------

DOC = '"""A made-up module."""\n'

PLANTED = [
    ("spanwright_grammar.source", "import spanwright.kernel", "may not see spanwright.kernel"),
    ("spanwright_grammar.parsing", "from spanwright import session", "may not see spanwright.s"),
    ("spanwright_grammar.syntax", "from spanwright_grammar import parsing", "may not see"),
    ("spanwright_grammar.syntax", "from spanwright_grammar import parse", "may not see"),
    ("spanwright_grammar.vocabulary", "import spanwright_grammar.source", "may not see"),
    ("spanwright_grammar.hover", "import spanwright_grammar.completion", "may not see"),
    ("spanwright_grammar.syntax", "import lark", "only for spanwright_grammar.parsing"),
    ("spanwright_grammar.printing", "def f():\n    from lark import Lark", "only for"),
    ("spanwright_grammar.parsing", "import platformdirs", "only for"),
    ("spanwright_grammar.parsing", "def f():\n    import sympy", "only for"),
    ("spanwright_grammar.source", "import flint", "only for spanwright.kernel"),
    ("spanwright.kernel.laurent", "from spanwright.values import Value", "may not see"),
    ("spanwright.kernel.laurent", "from spanwright_grammar.source import Span", "may not see"),
    ("spanwright.kernel.families.keys", "import time", "no clock"),
    ("spanwright.kernel.witness", "import random\nrandom.random()", "unseeded"),
    ("spanwright.kernel.witness", "from random import randrange", "unseeded"),
    ("spanwright.kernel.witness", "import random\nr = random.Random()", "with nothing"),
    ("spanwright.kernel.witness", "import os\nos.urandom(4)", "unseeded"),
    ("spanwright.kernel.coefficients", "import sympy", "inside the function"),
    ("spanwright.kernel.coefficients", "class A:\n    import sympy", "inside the function"),
    ("spanwright.kernel.coefficients", "if 1:\n    import sympy.core", "inside the function"),
    ("spanwright.kernel.coefficients", "import numpy", "no row in THIRD_PARTY"),
    ("spanwright.values", "import spanwright.rendering.text", "may not see spanwright.rendering"),
    ("spanwright.values", "import flint", "only for spanwright.kernel"),
    ("spanwright.rendering.tex", "import spanwright.session", "may not see spanwright.session"),
    ("spanwright.evaluator", "from spanwright import session", "may not see spanwright.session"),
    ("spanwright.evaluator", "print(1)", "prints"),
    ("spanwright.evaluator", "def f():\n    with open('a') as g:\n        g", "opens a file"),
    ("spanwright.session", "import pathlib\npathlib.Path('a').read_text()", "opens a file"),
    ("spanwright.session", "def f():\n    import spanwright.journal", "may not see"),
    ("spanwright.session", "import importlib\nimportlib.import_module('spanwright.cli')", "see"),
    (
        "spanwright.services",
        "def f():\n    import spanwright.shell",
        "may not see spanwright.shell",
    ),
    ("spanwright.services", "import prompt_toolkit", "only for spanwright.shell"),
    ("spanwright.shell.prompt", "def f():\n    import spanwright.server.main", "may not see"),
    ("spanwright.server.main", "def f():\n    import spanwright.shell.loop", "may not see"),
    ("spanwright.shell.prompt", "import pygls", "only for spanwright.server"),
    ("spanwright.shell.prompt", "print(1)", "prints"),
    ("spanwright.shell.prompt", "import spanwright.cli", "may not see spanwright.cli"),
    ("spanwright.cluster", "import distributed", "inside the function"),
    ("spanwright.cli", "import spanwright.shell.loop", "inside the function"),
    ("spanwright.cli", "from spanwright.server import main", "inside the function"),
    ("spanwright.cli", "from spanwright.session import *", "star import"),
    ("spanwright.cli", "from . import session", "relative import"),
    ("spanwright.novelty", "", "no row in MAY_IMPORT"),
    ("spanwright.cli", "import spanwright.novelty", "no row in MAY_IMPORT"),
]


@pytest.mark.parametrize(("module", "text", "fault"), PLANTED)
def test_a_planted_fault_is_found(module: str, text: str, fault: str) -> None:
    found = faults(module, DOC + text)
    assert len(found) == 1
    assert fault in found[0]


@pytest.mark.parametrize("text", ["", "x = 1", '""" """', "# a comment\n", "def f():\n    'no'"])
def test_a_module_opens_with_a_docstring(text: str) -> None:
    assert faults("spanwright.values", text) == ["line 1: opens with no docstring"]


ALLOWED = [
    ("spanwright_grammar.parsing", "import lark\nopen('language.lark')"),
    ("spanwright_grammar", "from spanwright_grammar.parsing import parse"),
    ("spanwright.kernel.coefficients", "import flint\ndef f():\n    import sympy"),
    (
        "spanwright.kernel.coefficients",
        "from typing import TYPE_CHECKING\nif TYPE_CHECKING:\n    import sympy",
    ),
    ("spanwright.kernel.witness", "from random import Random\nr = Random(7)"),
    ("spanwright.kernel.families.keys", "from spanwright.kernel import laurent, errors"),
    ("spanwright.builtins", "from spanwright_grammar.vocabulary import VOCABULARY"),
    ("spanwright.session", "from spanwright import evaluator\nimport json, time"),
    ("spanwright.shell.loop", "import prompt_toolkit\nimport spanwright.shell.prompt\nprint(1)"),
    ("spanwright.cli", "print(1)\nopen('a')\ndef f():\n    from spanwright.shell import loop"),
    ("spanwright.cluster", "def f():\n    import distributed"),
    ("spanwright", "from spanwright.session import Session"),
]


@pytest.mark.parametrize(("module", "text"), ALLOWED)
def test_what_is_allowed_passes(module: str, text: str) -> None:
    assert faults(module, DOC + text) == []


def test_strangers_and_machine_paths_are_found() -> None:
    assert strangers({"README.md", "repl", ".ci", "build", "notes.txt", "src"}) == {
        "notes.txt",
        "src",
    }
    for place in ("/" + "work/main", "x=/" + "root/.cache", "/" + "home/ada", "C:\\" + "Users\\a"):
        assert machine_paths(f"fine\nsee {place} there") == [f"see {place} there"]
    assert machine_paths("repl/work/x, ~/.cache, https://example.org/home/, /usr/bin/env") == []
