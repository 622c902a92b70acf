"""Reports: valid pages without network or script, articles that compile, text that stays text."""

from __future__ import annotations

import json
import re
import shutil
import subprocess
from pathlib import Path
from xml.etree import ElementTree

import html5lib
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from effort import effort
from recorded import DEMO, log_text, write_log
from spanwright import log_commands
from spanwright.log_format import read_log
from spanwright.rendering.article import LINE, pieces, width_of
from spanwright.rendering.document import FIRST_TERMS
from spanwright.rendering.html import is_picture
from spanwright.rendering.mathml import mathml, parted_terms, row, term_rows, term_texts, words_of
from spanwright.report import document, is_canonical, written
from spanwright.session import Session
from spanwright_grammar.parsing import parse_expression

NAUGHTY = (
    '<script>alert(1)</script>', '"><img src=x onerror=alert(1)>', "</style></title><b>",
    "\\input{/etc/passwd}", "\\write18{ls}", "\\end{document}", "$x$ & % # _ ^ ~ { } |",
    "]]>", "&lt;&#x41;", "javascript:alert(1)", "``` \n<i>", "[a](http://example.org)",
    "\\\\[1em] *x*", "eq_1 (1) eq_99 (99)", "Vesterhølm Łódź 潮 ∂ μ “q”", "a\x01\x7fb\x85",
)


def report(inputs: str | list[str], ending: str) -> str:
    return written(read_log(log_text(inputs), "tide.span"), "tide.span", ending)


def page(inputs: str | list[str]) -> tuple[str, ElementTree.Element]:
    """A page's text, and its tree from a parser that takes no error."""
    text = report(inputs, ".html")
    tree = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parse(text)
    return text, tree


def elements(tree: ElementTree.Element, name: str) -> list[ElementTree.Element]:
    return [e for e in tree.iter() if isinstance(e.tag, str) and e.tag.split("}")[-1] == name]


def quoted(content: str) -> str:
    return content.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")


def test_page_holds_everything() -> None:
    text, tree = page(DEMO)
    words = " ".join("".join(tree.itertext()).split())
    for expected in (
        "Notes of the tide office of Vesterholm", "The harbour's first rule.", "fix n = 3",
        "spanwright replay tide.span", "the tests", "vanishes: the part carried from 2 meets",
        "closes nothing", "let c(a,b) = (1 - q^a t^b)/(1 - q^(a+1) t^b)",
    ):
        assert expected in words, expected
    assert len(elements(tree, "table")) == 2
    ids = [e.get("id") for e in tree.iter() if e.get("id")]
    assert len(ids) == len(set(ids))
    links = [e.get("href", "")[1:] for e in elements(tree, "a") if e.get("href", "")[:1] == "#"]
    assert "eq-1" in links and set(links) <= set(ids)
    assert text.count("<details") >= 5


def test_every_formula_has_a_text_alternative() -> None:
    _, tree = page([DEMO, "fix n = 4", "expand E_(0,0,3,1) in x"])
    formulas = elements(tree, "math")
    assert len(formulas) > 60
    assert all(formula.get("alttext", "").strip() for formula in formulas)
    groups = [e for e in tree.iter() if e.get("role") == "group"]
    assert groups and all(group.get("aria-label") for group in groups)


def no_reach(text: str, tree: ElementTree.Element) -> None:
    """Nothing in a page acts or fetches."""
    for name in ("script", "link", "img", "iframe", "object", "embed", "form", "base", "video"):
        assert elements(tree, name) == [], name
    for element in tree.iter():
        for key, value in element.attrib.items():
            assert not str(key).lower().startswith("on"), key
            if str(key).split("}")[-1].lower() in ("href", "src", "action", "xlink:href"):
                assert value.startswith(("#", "data:text/plain;")), value
    style = text[text.index("<style>"):text.index("</style>")]
    assert "url(" not in style and "@import" not in style and "//" not in style
    assert "default-src 'none'" in text


def naughty_inputs(content: str) -> list[str]:
    return ["fix n = 2", "x_1 E_(0,1)", f'remark "{quoted(content)}"', f'"{quoted(content)}"',
            f"x_2 # {content}", f"# {content}", f"x_1 {content} )", f'let f = "{quoted(content)}"',
            f'recall f; find i in 1..2 where "{quoted(content)}" = f']


@pytest.mark.parametrize("content", NAUGHTY)
def test_nothing_typed_becomes_markup(content: str) -> None:
    text, tree = page(naughty_inputs(content))
    no_reach(text, tree)
    shown = "".join(elements(tree, "main")[0].itertext())
    one_line = content.split("\n")[0]
    if not re.search("[\x00-\x1f\x7f-\x9f]", content):
        assert shown.count(one_line) >= 4
    assert not elements(tree, "b") and not elements(tree, "i")


