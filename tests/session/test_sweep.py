"""Many cases at once: tallies, counterexamples, stated order, resuming, tables, two stages."""

from __future__ import annotations

import csv
import json
import sqlite3
import tracemalloc
from math import comb, factorial
from pathlib import Path

import pyarrow.parquet
import pytest
from hypothesis import given
from hypothesis import strategies as st

from many_cases import outcome_of, tally_of
from spanwright.cases import enumerate_cases, number_of_cases, plan
from spanwright.claims import at_random_point
from spanwright.context import Context
from spanwright.evaluator import Evaluator
from spanwright.kernel import indices
from spanwright.session import Session
from spanwright.settings import Settings
from spanwright.tally import tally_data, tally_text
from spanwright_grammar import syntax
from spanwright_grammar.parsing import parse
from spanwright_grammar.source import Source

FALSE_SOMETIMES = "for mu in compositions(2), j in 1..3: claim x_j E_mu = E_(mu + eps_j)"


def sentence(text: str) -> syntax.Sentence:
    """The one sentence of a text."""
    (found,) = parse(Source(text)).sentences
    return found


# tallies


def test_a_tally_counts_what_single_claims_say() -> None:
    tally = tally_of(FALSE_SOMETIMES)
    session = Session(n=3)
    single = [
        session.run(f"claim x_{j} E_({','.join(map(str, mu))}) = "
                    f"E_(({','.join(map(str, mu))}) + eps_{j})").status
        for mu in indices.compositions(2, 3) for j in (1, 2, 3)]
    assert tally.n_cases == len(single) == 18
    assert (tally.n_held, tally.n_failed) == (single.count("ok"), single.count("failed"))
    assert 0 < tally.n_held < 18


@pytest.mark.parametrize("text", [
    FALSE_SOMETIMES,
    "for i in 1..3: for j in 1..i: claim x_i x_j = x_i^2",
    "for i in -2..2: claim x_1^i = x_1^(i^2)",
    "for i in 8..12: claim i < 11",
    "for A in subsets(1..3): claim |A| < 1",
    "for f in list(x_1, x_2, x_1 + x_2): claim f = x_1",
    "for w in permutations(3): claim S_w = x_1",
    "for i in 1..2: claim sum_(i in 1..2) x_i = x_1 + i x_2",
    "for mu in compositions(2): ; let f = x_1 E_mu; claim f = E_(mu + eps_1); end",
    "for i in 1..2: ; for j in 1..2: ; claim i = j; end; end",
    "claim mu_1 = 1 for mu in compositions(2)",
])
def test_the_line_of_a_counterexample_meets_it_alone(text: str) -> None:
    tally = tally_of(text)
    first = tally.counterexample
    assert first is not None and "\n" not in first.line
    alone = outcome_of(first.line)
    assert alone.status == "failed"
    if hasattr(alone.raw, "counterexample"):
        assert alone.raw.counterexample.difference == first.difference
        assert alone.raw.n_failed >= 1


def test_the_counterexample_is_the_first_in_the_stated_order() -> None:
    tally = tally_of("for i in 1..6, j in 1..6: claim i + j < 7")
    assert tally.counterexample is not None
    assert tally.counterexample.case == "i = 1, j = 6"
    assert tally.counterexample.line == "claim 1 + 6 < 7"
    assert tally.n_failed == sum(1 for i in range(1, 7) for j in range(1, 7) if i + j >= 7)


def test_stopping_at_the_first() -> None:
    text = "for i in 1..40: claim i < 5"
    for jobs in (0, 1, 2):
        tally = tally_of(text, jobs=jobs, stops_at_first=True)
        assert (tally.n_held, tally.n_failed, tally.is_whole) == (4, 1, False)


def test_undecided_cases_have_a_reason_and_a_line() -> None:
    tally = tally_of("for i in 0..2: claim 1/(i - 1) < 2")
    assert (tally.n_held, tally.n_failed, tally.n_undecided) == (2, 0, 1)
    (group,) = tally.undecided
    assert group.case == "i = 1" and "zero" in group.reason
    assert outcome_of(group.line).status == "error"
    assert not tally.holds
    assert "undecided: i = 1: " in tally_text(tally)
    assert tally_data(tally)["reasons"][0]["cases"] == 1


