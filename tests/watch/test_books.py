"""When a save counts: bookkeeping with a clock of its own."""

from itertools import pairwise

import pytest

from bridge.files.fingerprint import Fingerprint
from bridge.watch.books import TORN_PATIENCE_S, Books, Phase
from bridge.watch.scan import Sighting, State

SETTLE, GRACE = 0.3, 10.0


def at(mtime: int, inode: int = 1, size: int = 100, ctime: int = 0) -> Sighting:
    return Sighting("/shown/book.xlsx", State(inode, size, mtime, ctime or mtime))


def version(mtime: int, inode: int = 1, size: int = 100) -> Fingerprint:
    return Fingerprint(inode, size, mtime, f"digest{mtime}")


def books() -> Books:
    return Books(SETTLE, GRACE)


def due(kept: Books, now: float) -> list[str]:
    return [book.real for book in kept.due(now)]


def test_due_when_quiet_for_the_settle_time():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    assert due(kept, 0.29) == []
    assert due(kept, 0.31) == ["/b"]
    assert kept.next_look() == 0.3


def test_a_burst_counts_once_after_its_end():
    kept = books()
    for number in range(10):
        kept.seen("/b", at(number), number * 0.2)
        assert due(kept, number * 0.2 + 0.1) == []
    assert due(kept, 9 * 0.2 + 0.31) == ["/b"]


def test_hints_without_a_change_delay_nothing():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    kept.seen("/b", at(1), 0.25)
    assert due(kept, 0.31) == ["/b"]


def ask(kept: Books, now: float):
    (book,) = kept.due(now)
    kept.ask(book)
    return book


def test_our_own_write_is_no_save():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    ours = at(2, inode=9)
    kept.answered("/b", version(2, inode=9), ours.state, 2.0)
    assert kept.by_real["/b"].phase is Phase.HANDLED
    assert kept.seen("/b", ours, 2.1) is None


def test_a_save_after_our_write_and_before_its_answer_is_one():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", version(2, inode=9), at(3, inode=10).state, 2.0)
    assert kept.by_real["/b"].phase is Phase.SETTLING
    assert due(kept, 2.31) == ["/b"]


def test_a_save_during_the_job_is_one_whatever_the_answer():
    for found in (version(1), None):
        kept = books()
        kept.seen("/b", at(1), 0.0)
        ask(kept, 1.0)
        kept.seen("/b", at(5), 1.5)
        kept.answered("/b", found, at(5).state, 1.6)
        assert due(kept, 1.81) == ["/b"]


def test_without_a_version_what_was_handed_on_is_dealt_with():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", None, at(1).state, 2.0)
    assert due(kept, 99.0) == []


def test_only_the_ctime_changed_is_worth_a_look():
    # Content may have been changed and the mtime put back: the bytes decide.
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", version(1), at(1).state, 2.0)
    assert kept.seen("/b", at(1, ctime=77), 3.0) is not None
    assert due(kept, 3.31) == ["/b"]


def test_torn_files_get_growing_pauses_and_an_end():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    now, pauses = 1.0, []
    (book,) = kept.due(now)
    while kept.torn(book, now):
        pauses.append(book.look_at - now)
        now = book.look_at
    assert pauses[0] == pytest.approx(0.2)
    assert all(later >= earlier - 1e-9 for earlier, later in pairwise(pauses))
    assert abs(pauses[-1] - 2.0) < 1e-9
    assert now - 1.0 >= TORN_PATIENCE_S
    assert due(kept, 9999.0) == []
    kept.seen("/b", at(2), 9999.0)
    assert due(kept, 10000.0) == ["/b"]


def test_absent_for_a_moment_is_a_save_in_progress():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    assert not kept.absent("/b", 1.0)
    assert due(kept, 2.0) == []
    kept.seen("/b", at(2), 2.0)
    assert not kept.absent("/b", 11.0)
    assert kept.absent("/b", 21.1)
    assert kept.by_real == {}


def test_a_renamed_workbook_keeps_what_is_known():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", version(1), at(1).state, 2.0)
    kept.absent("/b", 3.0)
    kept.seen("/c", at(1, ctime=9), 3.0)
    assert kept.by_real["/c"].handled == version(1)
    kept.seen("/d", at(8), 3.0)
    assert kept.by_real["/d"].handled is None


def test_held_until_closed():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", None, at(1).state, 2.0)
    kept.hold("/b", 2.0)
    assert due(kept, 2.0) == ["/b"]
    kept.seen("/b", at(2), 3.0)
    assert kept.by_real["/b"].phase is Phase.SETTLING
    kept.hold("/b", 3.1)
    assert kept.by_real["/b"].phase is Phase.SETTLING, "a newer save comes first"


def test_again_after_a_pause():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", None, at(1).state, 2.0)
    kept.again("/b", 2.0, pause=1.0)
    assert due(kept, 2.9) == []
    assert due(kept, 3.0) == ["/b"]


def test_answered_while_it_was_away():
    kept = books()
    kept.seen("/b", at(1), 0.0)
    ask(kept, 1.0)
    kept.answered("/b", None, None, 2.0)
    assert due(kept, 2.31) == ["/b"]