@settings(max_examples=effort(25))
@given(st.text(st.characters(blacklist_categories=("Cs",)), max_size=40))
def test_no_text_breaks_a_page_or_an_article(content: str) -> None:
    flat = " ".join(content.split())
    text, tree = page(naughty_inputs(flat))
    no_reach(text, tree)
    article_is_tame(report(naughty_inputs(flat), ".tex"))


OUR_COMMANDS = """
    documentclass usepackage allowdisplaybreaks setlength newcommand begin end typed said par
    smallskip nobreak ttfamily small footnotesize raggedright LARGE textit hyperref label tag
    notag quad text textbackslash textasciicircum textasciitilde textless textgreater textbar
    quotemark textasciigrave textquotesingle frac cdot to neq leq geq in sum prod partial infty
    char dots ss ae AE oe OE o O l L S i j emph texttt hline renewcommand arraystretch strut
    alpha beta gamma delta varepsilon zeta eta theta iota kappa lambda mu nu xi pi rho sigma tau
    upsilon varphi chi psi omega Gamma Delta Theta Lambda Xi Pi Sigma Phi Psi Omega mathfrak
    mathcal mathit mathbf epsilon phi emergencystretch parindent parskip v r c u H k left right
    allowdisplaybreaks vert
"""
COMMANDS = frozenset(OUR_COMMANDS.split())


def article_is_tame(text: str) -> None:
    """An article is ASCII, and every command in it is one of ours."""
    assert text.isascii()
    assert set(re.findall(r"\\([A-Za-z]+)", text)) <= COMMANDS
    assert text.count(r"\begin{document}") == text.count(r"\end{document}") == 1
    assert text.rstrip().endswith(r"\end{document}")
    balance = 0
    for sign in re.findall(r"(?<!\\)(?:\\\\)*([{}])", text):
        balance += 1 if sign == "{" else -1
        assert balance >= 0
    assert balance == 0


@pytest.mark.parametrize("content", NAUGHTY)
def test_nothing_typed_becomes_a_command(content: str) -> None:
    article_is_tame(report(naughty_inputs(content), ".tex"))


def test_markdown_keeps_text_text() -> None:
    for content in NAUGHTY:
        text = report(naughty_inputs(content), ".md")
        outside = re.sub(r"(?ms)^(`{3,})\w*\n.*?\n\1$", "", text)
        outside = re.sub(r'<a id="eq-\d+"></a>', "", outside)
        assert "<" not in outside, content
        assert not re.search(r"(?<!\\)\]\((?!#eq-)", outside), content
    text = report(DEMO, ".md")
    assert "\\tag{1}" in text and '<a id="eq-1"></a>' in text and "| mu | x\\_1 E\\_mu |" in text


def test_article_has_tags_and_links() -> None:
    text = report([DEMO, 'remark "By (1) and eq_2."'], ".tex")
    article_is_tame(text)
    assert r"\tag{1}\label{eq:1}" in text
    assert r"\hyperref[eq:1]{(1)}" in text and r"\hyperref[eq:2]{eq\_2}" in text
    assert r"\emph{fails}:" in text and r"\begin{tabular}" in text


@pytest.mark.parametrize("ending", [".html", ".tex", ".md"])
def test_a_report_says_how_sure_it_is_and_of_how_many_cases(ending: str) -> None:
    text = report([
        "fix n = 2", "for mu in compositions(2): claim E_mu = E_mu", "fix certainty = random",
        "claim x_1 E_(1,0) = E_(2,0) + x_1 E_(1,0) - E_(2,0)", "claim x_1 = x_2"], ending)
    assert "3 cases: 3 held" in text
    assert "with high probability" in text
    assert "refuted at" in text


def test_long_results_are_folded_and_parted() -> None:
    _, tree = page(["fix n = 4", "expand E_(0,0,3,1) in x"])
    (folded,) = [e for e in elements(tree, "details") if e.get("class") == "more"]
    n_terms = len(Session(n=4).run("expand E_(0,0,3,1) in x").value.terms)
    assert f"{n_terms - FIRST_TERMS} more terms" in "".join(folded.itertext())


def test_cut_result_says_so() -> None:
    for ending in (".html", ".tex", ".md"):
        text = report(["fix n = 4", "expand (x_1 + x_2 + x_3 + x_4)^12 in x"], ending)
        assert re.search(r"of 455 terms are in the log", text), ending


VALUES = (
    "x_1 E_(1,0,2)", "expand E_(1,0,2) in x", "T_1 X_1 Y_2 + (Y_1 + Y_2)^2", "0", "-1/2",
    "-q^2/(1 - t) t^(1/2)", "(3 - t)/(1 - q)^2 x_1^-1", "list((1,2,3), q)", "S_(3,1,2)(x;y)",
    "G_(2,1)^2", "kappa_(0,1,2)", "d_1 x_1", "tau_1", "symmetrizer", "pi_(3,1,2)", "(0,-1,3)",
    "s_1 X_1", "T_(3,2,1)", "atom_(0,1,2)", "P_(2,1)", "1 = 2", "compositions(2)", "-x_1 - q x_2",
)


