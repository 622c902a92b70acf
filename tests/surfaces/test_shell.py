"""The shell: its parts without a terminal, its editor on a pipe, and all of it on a terminal."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pexpect
import pytest
from prompt_toolkit.application import create_app_session
from prompt_toolkit.document import Document
from prompt_toolkit.history import InMemoryHistory
from prompt_toolkit.input import create_pipe_input
from prompt_toolkit.output import DummyOutput

from spanwright import Session
from spanwright.conversation import LocalConversation
from spanwright.rendering.wrapping import broken
from spanwright.replies import Progress, Reply, State
from spanwright.shell import loop
from spanwright.shell.colouring import LineLexer
from spanwright.shell.display import (
    Line,
    Screen,
    elapsed,
    fitting,
    progress_text,
    reply_lines,
    ring_text,
)
from spanwright.shell.history import EntryHistory
from spanwright.shell.prompt import Prompt
from spanwright_grammar.parsing import parse_expression

STATE = State(3, None, (), {"f": "a polynomial"}, 0)


def plain(lines: list[Line]) -> list[str]:
    """The lines without their styles."""
    return ["".join(text for _, text in line) for line in lines]


def reply_to(text: str, n: int = 3) -> Reply:
    """What a session answers."""
    return Session(n=n).run(text).reply()


# --- The display ---------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("state", "expected"),
    [
        (State(None, None, (), {}, 0), "Q(q,t)[x_1..x_n], n free"),
        (State(1, None, (), {}, 0), "Q(q,t)[x_1]"),
        (State(2, None, (), {}, 0), "Q(q,t)[x_1,x_2]"),
        (State(3, "E", ("a", "b"), {}, 0), "Q(q,t,a,b)[x_1..x_3], in E"),
        (State(3, None, tuple("abcdef"), {}, 0), "Q(q,t,a,b,c,d,…)[x_1..x_3]"),
    ],
)
def test_the_prompt_names_the_ring(state: State, expected: str) -> None:
    assert ring_text(state) == expected


def test_a_tag_stands_flush_right() -> None:
    (line,) = plain(reply_lines(reply_to("x_1"), Screen(60, 24)))
    assert line == "  x_1" + " " * 52 + "(1)"


def test_long_results_are_broken_at_signs_and_paste_back() -> None:
    reply = reply_to("x_1 E_(2,0,1)")
    lines = plain(reply_lines(reply, Screen(60, 40)))
    assert len(lines) > 3
    assert lines[-1].endswith("(1)")
    pasted = "\n".join(lines).removesuffix("(1)")
    assert parse_expression(pasted) == parse_expression(reply.text)
    assert max(map(len, lines)) <= 60


@pytest.mark.parametrize("width", [20, 37, 60, 100])
def test_every_break_pastes_back(width: int) -> None:
    for text in ("x_2 E_(0,2,1)", "expand (x_1 + x_2)^3 in E", "(1 - q^2 t)/(1 - t)"):
        shown = reply_to(text).text
        rows = list(broken(shown, width))
        assert rows[-1][1] == len(shown)
        assert parse_expression("\n".join(row for row, _ in rows)) == parse_expression(shown)


def test_what_is_cut_is_counted_and_can_be_seen() -> None:
    reply = reply_to("(x_1 + x_2 + x_3)^12")
    n_terms = len(reply.terms)
    lines = plain(reply_lines(reply, Screen(60, 20)))
    assert len(lines) <= 16
    shown = sum(line.count("x_") > 0 for line in lines)
    assert shown
    last = lines[-1]
    assert last.rstrip().endswith("(1)")
    assert f"of {n_terms}; all of it: show eq_1 as text" in last
    n_hidden = int(last.split("…")[1].split()[0])
    visible = " ".join(line.strip() for line in lines[:-1])
    assert sum(term.lstrip("+- ") in visible for term in reply.terms[: n_terms - n_hidden]) == (
        n_terms - n_hidden
    )
    assert reply.text.startswith(" ".join(reply.terms[: n_terms - n_hidden]))
    session = Session(n=3)
    session.run("(x_1 + x_2 + x_3)^12")
    whole = session.run("show eq_1 as text").reply()
    assert "".join(plain(reply_lines(whole, Screen(60, 20)))).strip() == whole.text


def test_a_first_term_that_fills_the_screen_is_said_to_go_on() -> None:
    coefficient = " + ".join(f"q^{k}" for k in range(2, 400))
    reply = reply_to(f"({coefficient}) x_1 + x_2")
    lines = plain(reply_lines(reply, Screen(60, 20)))
    assert "the first of 2 terms goes on" in lines[-2]
    assert lines[-1].strip() == "(1)"


def test_errors_show_line_caret_and_hint() -> None:
    lines = plain(reply_lines(reply_to("x_1 E_(1,0)"), Screen(80, 24)))
    assert lines == [
        "line 1, column 5: E_(1,0) has 2 parts, the ring has n = 3",
        "  x_1 E_(1,0)",
        "      ^~~~~~~",
        "  try: E_(1,0,0)",
    ]


def test_the_caret_stays_in_sight_on_a_narrow_screen() -> None:
    text = " + ".join(["x_1"] * 14) + " + zork + x_2 + x_3"
    lines = plain(reply_lines(reply_to(text), Screen(50, 24)))
    row, carets = lines[1], lines[2]
    assert len(row) <= 50
    start = carets.index("^")
    assert row[start : start + 4] == "zork"


def test_failed_claims_show_the_difference() -> None:
    lines = plain(reply_lines(reply_to("claim x_1 = x_2"), Screen(80, 24)))
    assert lines[0].strip() == "fails"
    assert any("x_1 - x_2" in line for line in lines)


def test_words_for_time() -> None:
    assert elapsed(3.7) == "3 s"
    assert elapsed(125) == "2 min 5 s"
    assert "degree 4" in progress_text(Progress(2.0, "degree 4"))
    assert fitting("abcdef", 6) == "abcdef"
    assert fitting("abcdefg", 6) == "abcd …"


def test_the_lexer_colours_every_character_once() -> None:
    text = 'let f = x_1 E_(2,0,1) # why\n\\kappa_(1,0) + "half'
    lines = LineLexer().lex_document(Document(text))
    assert "\n".join("".join(piece[1] for piece in lines(k)) for k in range(2)) == text
    assert ("class:family", "E") in lines(0)
    assert ("class:comment", "# why") in lines(0)
    assert ("class:string", '"half') in lines(1)


# --- The history ---------------------------------------------------------------------------------


def test_entries_of_several_lines_come_back_whole(tmp_path: Path) -> None:
    path = tmp_path / "deep" / "entries.jsonl"
    for entry in ("x_1", "let f = (x_1 +\n  x_2)", "μ ∋ 𝑥"):
        EntryHistory(path).append_string(entry)
    assert list(EntryHistory(path).load_history_strings()) == [
        "μ ∋ 𝑥", "let f = (x_1 +\n  x_2)", "x_1",
    ]
    assert json.loads(path.read_text().splitlines()[0]) == "x_1"


def test_several_shells_write_one_history(tmp_path: Path) -> None:
    path = tmp_path / "entries.jsonl"

    def write(shell: int) -> None:
        history = EntryHistory(path)
        for k in range(50):
            history.append_string(f"shell {shell}, entry {k}\n" + "x_1 + " * 50)

    threads = [threading.Thread(target=write, args=(k,)) for k in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(list(EntryHistory(path).load_history_strings())) == 200


def test_a_spoilt_or_forbidden_file_is_no_fault(tmp_path: Path) -> None:
    path = tmp_path / "entries.jsonl"
    path.write_bytes(b'"x_1"\nnot json\n{"a": 1}\n\xff\xfe\n"x_2"\n')
    assert list(EntryHistory(path).load_history_strings()) == ["x_2", "x_1"]
    blocked = EntryHistory(path / "below-a-file" / "entries.jsonl")
    blocked.append_string("x_1")
    assert list(blocked.load_history_strings()) == []
    assert blocked.get_strings() == ["x_1"]


# --- The editor on a pipe ------------------------------------------------------------------------


def typed(keys: str, *, history: tuple[str, ...] = (), state: State = STATE) -> str:
    """The entry that some keys make."""
    with create_pipe_input() as pipe, create_app_session(input=pipe, output=DummyOutput()):
        pipe.send_text(keys)
        return Prompt(InMemoryHistory(list(history))).ask(state)


@pytest.mark.parametrize(
    ("keys", "entry"),
    [
        ("x_1 E_201\r", "x_1 E_201"),
        # Open brackets, a trailing sign and a block go on in another line.
        ("(x_1 +\rx_2)\r", "(x_1 +\n  x_2)"),
        ("x_1 +\rx_2\r", "x_1 +\nx_2"),
        ("for i in 1..2:\rx_i\rend\r", "for i in 1..2:\n  x_i\n  end"),
        ("x_1\x1b\rx_2\r", "x_1\nx_2"),
        # An empty line ends the entry, whatever is open.
        ("(x_1 +\r\r", "(x_1 +\n  "),
        # Tab: a single proposal, a common beginning, a choice.
        ("deg\tf)\r", "degree(f)"),
        ("E_(2,\t\r", "E_(2,0,0)"),
        ("symmetri\tz\t x_1\r", "symmetrizer x_1"),
        # Ctrl-C clears the line.
        ("zork +\x03x_1\r", "x_1"),
        # Pasted text opens no menu, and its line ends run nothing.
        ("\x1b[200~x_1\ndeg\tree\x1b[201~\r", "x_1\ndeg ree"),
        ("\x1b[200~deg\tree\x1b[201~\r", "deg\tree"),
        # A pasted block comes into house style; a part of a sentence stays as it is.
        ("\x1b[200~for i in 1..2:\r\nx_i+1  # why\r\nend\r\n\x1b[201~\r",
         "for i in 1..2:\n  x_i + 1  # why\nend\n"),
        ("\x1b[200~x_1+x_2\x1b[201~\r", "x_1+x_2"),
        ("f + \x1b[200~(x_1+\nx_2)\x1b[201~\r", "f + (x_1+\nx_2)"),
        # F2: the cursor stays with what it stood behind, and Ctrl-_ takes it back.
        ("x_1+x_2\x1b[12~\r", "x_1 + x_2"),
        ("x_1+x_2\x1b[D\x1b[D\x1b[12~9\r", "x_1 + x9_2"),
        ("x_1+x_2\x1b[12~\x1f\r", "x_1+x_2"),
        ("x_1 + (\x1b[12~x_2)\r", "x_1 + (x_2)"),
        ("\x1b[200~τ_1 E_μ\x1b[201~ + 1\r", "τ_1 E_μ + 1"),
    ],
)
def test_keys_make_entries(keys: str, entry: str) -> None:
    assert typed(keys) == entry


def test_the_history_is_searched_and_recalled_as_units() -> None:
    earlier = ("let f = (x_1 +\n  x_2)", "E_(2,0,1)", "x_3")
    assert typed("\x1b[A\r", history=earlier) == "x_3"
    assert typed("\x12x_1 +\r\r", history=earlier) == "let f = (x_1 +\n  x_2)"
    assert typed("E\x1b[A\r", history=earlier) == "E_(2,0,1)"


def test_control_d_leaves_only_on_an_empty_line() -> None:
    with pytest.raises(EOFError):
        typed("\x04")
    assert typed("x_1\x01\x04\r") == "_1"


# --- The loop without a terminal -----------------------------------------------------------------


def conversed(*entries: str) -> list[str]:
    """What the shell writes when these entries are made and the user leaves."""
    written: list[str] = []
    left = list(entries)

    def ask(state: State) -> str:
        written.append(f"[{ring_text(state)}]")
        if not left:
            raise EOFError
        return left.pop(0)

    conversation = LocalConversation(Session())
    assert loop.converse(conversation, ask, lambda lines: written.extend(plain(lines))) == 0
    return written


def test_a_conversation() -> None:
    written = conversed("fix n = 3; x_1", "  ", "zork", "quit")
    assert written[0] == "[Q(q,t)[x_1..x_n], n free]"
    assert written[1:4] == ["  n = 3", written[2], "[Q(q,t)[x_1..x_3]]"]
    assert written[2].startswith("  x_1 ") and written[2].endswith("(1)")
    assert "line 1, column 1: zork is not defined" in written
    assert written.count("[Q(q,t)[x_1..x_3]]") == 3


class Interrupted(LocalConversation):
    """A session whose first answer the user stops."""

    n_asked = 0

    def say(self, text: str, name: str = "<shell>", on_progress: object = None) -> Iterator[Reply]:
        """The first answer is interrupted."""
        self.n_asked += 1
        if self.n_asked == 1:
            raise KeyboardInterrupt
        yield from super().say(text, name)


def test_stopping_a_sentence_keeps_the_session() -> None:
    conversation = Interrupted(Session(n=2))
    written: list[Line] = []
    assert not loop.show_replies(conversation, "x_1", written.extend)
    assert plain(written) == ["stopped; the session is as it was before this sentence"]
    assert not loop.show_replies(conversation, "x_1", written.extend)
    assert plain(written)[-1].endswith("(1)")


def test_stopping_the_display_keeps_both_sides_in_step() -> None:
    written: list[Line] = []

    def write(lines: list[Line]) -> None:
        if not written and plain(lines)[0].startswith("  x_1"):
            written.append([("", "half")])
            raise KeyboardInterrupt
        written.extend(lines)

    conversation = LocalConversation(Session(n=2))
    assert not loop.show_replies(conversation, "x_1; x_2", write)
    assert plain(written) == ["half", "not shown further; recall lists what has been found"]
    assert conversation.state().last_tag == 2


# --- What is loaded ------------------------------------------------------------------------------


def modules_after(program: str) -> set[str]:
    """The top packages loaded once a program has run."""
    tail = "\nimport sys\nprint('|'.join({name.partition('.')[0] for name in sys.modules}))"
    found = subprocess.run(
        [sys.executable, "-c", program + tail], capture_output=True, text=True, check=True)
    return set(found.stdout.strip().splitlines()[-1].split("|"))


def test_the_start_is_light() -> None:
    loaded = modules_after(
        "from prompt_toolkit.application import create_app_session\n"
        "from prompt_toolkit.output import DummyOutput\n"
        "from prompt_toolkit.input import DummyInput\n"
        "from spanwright.shell import loop\n"
        "with create_app_session(input=DummyInput(), output=DummyOutput()):\n"
        "    loop.make_prompt()\n"
        "from spanwright import services"
    )
    assert "prompt_toolkit" in loaded
    assert not loaded & {"sympy", "pygls", "lsprotocol", "flint", "distributed", "pygments"}


def test_the_first_prompt_waits_for_no_language(tmp_path: Path) -> None:
    loaded = modules_after(
        "import os, sys\n"
        f"os.environ['XDG_STATE_HOME'] = {str(tmp_path)!r}\n"
        "from spanwright import journal\n"
        "lost = journal.create_default()\n"
        "lost.close()\n"
        "for name in [n for n in sys.modules if n.startswith(('lark', 'spanwright'))]:\n"
        "    del sys.modules[name]\n"
        "from spanwright.replies import State\n"
        "from spanwright.shell import loop\n"
        "class Quiet:\n"
        "    def state(self): return State()\n"
        "asked = []\n"
        "def ask(state):\n"
        "    asked.append(state)\n"
        "    raise EOFError\n"
        "assert loop._logged(Quiet(), ask, lambda lines: None, None) == 0 and asked")
    assert not loaded & {"lark", "spanwright_grammar", "flint", "sympy"}


def test_the_log_is_made_at_the_first_entry(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("XDG_STATE_HOME", str(tmp_path))
    entries = ["fix n = 2", "x_1"]
    counts: list[int] = []

    def ask(state: State) -> str:
        counts.append(len(list(tmp_path.rglob("*.span"))))
        if not entries:
            raise EOFError
        return entries.pop(0)

    written: list[Line] = []
    assert loop._logged(LocalConversation(Session()), ask, written.extend, None) == 0
    assert counts == [0, 1, 1]
    (log,) = tmp_path.rglob("*.span")
    assert "\nx_1\n#= x_1\n#= # (1), expansion" in log.read_text()
    assert log.read_text().rstrip().rpartition("\n")[2].startswith("#= # closed, check ")


def test_a_log_that_cannot_be_made_is_spoken_of_once(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    in_the_way = tmp_path / "file"
    in_the_way.write_text("")
    monkeypatch.setenv("XDG_STATE_HOME", str(in_the_way))
    entries = ["fix n = 2", "x_1"]

    def ask(state: State) -> str:
        if not entries:
            raise EOFError
        return entries.pop(0)

    written: list[Line] = []
    assert loop._logged(LocalConversation(Session()), ask, written.extend, None) == 0
    lines = plain(written)
    (at,) = [k for k, line in enumerate(lines) if line.startswith("no log is kept: ")]
    assert lines[at + 1] == "  n = 2" and lines[at + 2].endswith("(1)")


def test_the_loop_alone_loads_no_editor() -> None:
    assert "prompt_toolkit" not in modules_after("from spanwright.shell import loop")


def test_scripts_run_without_the_editor(tmp_path: Path) -> None:
    script = tmp_path / "a.span"
    script.write_text("fix n = 2\nx_1 E_(1,0)\n")
    loaded = modules_after(
        f"from spanwright.cli import main\nassert main(['run', {str(script)!r}]) == 0")
    # the kernel runs in the evaluator's process
    assert "flint" not in loaded
    assert not loaded & {"prompt_toolkit", "sympy", "pygls", "lsprotocol"}


# --- On a terminal -------------------------------------------------------------------------------

FREE = "n free ∋"
RING = r"\[x_1..x_3\] ∋"


@contextmanager
def shell(folder: Path, **environment: str) -> Iterator[pexpect.spawn]:
    """The shell on a pseudo-terminal of 100 columns, its history below a folder."""
    child = pexpect.spawn(
        sys.executable, ["-m", "spanwright"], cwd=folder, encoding="utf-8", timeout=20,
        dimensions=(30, 100),
        env={
            **os.environ, "TERM": "xterm-256color", "PROMPT_TOOLKIT_NO_CPR": "1",
            "XDG_DATA_HOME": str(folder), "LANG": "C.UTF-8", **environment},
    )  # fmt: skip
    child.delaybeforesend = None
    try:
        yield child
    finally:
        child.close(force=True)


def styled(text: str) -> str:
    """The pattern of a mark in a prompt, whatever styles stand between."""
    return text.replace(" ∋", r"[^\n]{0,40}∋")


def test_a_session_on_a_terminal(tmp_path: Path) -> None:
    with shell(tmp_path) as child:
        child.expect(styled(FREE))
        child.send("fix n = 3\r")
        child.expect(styled(RING))
        child.send("x_1 E_(1,0)\r")
        child.expect("line 1, column 5: E_")
        child.expect(styled(RING))
        child.send("let μ = (2,0,1)\r")
        child.expect(styled(RING))
        child.send("degr\tx_2 E_μ)\r")
        child.expect(r"\(1\)")
        child.expect(styled(RING))
        child.send("(x_1 +\rx_2)\r")
        child.expect(r"\(2\)")
        child.expect(styled(RING))
        child.send("\x12degree")
        child.expect("earlier entry with:")
        child.send("\r\r")
        child.expect(r"\(3\)")
        child.expect(styled(RING))
        child.send("\x04")
        child.expect(pexpect.EOF)
        child.wait()
        assert child.exitstatus == 0
    kept = list(EntryHistory(tmp_path / "spanwright" / "entries.jsonl").load_history_strings())
    assert kept == [
        "degree(x_2 E_μ)", "(x_1 +\n  x_2)", "degree(x_2 E_μ)", "let μ = (2,0,1)", "x_1 E_(1,0)",
        "fix n = 3",
    ]  # fmt: skip


def test_the_menu_and_what_is_wrong_stand_below_the_line(tmp_path: Path) -> None:
    with shell(tmp_path) as child:
        child.expect(styled(FREE))
        child.send("fix n = 3\r")
        child.expect(styled(RING))
        child.send("de\t")
        child.expect("(?s)derive.*shows the rule used.*degree\\(f\\).*the highest total degree")
        child.send("\t\t\r")
        child.expect("takes a polynomial")
        child.send("x_1) + x_4 ")
        child.expect("x_4 does not exist: positions go from 1 to 3")
        child.send("\x03")
        child.send("inner(x_1, ")
        child.expect("part 2")
        child.send("\x03\x04")
        child.expect(pexpect.EOF)


def test_keys_explain_and_set_right_on_a_terminal(tmp_path: Path) -> None:
    with shell(tmp_path) as child:
        child.expect(styled(FREE))
        child.send("fix n = 3\r")
        child.expect(styled(RING))
        child.send("x_1+E_(2,0,1)\x1bOP")
        child.expect("Haglund")
        child.send("\x1b[12~\r")
        child.expect(r"\(1\)")
        child.expect(styled(RING))
        child.send("\x1b[200~let  g=x_1\nlet  k=g\x1b[201~\r")
        child.expect(r"\x1b[^\n]*k[^\n]{0,60}=[^\n]{0,80}1")
        child.expect(styled(RING))
        child.send("\x04")
        child.expect(pexpect.EOF)
    kept = list(EntryHistory(tmp_path / "spanwright" / "entries.jsonl").load_history_strings())
    assert kept == ["let g = x_1\nlet k = g", "x_1 + E_(2,0,1)", "fix n = 3"]


def test_control_c_stops_a_sentence_and_keeps_the_session(tmp_path: Path) -> None:
    with shell(tmp_path) as child:
        child.expect(styled(FREE))
        child.send("fix n = 3; let f = x_1\r")
        child.expect(styled(RING))
        child.send("expand (x_1 + x_2 + x_3)^30 in E\r")
        child.expect("Ctrl-C stops this sentence")
        child.sendintr()
        child.expect("stopped")
        child.expect(styled(RING))
        child.send("half a line\x03f + x_2\r")
        child.expect(r"\(1\)")
        child.expect(styled(RING))
        child.send("quit\r")
        child.expect(pexpect.EOF)


def test_colours_are_left_out_when_not_wanted(tmp_path: Path) -> None:
    with shell(tmp_path, NO_COLOR="1") as child:
        child.expect(styled(FREE))
        child.send("fix n = 3\r")
        child.expect(styled(RING))
        seen = child.before
        child.send("x_1 E_201 + zork\r")
        child.expect("line 1, column 13: zork is not defined")
        child.expect(styled(RING))
        seen += child.before
        child.send("\x03\x04")
        child.expect(pexpect.EOF)
        assert re.findall(r"\x1b\[(?:\d+;)*(?:[349]\d|38;[\d;]+)m", seen) == []


def test_a_dumb_terminal_works(tmp_path: Path) -> None:
    with shell(tmp_path, TERM="dumb") as child:
        child.expect_exact("Q(q,t)[x_1..x_n], n free : ")
        child.send("fix n = 3\n")
        child.expect_exact("Q(q,t)[x_1..x_3] : ")
        child.send("(x_1 +\n")
        child.expect_exact(" " * 19)
        child.send("x_2)\n")
        child.expect(r"x_1 \+ x_2 +\(1\)")
        child.expect_exact("[x_1..x_3] : ")
        child.sendeof()
        child.expect(pexpect.EOF)
        assert "\x1b" not in child.before
        child.wait()
        assert child.exitstatus == 0


def test_a_history_that_cannot_be_written_is_no_fault(tmp_path: Path) -> None:
    (tmp_path / "spanwright").write_text("a file where the folder should be")
    with shell(tmp_path) as child:
        child.expect(styled(FREE))
        child.send("fix n = 3\r")
        child.expect(styled(RING))
        child.send("\x1b[A\x1b[A\r")
        child.expect(styled(RING))
        child.send("\x04")
        child.expect(pexpect.EOF)


def test_a_log_that_cannot_be_gone_on_in_opens_no_empty_session(tmp_path: Path) -> None:
    said: list[str] = []

    def write(lines: list[Line]) -> None:
        said.extend("".join(text for _, text in line) for line in lines)

    def ask(state: State) -> str:
        raise AssertionError("nothing is asked")

    conversation = LocalConversation(Session())
    assert loop._logged(conversation, ask, write, tmp_path / "missing.span") == 2
    assert any("not brought back" in line and "missing.span" in line for line in said)