def test_a_case_over_the_limit_of_terms_costs_nobody_else() -> None:
    tally = tally_of("fix terms = 2000; for k in {2, 70, 3}: claim (x_1 + x_2 + x_3)^k = "
                     "(x_1 + x_2 + x_3)^(k - 1) (x_1 + x_2 + x_3)")
    assert (tally.n_held, tally.n_undecided) == (2, 1)
    assert tally.undecided[0].case == "k = 70"


@pytest.mark.parametrize(("text", "code", "column"), [
    ("for i in 1..3: claim x_i = g", "unknown-name", 28),
    ("for i in 1..3: let f = x_i", "wrong-kind", 16),
    ('for i in 1..3: write x_i as text to "a.txt"', "wrong-kind", 16),
    ("for i in 1..3: quit", "wrong-kind", 16),
    ("find mu in compositions(2) where mu_1 + nu", "unknown-name", 41),
    ("tabulate f for i in 1..3", "unknown-name", 10),
    ('tabulate i for i in 1..3 to "t.xls"', "unknown-form", 1),
    ("for q in 1..3: claim q = 1", "name-taken", 5),
])
def test_faults_of_the_sentence_are_errors_with_a_place(
    text: str, code: str, column: int
) -> None:
    for jobs in (0, 2):
        outcome = outcome_of(text, jobs=jobs)
        assert outcome.status == "error"
        assert outcome.diagnostics[0].code == code
        assert outcome.source.position(outcome.diagnostics[0].span.start)[1] == column


def test_definitions_of_a_case_live_for_that_case() -> None:
    session = Session(n=3)
    outcome = session.run("let f = 7; for i in 1..3: ; let f = x_i; let g = f f; "
                          "claim g = x_i^2; end")
    assert outcome.status == "ok" and outcome.raw.n_held == 3
    assert session.run("f").text == "7"
    assert session.run("g").status == "error"


def test_settings_may_change_inside_a_case() -> None:
    tally = tally_of("for k in 2..4: ; fix n = k; claim sum_(i in 1..k) x_i = e_(1); end")
    assert (tally.n_held, tally.n_failed) == (3, 0)


def test_values_are_shown_with_their_case_and_paste_back() -> None:
    tally = tally_of("for mu in compositions(1): x_1 E_mu")
    assert tally.n_done == 3 and len(tally.lines) == 3
    for mu, line in zip(indices.compositions(1, 3), tally.lines, strict=True):
        expected = outcome_of(f"x_1 E_({','.join(map(str, mu))})").value
        assert outcome_of(line).value == expected


# the stated order


def cases_of(text: str, n: int = 3) -> list[tuple[object, ...]]:
    """All choices of a sentence's bound names."""
    node = sentence(text)
    assert isinstance(node, syntax.For | syntax.Find | syntax.Tabulate)
    return [tuple(c.bound.values()) for c in enumerate_cases(
        plan(node), Context(Settings(n=n)))]


@given(st.integers(0, 5), st.integers(1, 4), st.integers(1, 4), st.integers(0, 4))
def test_sizes_are_binomial_and_nothing_repeats(k: int, n: int, m: int, top: int) -> None:
    text = (f"for mu in compositions({k}), w in permutations({m}), A in subsets(1..{top}): "
            "claim 1 = 1")
    found = cases_of(text, n)
    assert len(found) == comb(k + n - 1, n - 1) * factorial(m) * 2**top
    assert len(set(found)) == len(found)
    node = sentence(text)
    assert isinstance(node, syntax.For)
    assert number_of_cases(plan(node), Context(Settings(n=n))) == len(found)
    # the first name is slowest
    firsts = [case[0] for case in found]
    assert firsts == sorted(firsts)


@given(st.integers(0, 7), st.integers(1, 4))
def test_a_set_may_depend_on_earlier_names(top: int, n: int) -> None:
    assert cases_of(f"for i in 1..{top}, j in 1..i: claim 1 = 1", n) == [
        (i, j) for i in range(1, top + 1) for j in range(1, i + 1)]