@pytest.mark.parametrize("typed", VALUES)
def test_mathml_is_well_formed_and_says_what_the_text_says(typed: str) -> None:
    outcome = Session(n=3).run(typed)
    assert outcome.status != "error", outcome.text
    markup = mathml(outcome.raw)
    tree = ElementTree.fromstring(markup)
    assert tree.get("alttext") == " ".join(outcome.text.split())
    allowed = {"math", "mrow", "mi", "mn", "mo", "mfrac", "msub", "msup", "msubsup", "mtext"}
    names = {e.tag.split("}")[-1] for e in tree.iter()}
    assert names <= allowed
    for element in tree.iter():
        count = {"mfrac": 2, "msub": 2, "msup": 2, "msubsup": 3}.get(element.tag.split("}")[-1])
        assert count is None or len(element) == count, markup
    digits = sorted(re.findall(r"\d", "".join(tree.itertext())))
    if "t^" not in outcome.text and outcome.raw is not True and "E" not in outcome.text:
        assert digits == sorted(re.findall(r"\d", outcome.text.replace("^1 ", "")))


def test_mathml_of_parted_terms_has_the_same_signs() -> None:
    value = Session(n=4).run("expand E_(0,0,3,1) in x").raw
    whole, texts = term_rows(value), term_texts(value)
    assert whole is not None
    for flat, text in zip(parted_terms(value, texts), texts, strict=True):
        for part in flat:
            ElementTree.fromstring(f"<mrow>{part}</mrow>")
        joined = words_of("".join(flat))
        assert re.findall("[0-9qtx]", joined) == re.findall(
            "[0-9qtx]", text.replace("_", "").replace("^", ""))
        assert joined.count("-") == text.count("-") and joined.count("+") == text.count("+")
    assert "<mfrac>" in row(value) and "mfrac" not in "".join(parted_terms(value, texts)[0])


def test_lines_of_an_article_fit() -> None:
    value = Session(n=4).run("expand E_(0,0,3,1) in x").raw
    lines = pieces(value, LINE)
    assert all(width_of(line) <= LINE + 4 for line in lines), max(map(width_of, lines))
    assert len(lines) > 10
    joined = " ".join(lines)
    assert joined.count("x_{1}^{3}") >= 3


def test_a_recorded_text_starts_no_computation() -> None:
    for tame in ("E_(2,0,1) + (1 - t)/(1 - q t) E_(1,1,1)", "2 x_1^2 x_2^-1", "T_(2,1,3) Y_1",
                 "(Y_1 + Y_2)^2", "S_(3,1,2)(x;y)", "(1 - q)^2/(1 - t)"):
        assert is_canonical(parse_expression(tame)), tame
    for wild in ("E_(9,9,9) E_(9,9,9)", "(E_(9,9,9) + 1)^9", "sum_(i in 1..9) x_1", "f(3)",
                 "E_(9,9,9)^2", "(1 + q)^99999", "[x_1] E_(9,9,9)", "E_(9,9,9) at q = 0"):
        assert not is_canonical(parse_expression(wild)), wild
    found = document(read_log("fix n = 3\nx_1\n#= E_(9,9,9) E_(8,8,8)\n"), "a.span")
    assert found.entries[1].value is None and found.entries[1].text == "E_(9,9,9) E_(8,8,8)"


def test_pictures_are_laid_in_only_when_they_are_tame() -> None:
    assert is_picture('<svg xmlns="http://www.w3.org/2000/svg"><rect width="2"/></svg>')
    for wild in (
        "<svg><script>x</script></svg>", '<svg onload="x"></svg>', "<b>x</b>",
        '<svg><a href="http://example.org">x</a></svg>', '<svg><use href="#a"/></svg>',
        '<svg><image src="x"/></svg>', "<svg><style>@import 'x'</style></svg>",
        '<svg><rect fill="url(http://example.org)"/></svg>', "<svg></svg><p>x</p>",
    ):
        assert not is_picture(wild), wild
    log = read_log("fix n = 3\nlet mu = (2,0,1)\n#= mu = (2,0,1)\ndraw E_mu\n#= # boxes\n")
    text = written(log, "a.span", ".html")
    tree = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parse(text)
    assert len(elements(tree, "svg")) == 1
    assert [e.get("aria-label") for e in elements(tree, "figure")] == ["# boxes"]


