"""What is found wrong with a text without computing; `text` marks nothing, findings say where."""

from __future__ import annotations

import pytest

from spanwright_grammar.bindings import Scope
from spanwright_grammar.checks import check
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source


def findings(text: str, scope: Scope = Scope(), **options: object) -> list[str]:  # noqa: B008
    """Each finding as `line:column severity code: message | hint`."""
    source = Source(text)
    rows = []
    for found in check(parse(source), scope, **options):  # type: ignore[arg-type]
        line, column = source.position(found.span.start)
        hint = f" | {found.hints[0]}" if found.hints else ""
        rows.append(f"{line}:{column} {found.severity} {found.code}: {found.message}{hint}")
    return rows


def check_findings(text: str, *expected: str) -> None:
    assert findings(text) == list(expected)


def test_an_unknown_name_comes_with_the_nearest_spelling() -> None:
    check_findings(
        "let weight = 1\nweigth + degre(x_1) + zzz",
        "2:1 error unknown-name: weigth is not defined | weight",
        "2:10 error unknown-name: degre is not defined | degree",
        "2:23 error unknown-name: zzz is not defined | let zzz = …",
    )
    check_findings("expnad 1 in E", "1:1 error unknown-name: expnad is not defined | expand")


def test_the_number_of_parts_is_that_of_the_n_in_force_at_the_line() -> None:
    check_findings(
        "E_(1,0)\nfix n = 3\nE_(1,0); E_(1,0,2); E_10; E_(2)\nfix n = 2\nE_(1,0); E_(1,0,2|(2,1))",
        "3:1 error wrong-number-of-parts: E_(1,0) has 2 parts, the ring has n = 3 | E_(1,0,0)",
        "3:21 error wrong-number-of-parts: E_(1,0) has 2 parts, the ring has n = 3 | E_(1,0,0)",
        "3:27 error wrong-number-of-parts: E_(2) has 1 part, the ring has n = 3 | E_(2,0,0)",
        "5:10 error wrong-number-of-parts: E_(1,0,2|(2,1)) has 3 parts, the ring has n = 2 "
        "| E_(1,0)",
    )


def test_positions_out_of_range() -> None:
    check_findings(
        "fix n = 3\nx_3 x_4 T_2 T_3 x_0\nfix n = 1\nT_1",
        "2:7 error position-out-of-range: x_4 does not exist: positions go from 1 to 3 (n = 3) "
        "| x_3",
        "2:15 error position-out-of-range: T_3 does not exist: positions go from 1 to 2 (n = 3) "
        "| T_2",
        "2:19 error position-out-of-range: x_0 does not exist: positions go from 1 to 3 (n = 3) "
        "| x_1",
        "4:3 error position-out-of-range: T_1 does not exist: T has no position when n = 1",
    )


def test_a_computed_n_keeps_the_checks_quiet() -> None:
    check_findings("fix n = 2 + 1\nE_(1,0) x_9")


def test_a_body_is_looked_up_when_it_is_called() -> None:
    check_findings(
        "let c(a) = a + later + c(1)\nlet later = 1",
        "1:16 warning unknown-name: later is not defined | let later = …",
    )


def test_own_functions_have_their_number_of_arguments() -> None:
    check_findings(
        "let c(a,b) = a b\nc(1)\nc(1,2)\nfor c in 1..2: claim c = 1",
        "2:1 error wrong-number-of-arguments: c takes 2 arguments, this gives 1 | c(a,b)",
        "4:5 warning hidden-name: inside, c is the bound name and no longer the function "
        "defined above",
    )


def test_bound_names_are_known_where_they_are_bound_and_nowhere_else() -> None:
    check_findings(
        "sum_(i in 1..2) i\ni\nfor j in 1..2:\n  x_j\nend\nj",
        "2:1 error unknown-name: i is not defined | let i = …",
        "6:1 error unknown-name: j is not defined | J",
    )


def test_words_of_the_language_are_not_for_definitions() -> None:
    check_findings(
        "let E = 1",
        "1:1 error name-taken: E is a word of the language and cannot be given a new meaning "
        "| let E1 = …",
    )


def test_settings_and_bases_that_do_not_exist() -> None:
    check_findings(
        "fix second = 3\nfix memory = 2 GB\nfix basis = E\nexpand x_1 in Q\nexpand x_1 in T, Y",
        "1:1 error unknown-setting: there is no setting second | fix seconds = …",
        "4:15 error unknown-name: Q is no basis | E",
    )


def test_a_broken_sentence_spoils_only_itself() -> None:
    check_findings(
        "let f = x_1 + )\nf + g\nfor i in 1..2:\n  x_(\n  zzz\nend",
        "1:15 error unmatched-bracket: `)` closes nothing",
        "2:5 error unknown-name: g is not defined | G",
        "5:6 error missing-bracket: `)` is missing: `(` was opened at line 4, column 5",
    )


def test_a_used_file_may_define_what_it_likes_unless_it_is_known() -> None:
    check_findings('use "b.span"\nf')
    known = Scope(3, {"f": "a value"})
    assert findings(
        'use "b.span"\nf + g + x_4', exports=lambda path: known if path == "b.span" else None
    ) == [
        "2:5 error unknown-name: g is not defined | G",
        "2:11 error position-out-of-range: x_4 does not exist: positions go from 1 to 3 (n = 3) "
        "| x_3",
    ]


def test_definitions_that_a_whole_script_never_uses() -> None:
    text = (
        "let f = 1\nlet f = 2\nf\nlet g(a) = later a\nlet later = 1\ng(1)\nlet k = k\n"
        "let a, b be parameters\na\nsum_(f in 1..2) f"
    )
    unused = [row for row in findings(text, is_whole=True) if "unused-name" in row]
    assert unused == [
        "1:5 information unused-name: f is defined and not used in this file",
        "7:5 information unused-name: k is defined and not used in this file",
        "8:8 information unused-name: b is defined and not used in this file",
    ]
    assert not [row for row in findings(text) if "unused-name" in row]


@pytest.mark.parametrize(
    "text",
    [
        "let F_(mu) = x_1 E_mu\nF_(1,0)",
        "E_(1,0) at q = 0, t = 1/3",
        "[E_(1,0)] x_1 E_(0,1)",
        "claim T_i T_j = T_j T_i for i in 1..2, j in 3..4 where j < 4",
        "list(E_mu for mu in orbit((2,1,0)))",
        "let alpha = 2; jack((1,1)) at alpha = 2",
        "for mu in compositions(2), j in 1..n where mu_j > 0: claim |mu| = 2",
        "recall; recall 7; help anything at all; remark \"prose, with zzz\"; quit",
        "show E_(1,0) as latex; write x_1 as json to \"f.json\"",
        "eq_1 + infinity; T_pi x_1 + true",
        "let a be a parameter\nlet f = a x_1\nf at a = 0",
        "fix q = t^2; fix n = 3; fix show = factored",
    ],
)
def test_good_sentences_have_no_findings(text: str) -> None:
    check_findings(text)
