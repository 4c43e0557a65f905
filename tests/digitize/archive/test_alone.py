"""A piece of work in a process of its own."""

import os
import time
from functools import partial

import pytest

from digitize.archive.alone import Ended, Limits, run_alone
from digitize.archive.worker import PRELOAD

LIMITS = Limits(20.0, 4096)


def steps(*moods):
    """One step after the other, each with what it does to its process."""
    for mood in moods:
        if mood == "crash":
            os.abort()
        if mood == "hang":
            time.sleep(600)
        if mood == "eat":
            bytearray(1 << 40)
        if mood == "slow":
            time.sleep(1.2)
        yield mood


def run(*moods, limits=LIMITS, stopped=lambda: False):
    return run_alone(partial(steps, *moods), limits, PRELOAD, stopped)


def test_what_is_yielded_comes_back_in_order():
    assert run("one", "two", None) == Ended(("one", "two", None))
    assert run() == Ended(())


@pytest.mark.parametrize("mood", ["crash", "eat"])
def test_what_ends_the_process_keeps_the_steps_before_it(mood):
    ended = run("one", mood, "two")
    assert ended.steps == ("one",)
    assert ended.lost == "the program failed on it, or it took too much memory"


def test_a_hang_is_given_up_and_each_step_has_the_whole_time():
    limits = Limits(2.0, 4096)
    assert run("slow", "slow", "slow", limits=limits) == Ended(("slow",) * 3)
    began = time.monotonic()
    assert run("hang", limits=limits) == Ended((), "it took more than 2 s")
    assert time.monotonic() - began < 60


def test_work_that_nobody_waits_for_is_ended():
    assert run("hang", stopped=lambda: True).steps == ()


def test_a_process_has_one_core_and_prints_nothing(capfd):
    (threads,) = run_alone(_threads, LIMITS, PRELOAD, lambda: False).steps
    assert threads == "1"
    assert capfd.readouterr() == ("", "")


def _threads():
    os.write(1, b"a name on the page")
    yield os.environ["OPENBLAS_NUM_THREADS"]