def test_altered_and_torn_logs_say_so() -> None:
    text = log_text(DEMO)
    changed = text.replace("list((2,0,0))", "list((2,0,1))")
    assert "are not as they were written" in written(read_log(changed), "a.span", ".html")
    assert "the last record, from line" in written(read_log(text[:-20]), "a.span", ".html")


def test_report_command(tmp_path: Path) -> None:
    import argparse

    parser = argparse.ArgumentParser()
    log_commands.add_commands(parser.add_subparsers(dest="command"))
    write_log(tmp_path / "tide.span", DEMO)

    def run(*words: str) -> tuple[int, str]:
        said: list[str] = []
        options = parser.parse_args(["report", *words])
        return log_commands.report(options, said.append, said.append), "\n".join(said)

    log = str(tmp_path / "tide.span")
    for ending in ("html", "tex", "md"):
        place = tmp_path / f"notes.{ending}"
        status, said = run(log, "-o", str(place), "--title", "The <tides>")
        assert status == 0 and f"{place}: " in said
        assert place.stat().st_size > 2000
    assert "<title>The &lt;tides&gt;</title>" in (tmp_path / "notes.html").read_text()
    before = (tmp_path / "tide.span").read_bytes()
    for words, part in (
        ((log, "-o", "notes.pdf"), ".html, .tex, .md"), ((log, "-o", log), "ending"),
        (("none.span", "-o", "notes.html"), "no such file"),
        ((log, "-o", str(tmp_path / "missing" / "a.html")), "no such file"),
    ):
        status, said = run(*words)
        assert status == 2 and part in said, said
    (tmp_path / "tide.md").write_bytes(before)
    status, said = run(str(tmp_path / "tide.md"), "-o", str(tmp_path / "tide.md"))
    assert status == 2 and "into the log itself" in said
    assert (tmp_path / "tide.md").read_bytes() == before


# --- With the programs that readers have, where they are installed -------------------------------

BROWSERS = [found for name in ("chromium", "chromium-browser") if (found := shutil.which(name))][:1]
TEX = [found for name in ("pdflatex",) if (found := shutil.which(name))]

LONG = [DEMO, "fix n = 4", "expand E_(0,0,3,1) in x", "E_(0,0,3,1) x_1 x_2",
        *(f'remark "{quoted(content)}"' for content in NAUGHTY), *(
            f'"{quoted(content)}"' for content in NAUGHTY)]

MEASURE = """<script>
addEventListener("load", () => {
  const flat = [...document.querySelectorAll("math")].filter(m => {
    const box = m.getBoundingClientRect(); return m.checkVisibility() && !(box.height > 5); });
  const wide = [...document.querySelectorAll("main > article, header")].filter(
    e => e.getBoundingClientRect().right > innerWidth + 1);
  document.body.innerHTML = "<output>" + JSON.stringify({
    width: innerWidth, page: document.documentElement.scrollWidth, flat: flat.length,
    wide: wide.length, n: document.querySelectorAll("math").length,
    ground: getComputedStyle(document.body).backgroundColor}) + "</output>";
});
</script></body>"""


def test_a_browser_lays_the_page_out(tmp_path: Path) -> None:
    text = report(LONG, ".html")
    # only this copy may measure itself
    policy = re.search(r'<meta http-equiv="Content-Security-Policy"[^>]*>\n', text)
    assert policy is not None
    place = tmp_path / "page.html"
    place.write_text(text.replace(policy.group(), "").replace("</body>", MEASURE))
    for browser in BROWSERS:
        for width in (400, 1100):
            done = subprocess.run(
                [browser, "--headless", "--no-sandbox", "--disable-gpu", "--dump-dom",
                 f"--user-data-dir={tmp_path / 'profile'}", f"--window-size={width},900",
                 "--virtual-time-budget=3000", place.as_uri()],
                capture_output=True, text=True, timeout=60)
            found = json.loads(re.search("<output>(.*)</output>", done.stdout).group(1))
            assert found["n"] > 80
            assert found["page"] <= found["width"], "nothing makes the page scroll sideways"
            assert (found["flat"], found["wide"]) == (0, 0), found


def test_tex_compiles_the_article(tmp_path: Path) -> None:
    text = report(LONG, ".tex")
    article_is_tame(text)
    (tmp_path / "notes.tex").write_text(text)
    for tex in TEX:
        for _ in range(2):
            done = subprocess.run(
                [tex, "-interaction=nonstopmode", "-halt-on-error", "-no-shell-escape",
                 "notes.tex"], cwd=tmp_path, capture_output=True, text=True, timeout=60,
                errors="replace")
            assert done.returncode == 0, done.stdout[-1500:]
        too_wide = [float(w) for w in re.findall(r"Overfull \\hbox \(([\d.]+)pt", done.stdout)]
        assert all(w < 12 for w in too_wide), too_wide
        assert "undefined references" not in done.stdout
        assert (tmp_path / "notes.pdf").stat().st_size > 20_000
