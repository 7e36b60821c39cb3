"""Processes that share a run's work: every answer once, a lost process told, and none left behind."""

import math
import os
import time
from multiprocessing import active_children

import pytest

from yieldsim.errors import PlaceError
from yieldsim.study.hands import Hands


@pytest.fixture
def hands():
    others = set(active_children())
    with Hands(2) as found:
        yield found
    assert set(active_children()) <= others


def test_every_call_is_answered_once(hands):
    assert sorted(hands.share(math.isqrt, ((n * n,) for n in range(40)))) == list(range(40))


def test_what_a_call_raises_is_raised_here(hands):
    with pytest.raises(ValueError, match="nonnegative"):
        list(hands.share(math.isqrt, [(-1,)]))


def test_a_process_ended_from_outside_is_told(hands):
    with pytest.raises(PlaceError, match="run again"):
        list(hands.share(os._exit, [(9,)]))


def test_what_is_still_at_work_is_ended_with_the_run(hands):
    """As the fixture checks: to wait for it would take an hour."""
    hands.begin(time.sleep, 3600)
