"""Renews the generated parts of README.md; with --check only says whether they are up to date."""

from __future__ import annotations

import re
import sys
from pathlib import Path

from spanwright import Session
from spanwright_grammar import Source, reference_markdown

README = Path(__file__).resolve().parent.parent / "README.md"
SESSION = re.compile(r"(<!-- session -->\n```span\n)(.*?)(```\n<!-- end of session -->)", re.S)
REFERENCE = re.compile(r"(<!-- reference -->\n)(.*?)(<!-- end of reference -->)", re.S)


def renewed(text: str) -> str:
    """README with its session run again and its reference written anew."""
    text = SESSION.sub(lambda m: m.group(1) + session(m.group(2)) + m.group(3), text)
    return REFERENCE.sub(lambda m: m.group(1) + reference_markdown() + "\n" + m.group(3), text)


def session(block: str) -> str:
    """The inputs of a block, each followed by its result in `#=` lines."""
    inputs = "\n".join(line for line in block.split("\n") if not line.startswith("#="))
    source = Source(inputs)
    lines: list[str] = []
    done = 0
    for outcome in Session().run_all(source):
        typed = inputs[done:outcome.span.end].strip("\n")
        done = outcome.span.end
        lines += [typed, *(f"#= {row}".rstrip() for row in outcome.text.split("\n"))]
    return "\n".join(lines) + "\n"


def main() -> int:
    """Write the file, or compare; the exit status."""
    old = README.read_text(encoding="utf-8")
    new = renewed(old)
    if "--check" in sys.argv[1:]:
        return int(old != new)
    README.write_text(new, encoding="utf-8")
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