def test_conditions_between_and_behind() -> None:
    one = "for i in 1..6 where i != 3: for j in {1..i} where i + j = 6: claim i = i"
    tally = tally_of(one.replace("{1..i}", "1..i"))
    assert tally.n_held == sum(
        1 for i in range(1, 7) if i != 3 for j in range(1, i + 1) if i + j == 6)
    assert tally_of("for i in 0..3 where i != 0: for j in 1..6/i: claim j = j").n_held == 11


def test_find_lists_in_the_stated_order() -> None:
    expected = [mu for mu in indices.compositions(4, 3) if mu[0] == 2]
    for jobs in (0, 1, 2):
        found = outcome_of("find mu in compositions(4) where mu_1 = 2", jobs=jobs)
        assert [tuple(item.raw) for item in found.value] == expected


def test_the_enumeration_is_lazy() -> None:
    tally = tally_of("for i in 1..10^12: claim i < 4", stops_at_first=True)
    assert tally.n_held == 3 and tally.n_failed == 1


# the same bytes


@pytest.mark.parametrize("text", [
    FALSE_SOMETIMES,
    "for mu in compositions(2): x_1 E_mu",
    "for i in 0..20: claim 1/(i - 3) < 1/2",
    "find mu in compositions(4) where mu_1 > mu_2",
    "tabulate x_1 E_mu for mu in compositions(2)",
    "tabulate 1/(k - 2) for k in 1..4",
    "fix certainty = random; for mu in compositions(2): claim T_1 x_1 E_mu = x_1 T_1 E_mu",
])
def test_any_number_of_workers_gives_the_same_bytes(text: str) -> None:
    outcomes = [outcome_of(text, jobs=jobs) for jobs in (0, 1, 2, 8)]
    records = [{**o.record(), "seconds": 0} for o in outcomes]
    assert len({o.text for o in outcomes}) == 1
    assert all(record == records[0] for record in records)


def test_the_setting_chooses_the_workers() -> None:
    assert outcome_of(f"fix jobs = 2; {FALSE_SOMETIMES}").text == outcome_of(
        FALSE_SOMETIMES).text


# two stages


IDENTITIES = [
    ("T_1 T_2 T_1 = T_2 T_1 T_2", True), ("T_1 T_2 = T_2 T_1", False),
    ("Y_1 Y_2 = Y_2 Y_1", True), ("T_1 Y_2 T_1 = t Y_1", True), ("T_1 Y_2 T_1 = Y_1", False),
    ("T_1 X_1 T_1 = t X_2", True), ("(T_1 - t) (T_1 + 1) = 0", True), ("d_1 d_1 = 0", True),
    ("d_1 X_1 - X_2 d_1 = 1", True), ("d_1 X_1 - X_1 d_1 = 1", False),
    ("pi_1 pi_1 = pi_1", True), ("symmetrizer T_2 = t symmetrizer", True),
    ("antisymmetrizer T_1 = -antisymmetrizer", True), ("T_pi X_1 = X_2 T_pi", True),
    ("s_1 X_1 s_1 = X_2", True), ("T_1^-1 = (T_1 + 1 - t)/t", True),
    ("E_(1,0,1) E_(0,1,0) = E_(0,1,0) E_(1,0,1)", True),
    ("T_1 x_1 E_(0,2,1) = t x_2 T_1^-1 E_(0,2,1)", True),
    ("x_1^-1 x_1 E_(0,-1,2) = E_(0,-1,2)", True),
    ("Y_2 E_(1,0,2) = eigenvalue(Y_2, E_(1,0,2)) E_(1,0,2)", True),
    ("Y_1 E_(1,0,2) = eigenvalue(Y_2, E_(1,0,2)) E_(1,0,2)", False),
    ("P_(2,1) = s_(2,1)", False), ("s_(2,1) s_(1,0) = s_(1,0) s_(2,1)", True),
    ("tau_pi E_(1,0,2) = x_1 T_pi E_(1,0,2)", True),
]


