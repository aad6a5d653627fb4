"""The live list fits its terminal, in any script; elsewhere there are plain lines."""

import io
from datetime import datetime
from unicodedata import east_asian_width

from hypothesis import given
from hypothesis import strategies as st

from bridge.watch.screen import Line, Screen, layout

NOON = datetime(2026, 12, 1, 12, 0)


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def cells(text: str) -> int:
    return sum(2 if east_asian_width(c) in "WF" else 1 for c in text)


@given(
    st.lists(st.tuples(st.text(max_size=60), st.text(max_size=300)), max_size=40),
    st.integers(30, 200),
    st.integers(5, 60),
)
def test_fits(lines, columns, rows):
    made = list(layout([Line(f"/a/{n}.xlsx", "fitted", NOON, m) for n, m in lines], "watching", columns, rows))
    assert len(made) <= rows - 1
    for line in made:
        assert "\n" not in line
        assert "\x1b" not in line
        assert cells(line) <= columns + 60  # combining marks take no cell of their own
    assert made[-1].startswith(("watching", f"{len(lines) - max(1, rows - 4)} more; watching"))


def test_latest_news_first():
    old, new = Line("/a/old.xlsx", "fitted", NOON, told=1.0), Line("/a/new.xlsx", "fitting", told=2.0)
    head, first, second, foot = layout([old, new], "watching", 80, 24)
    assert head.split() == ["workbook", "state", "last", "fit", "message"]
    assert first.startswith("new.xlsx")
    assert second.split() == ["old.xlsx", "fitted", "12:00:00"]
    assert foot == "watching"


def test_wide_characters_keep_the_columns_straight():
    made = list(layout([Line("/a/見積り.xlsx", "fitted"), Line("/a/quotation.xlsx", "fitted")], "", 80, 24))
    assert len({cells(line[: line.index("fitted")]) for line in made[1:3]}) == 1


def test_draws_over_itself_and_leaves_the_cursor():
    out = Terminal()
    screen = Screen(out)
    screen.draw([Line("/a/b.xlsx", "fitting")], "watching")
    screen.draw([Line("/a/b.xlsx", "fitted", NOON)], "watching")
    screen.say("A sentence.")
    screen.close()
    said = out.getvalue()
    assert said.count("\x1b[3F\x1b[J") == 2
    assert said.startswith("\x1b[?25l")
    assert said.endswith("\x1b[?25h")


def test_plain_lines_elsewhere():
    out = io.StringIO()
    screen = Screen(out)
    screen.draw([Line("/a/b.xlsx", "fitting")], "watching")
    screen.ended(Line("/a/b.xlsx", "refused", None, "It is\x1b[31m read-only."))
    screen.close()
    assert "\x1b" not in out.getvalue()
    assert out.getvalue().endswith("/a/b.xlsx: refused. It is?[31m read-only.\n")


def test_a_terminal_that_goes_away_ends_nothing():
    class Gone(Terminal):
        def write(self, text):
            raise OSError(5, "Input/output error")

    screen = Screen(Gone())
    screen.say("x")
    screen.draw([], "watching")
    screen.close()
