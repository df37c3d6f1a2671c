"""Gathering problems."""

from ledgersolve.contract.faults import FEW, MOST_CELLS, Fault, Faults


def fault(kind: str = "k", found: str = "f") -> Fault:
    """Give a fault."""
    return Fault(kind, found, "e", "r", "number", 0.0, 1.0)


def test_few_are_listed_and_many_are_one():
    """Five of a kind are five entries, six are one; the first keeps its words."""
    few, many = Faults(), Faults()
    for row in range(1, FEW + 1):
        few.add("S", (row, 1), "T", fault(found=str(row)))
    for row in range(1, FEW + 2):
        many.add("S", (row, 1), "T", fault(found=str(row)))
    assert [p.cell for p in few.problems(["S"])] == ["A1", "A2", "A3", "A4", "A5"]
    (one,) = many.problems(["S"])
    assert (one.cell, one.found, one.count, one.more) == ("A1", "1", 6, ("A2", "A3", "A4", "A5", "A6"))
    assert (one.recheck, one.low, one.high) == ("number", 0.0, 1.0)


def test_kinds_sheets_titles_and_groups_are_kept_apart():
    """Only faults of one kind, sheet, title, group and severity go together."""
    faults = Faults()
    for number in range(4):
        for row in range(10 * number + 1, 10 * number + 4):
            faults.add("S" if number else "Z", (row, 1), "T", fault("a" if number < 2 else "b"),
                       group=str(number == 3))
    faults.notice("S", (1, 2), "T", "a", "f", "e", "r")
    assert len(faults.problems(["S", "Z"])) == 13


def test_adding_many_at_once_gives_the_same_as_one_by_one():
    """``many`` and ``add`` agree, also where both add to one group."""
    places = [(row, 2) for row in range(1, 500)]
    one, other = Faults(), Faults()
    for place in places:
        one.add("S", place, "T", fault(found=str(place)))
    other.many("S", places[:3], "T", lambda i: fault(found=str(places[i])))
    other.many("S", places[3:], "T", lambda i: fault(found=str(places[3 + i])))
    assert one.problems(["S"]) == other.problems(["S"])
    assert one.problems([])[0].count == 499


def test_the_count_is_true_where_the_cells_are_cut():
    """More cells than can be marked are counted all the same."""
    faults = Faults()
    faults.many("S", [(row, 1) for row in range(1, 10_001)], "T", lambda _: fault())
    (problem,) = faults.problems(["S"])
    assert (problem.count, len(problem.more)) == (10_000, MOST_CELLS)


def test_problems_stand_in_the_workbooks_order():
    """Errors before notices, whole files first, then by sheet, row and column."""
    faults = Faults()
    faults.notice("A", (1, 1), "", "n", "f", "e", "r")
    faults.add("B", (1, 1), "T", fault("x"))
    faults.add("A", (2, 1), "T", fault("x"))
    faults.add("A", (1, 3), "T", fault("x"))
    faults.add("", None, "", fault("x"))
    assert [(p.sheet, p.cell) for p in faults.problems(["A", "B"])] == [
        ("", ""), ("A", "C1"), ("A", "A2"), ("B", "A1"), ("A", "A1")]
    assert faults.any_errors


def test_notices_alone_are_no_errors():
    """A list of notices does not send a workbook back."""
    faults = Faults()
    assert not faults.any_errors
    faults.notice("A", (1, 1), "", "n", "f", "e", "r")
    assert not faults.any_errors
    faults.many("A", [], "T", lambda _: fault())
    assert not faults.any_errors