@pytest.mark.parametrize(("claim", "holds"), IDENTITIES)
def test_both_stages_agree(claim: str, holds: bool) -> None:
    node = sentence(f"claim {claim}")
    assert isinstance(node, syntax.Claim) and isinstance(node.statement, syntax.Comparison)
    for seed in (1, 2):
        context = Context(Settings(n=3, seed=seed))
        first = at_random_point(node.statement, context)
        assert first is not None and first.holds == holds and first.certainty == "random"
        assert Evaluator(context).truth(node.statement).holds == holds


_LETTERS = st.sampled_from(["T_1", "T_2", "T_1^-1", "X_1", "X_2^-1", "Y_1", "Y_3^-1", "T_pi"])


@given(st.lists(_LETTERS, min_size=1, max_size=4), st.lists(_LETTERS, min_size=1, max_size=4),
       st.sampled_from(["1", "t", "(q - t)"]))
def test_operators_over_the_field_decide_as_canonical_forms_do(
    left: list[str], right: list[str], factor: str
) -> None:
    node = sentence(f"claim {' '.join(left)} = {factor} {' '.join(right)}")
    assert isinstance(node, syntax.Claim) and isinstance(node.statement, syntax.Comparison)
    context = Context(Settings(n=3))
    first = at_random_point(node.statement, context)
    assert first is not None
    assert first.holds == Evaluator(context).truth(node.statement).holds


def test_random_certainty_says_its_bound() -> None:
    tally = tally_of("fix certainty = random; for mu in compositions(2): "
                     "claim x_1 E_mu + E_mu = E_mu + x_1 E_mu")
    assert tally.certainty == "random" and tally.n_held == 6
    bound = tally.evidence.rpartition("10^-")[2].removesuffix(" for each case")
    # the degrees here are below 1000, the field has about 10^18 elements
    assert tally.evidence.startswith("equal at a random point modulo 2^61 - 1, error below")
    assert 14 <= int(bound) <= 18
    assert "with high probability" in tally_text(tally)
    assert tally_of("for i in 1..2: claim x_i = x_i").certainty == "exact"


def test_false_claims_are_refuted_with_the_values_that_refute_them() -> None:
    first = tally_of(FALSE_SOMETIMES).counterexample
    assert first is not None and first.evidence.startswith("refuted at q = ")


# progress, resuming


def test_finished_cases_are_not_run_again(tmp_path: Path) -> None:
    kept = tmp_path / "cases.jsonl"
    whole = outcome_of(FALSE_SOMETIMES, kept=kept)
    lines = kept.read_bytes().splitlines(keepends=True)
    assert len(lines) == whole.raw.n_cases
    assert outcome_of(FALSE_SOMETIMES, kept=kept).text == whole.text
    assert kept.read_bytes().splitlines(keepends=True) == lines
    # a run that was killed while it wrote its eighth case
    kept.write_bytes(b"".join(lines[:7]) + lines[7][:20])
    assert outcome_of(FALSE_SOMETIMES, kept=kept, jobs=2).text == whole.text
    assert sorted(kept.read_bytes().splitlines(keepends=True)) == sorted(lines)


def test_what_a_case_depends_on_is_in_its_key(tmp_path: Path) -> None:
    kept = tmp_path / "cases.jsonl"
    sizes = []
    for text in ("let a = 1; for i in 1..3: claim i = a", "let a = 2; for i in 1..3: claim i = a",
                 "let b = 5; let a = 2; for i in 1..3: claim i = a",
                 "let a = 2; fix seed = 9; for i in 1..3: claim i = a",
                 "let a = 2; for i in 1..4: claim i = a",
                 "let a = 2; fix jobs = 2; for i in 1..4: claim i = a"):
        outcome_of(text, kept=kept)
        sizes.append(len(kept.read_bytes().splitlines()))
    assert sizes == [3, 6, 6, 9, 13, 13]


def test_failed_cases_run_alone_again(tmp_path: Path) -> None:
    kept = tmp_path / "cases.jsonl"
    whole = tally_of(FALSE_SOMETIMES, kept=kept)
    again = tally_of(FALSE_SOMETIMES, kept=kept, only_failed=True)
    assert (again.n_held, again.n_failed) == (0, whole.n_failed)
    assert again.counterexample == whole.counterexample


