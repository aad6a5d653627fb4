"""The stress commands, short: their full counts are for an evening (`python -m tests.stress.races` and so on)."""

import argparse
import sys

import pytest

from tests.office import needs_office
from tests.stress import faults, kills, races, races_office, soak, window
from tests.stress.savers import SAVERS

pytestmark = pytest.mark.skipif(sys.platform != "linux", reason="leases, signals and /proc as Linux has them")


@pytest.mark.parametrize("style", SAVERS)
def test_races(tmp_path, style):
    count = races.run(tmp_path, SAVERS[style], rounds=80)
    assert count.rounds == 80
    assert count.bad == 0, count
    assert count.written >= 80


def test_kills(tmp_path):
    found = kills.run(tmp_path, 20)
    assert (found["newest"], found["whole"], found["leftovers after"]) == (20, 20, 0)


@pytest.mark.parametrize("name", ["queue overflow", "ENOSPC (disk full)"])
def test_faults(name):
    assert faults.FAULTS[name]() == (True, True, True)


def test_soak(tmp_path):
    top, home = tmp_path / "top", tmp_path / "home"
    top.mkdir()
    home.mkdir()
    wanted = argparse.Namespace(minutes=0.1, workbooks=24, folders=4, savers=3, bridges=2)
    assert soak.run(top, home, wanted) == 0


@needs_office
def test_races_with_libreoffice(tmp_path):
    lost, leftovers, counted = races_office.run(tmp_path, "direct", rounds=6)
    assert (lost, leftovers) == (0, 0)
    assert counted.split()[2] == "0"


@needs_office
@pytest.mark.skipif(window.missing() is not None, reason=f"not installed here: {window.missing()}")
def test_window(tmp_path):
    count = window.run(tmp_path, rounds=2)
    assert (count.rounds, count.written, count.lost) == (2, 2, 0)
    assert (count.shown_after_reload, count.silent_after_reload, count.asked_without_reload) == (1, 1, 1)
