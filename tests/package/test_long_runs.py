"""Short versions of the long runs; each module's own command prints the full figures."""

from __future__ import annotations

import pytest

from tests.office import needs_office
from tests.package import corpus, mutations, office, synthetic

NO_CORPUS = pytest.mark.skipif(not corpus.files(), reason="../shared/corpus is not there")


@NO_CORPUS
def test_every_sixth_file_of_the_corpus_is_unharmed_or_refused_with_a_reason() -> None:
    tally = corpus.run(corpus.files()[::6], audit=4)
    assert tally.unhandled == []
    assert tally.failures == []
    assert tally.grafted > 0.8 * tally.files
    assert tally.grafted + sum(tally.refused.values()) == tally.files


@pytest.mark.parametrize("kind", synthetic.KEPT)
def test_packages_the_corpus_lacks_are_unharmed(kind: str) -> None:
    tally = corpus.Tally()
    corpus.examine(kind, synthetic.KEPT[kind](), tally, audit=True)
    assert tally.unhandled == []
    assert tally.failures == []
    assert tally.grafted == 1


def test_mutated_packages_are_used_or_refused_within_bounds() -> None:
    outcome = mutations.run_watched(280, seed=7)
    assert outcome.unhandled == []
    assert outcome.slow == []
    assert outcome.changed == 0
    assert outcome.megabytes < mutations.MOST_MEGABYTES
    assert outcome.ends["used"] > 50
    assert len(outcome.ends) > 5


@needs_office
def test_libreoffice_shows_grafted_files_and_what_it_saves_is_recognised() -> None:
    tally = office.run(office.drawn(6))
    assert tally.failures == []
    assert sum(tally.passed.values()) >= 5 * 7
