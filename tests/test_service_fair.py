"""Whose turn it is."""

import pytest

from ledgersolve.service.fair import Estimates, Running, Turns, Waiting, size_class


def turns(now: float = 1000.0, **changes) -> Turns:
    """Turns under a clock that stands."""
    return Turns(clock=lambda: now, **changes)


def waiting(owner: str, size: int, since: float = 999.0, name: str = "") -> Waiting:
    """One in the queue."""
    return Waiting(owner, size, since, name or f"{owner} {size}")


def order(line, running=()) -> list[str]:
    """Names in the order in which they are taken."""
    taken = []
    while (one := line.take(list(running))) is not None:
        taken.append(one.item)
    return taken


def test_owners_take_turns():
    """One owner's fifty do not stand before another's one."""
    line = turns().line_up([*(waiting("ann", 1000 + n) for n in range(50)), waiting("ben", 9000)])
    assert order(line)[:3] == ["ann 1000", "ben 9000", "ann 1001"]


def test_turns_are_kept_from_scan_to_scan():
    """Who was served last is last in the next line, too."""
    taking = turns()
    taking.line_up([waiting("ann", 1), waiting("ben", 1)]).take([])
    assert taking.line_up([waiting("ann", 1), waiting("ben", 1)]).take([]).owner == "ben"


def test_an_owners_small_work_goes_first_and_equals_in_order():
    """Within an owner the expected work decides, then who came first."""
    line = turns().line_up([
        waiting("ann", 90_000, 1.0 + 900), waiting("ann", 500, 950.0, "late"), waiting("ann", 500, 940.0, "early"),
    ])
    assert order(line) == ["early", "late", "ann 90000"]


def test_what_waited_long_goes_before_smaller_ones():
    """Ageing: a large one is not passed by small ones for ever."""
    line = turns(age_seconds=900.0).line_up([waiting("ann", 5_000_000, 50.0, "old"), waiting("ann", 100)])
    assert order(line)[0] == "old"


def test_one_more_place_is_kept_for_small_work():
    """Long work may take all places but never the one beyond them."""
    taking = turns()
    long = Running(size=1 << 20, expected=500.0, started=990.0)
    small = Running(size=100, expected=1.0, started=995.0)
    assert taking.places([long], 2) == "any"
    assert taking.places([long, long], 2) == "small"
    assert taking.places([long, long, small], 2) == "none"
    assert taking.places([long, small], 2) == "none"
    assert taking.places([], 1) == "any"
    assert taking.places([long], 1) == "small"


def test_a_small_one_gets_a_place_where_all_turned_out_long():
    """Work that was thought small and runs on opens the place beyond, never two."""
    taking = turns()
    surprise = Running(size=100, expected=1.0, started=900.0)
    assert taking.places([surprise, surprise], 2) == "small"
    assert taking.places([surprise, surprise, surprise], 2) == "none"


def test_a_place_for_small_work_is_not_given_to_long_work():
    """Where only large ones wait, the kept place stays empty."""
    line = turns().line_up([waiting("ann", 5_000_000)])
    assert line.take([], small_only=True) is None
    assert len(line) == 1


def test_work_of_a_size_that_runs_long_now_is_not_taken_for_small():
    """A running job of the same size speaks against the guess from the size."""
    taking = turns()
    slow = [Running(size=12_000, expected=30.0, started=900.0)]
    line = taking.line_up([waiting("ann", 12_050), waiting("ben", 5_000)])
    assert line.take(slow, small_only=True).owner == "ben"
    assert line.take(slow, small_only=True) is None


def test_expected_work_is_learned_from_what_ended():
    """The median of the jobs of this size counts, not one bad day; other sizes are not touched."""
    estimates = Estimates()
    assert estimates.expected(24_000) == pytest.approx(60.0)
    for seconds in (2.0, 3.0, 400.0):
        estimates.learn(24_000, seconds)
    assert estimates.expected(24_000) == 3.0
    assert estimates.expected(25_000) == 3.0
    assert estimates.expected(240_000) == pytest.approx(600.0)


def test_size_classes_are_a_fifth_apart():
    """Sizes within a tenth share a class, sizes a third apart do not."""
    assert size_class(10_000) == size_class(10_500)
    assert size_class(10_000) != size_class(13_500)
    assert size_class(0) == 0


def test_the_shown_order_is_the_order_taken():
    """The status page numbers the queue as it will be taken."""
    crowd = [waiting(owner, size) for owner in ("ann", "ben", "cem") for size in (500, 100, 900)]
    line = turns().line_up(crowd)
    shown = [one.item for one in line.in_order()]
    assert shown == order(line)