def test_a_file_of_something_else_is_refused(tmp_path: Path) -> None:
    kept = tmp_path / "letter.txt"
    kept.write_text("Dear colleague,\n", encoding="utf-8")
    outcome = outcome_of(FALSE_SOMETIMES, kept=kept)
    assert outcome.diagnostics[0].code == "unreadable-file"
    assert kept.read_text(encoding="utf-8") == "Dear colleague,\n"


def test_progress_counts_cases(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright.sweep.PROGRESS_EVERY", 0.0)
    told: list[str] = []
    tally_of("for i in 1..30: claim i < 20", progress=told.append)
    assert told and told[-1].startswith("30 of 30 cases, ")
    assert told[-1].endswith("; 19 held, 11 failed")


def test_the_time_of_a_run_is_limited_and_the_message_says_how_far_it_came() -> None:
    for jobs in (0, 2):
        outcome = outcome_of("fix seconds = 1; for i in 1..10^9: claim i + 1 = 1 + i", jobs=jobs)
        assert outcome.status == "error"
        message = outcome.diagnostics[0].message
        assert outcome.diagnostics[0].code == "over-budget"
        assert "stopped after 1 seconds" in message and " held" in message
        assert outcome.seconds < 5


# tables


TABLE = "tabulate x_1 E_mu for mu in compositions(2), j in 1..2"


def rows_of_table() -> list[list[str]]:
    """The table as text, from the session's own table."""
    raw = outcome_of(TABLE).raw
    from spanwright.rendering.text import text

    return [[text(v) for v in row] for row in raw.rows]


def test_text_and_csv(tmp_path: Path) -> None:
    outcome_of(f'{TABLE} to "t.csv"', folder=tmp_path)
    with (tmp_path / "t.csv").open(encoding="utf-8", newline="") as file:
        head, *rows = csv.reader(file)
    assert head == ["mu", "j", "x_1 E_mu"] and rows == rows_of_table()
    outcome_of(f'{TABLE} to "t.txt"', folder=tmp_path)
    shown = outcome_of(TABLE).text
    assert (tmp_path / "t.txt").read_text(encoding="utf-8") == shown + "\n"


def test_json_is_what_the_session_prints(tmp_path: Path) -> None:
    outcome_of(f'{TABLE} to "t.json"', folder=tmp_path, jobs=2)
    record = outcome_of(TABLE).record()
    found = json.loads((tmp_path / "t.json").read_text(encoding="utf-8"))
    assert found == {key: record[key] for key in ("kind", "columns", "rows")}


def test_latex(tmp_path: Path) -> None:
    outcome_of(f'{TABLE} to "t.tex"', folder=tmp_path)
    lines = (tmp_path / "t.tex").read_text(encoding="utf-8").splitlines()
    assert lines[0] == "\\begin{longtable}{lll}" and lines[-1] == "\\end{longtable}"
    assert sum(line.endswith("$ \\\\") for line in lines) == 12


def test_sqlite_and_parquet(tmp_path: Path) -> None:
    for jobs, suffix in ((0, "sqlite"), (2, "parquet")):
        outcome_of(f'{TABLE} to "t.{suffix}"', folder=tmp_path, jobs=jobs)
    connection = sqlite3.connect(tmp_path / "t.sqlite")
    rows = connection.execute("SELECT * FROM cases").fetchall()
    connection.close()
    assert [[mu, str(j), cell] for mu, j, cell in rows] == rows_of_table()
    table = pyarrow.parquet.read_table(tmp_path / "t.parquet").to_pylist()
    assert [[f"({','.join(map(str, r['mu']))})", str(r["j"]), r["x_1 E_mu"]] for r in table] \
        == rows_of_table()


def test_a_missing_package_is_named(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(__import__("sys").modules, "pyarrow", None)
    outcome = outcome_of(f'{TABLE} to "t.parquet"', folder=tmp_path)
    assert "pyarrow" in outcome.diagnostics[0].message
    assert not list(tmp_path.iterdir())


def test_a_failing_table_leaves_the_file_as_it_was(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("mine\n", encoding="utf-8")
    outcome = outcome_of('tabulate g for i in 1..3 to "t.csv"', folder=tmp_path)
    assert outcome.status == "error"
    assert [p.name for p in tmp_path.iterdir()] == ["t.csv"]
    assert (tmp_path / "t.csv").read_text(encoding="utf-8") == "mine\n"
    assert outcome_of('tabulate i for i in 1..3 to "../t.csv"',
                      folder=tmp_path).diagnostics[0].code == "outside-folder"


def test_cells_without_a_value_are_noted() -> None:
    raw = outcome_of("tabulate 1/(k - 2) for k in 1..3").raw
    assert [row[0] for row in raw.rows] == [1, 2, 3] and raw.rows[1][1] == ""
    assert len(raw.notes) == 1 and raw.notes[0].startswith("# k = 2: ")


def test_memory_does_not_grow_with_the_rows(tmp_path: Path) -> None:
    peaks = []
    for n_rows in (1_000, 6_000):
        tracemalloc.start()
        outcome_of(f'tabulate k + 1 for k in 1..{n_rows} to "t.csv"', folder=tmp_path, jobs=0)
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    # 5,000 rows more would be a megabyte at least, were they kept
    assert peaks[1] < peaks[0] + 200_000


# what a case sees


def test_functions_of_ones_own_do_not_see_the_values_of_a_case() -> None:
    held = tally_of("let i = 7; let g(k) = k i; for i in 1..3: claim g(1) = 7")
    assert held.n_held == 3
    outcome = outcome_of("let g(k) = k + mu_1; for mu in compositions(1): claim g(1) = 1 + mu_1")
    assert outcome.status == "error"
    assert outcome.diagnostics[0].message == "in g: mu is not defined"


@pytest.mark.parametrize("jobs", [0, 2])
def test_what_a_case_defines_sees_its_values(jobs: int) -> None:
    tally = tally_of(
        "for i in 1..3: ; let g(k) = k i; for j in 1..i: ; claim g(j) = i j; end; let i = 5; "
        "claim i = 5; claim g(2) i = 10 g(1); end", jobs=jobs)
    assert tally.n_held == tally.n_cases == 3


def test_values_keep_their_convention_in_tables_and_other_processes() -> None:
    from spanwright.transport import packed_value, unpacked_value

    session = Session(n=3)
    session.run("fix convention = reversed; fix hecke = balanced")
    texts = ("x_1 E_(0,0,1)", "list(E_(0,1,0), 2, list(x_1 E_(1,0,0)))", "T_1^2", "E_(1,0,0)")
    kept = [session.run(text).value for text in texts]
    table = session.run("tabulate x_1 E_mu for mu in {(0,0,1)}")
    assert table.raw.rows[0][1].family.name == "E (reversed)"
    session.run("fix convention = standard; fix hecke = plain")
    for value in kept:
        assert value is not None
        assert unpacked_value(packed_value(value.raw, 3), session.context).__class__ is \
            value.raw.__class__
        assert value == type(value)(unpacked_value(packed_value(value.raw, 3), session.context))
    # the text alone says otherwise
    assert session.run("E_(0,0,1)").value != session.run("fix convention = reversed; E_001").value


def test_a_setting_stops_at_the_first_counterexample() -> None:
    sentence = "for i in 1..9: claim i < 3"
    assert tally_of(sentence).n_failed == 7
    tally = tally_of(f"fix counterexamples = first; {sentence}")
    assert (tally.n_held, tally.n_failed) == (2, 1) and not tally.is_whole


def test_a_cell_too_long_to_be_read_back_is_spoken_of(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("spanwright_grammar.parsing.MAX_SENTENCE_LENGTH", 400)
    outcome = outcome_of("tabulate (x_1 + x_2 + x_3)^(4 k) for k in 1..2", jobs=0)
    (found,) = outcome.diagnostics
    assert (found.code, found.message) == (
        "too-large", "the value for k = 2 is too long for a table that is shown")
    assert found.hints == ('tabulate … to "table.csv"',)
