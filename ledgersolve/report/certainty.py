"""How good a plan is, and what a saving is made of, in words that are never rounded in our favour."""

import math
from typing import Any

from ledgersolve.findings import Audit
from ledgersolve.mip import Verdict
from ledgersolve.mip.run import Solved
from ledgersolve.report import style
from ledgersolve.workbook.figures import NO_BREAK


def how_sure(solved: Solved[Any], currency: str, accepted_gap: float) -> list[str]:
    """Say in words how good the plan is, and the most that could still be saved; never in our favour."""
    cost, bound = solved.cost, solved.bound
    if cost is None or bound is None:
        return ["This is the best plan found. How much a better one could save is not known."]
    rest = max(0.0, cost - bound)
    digits = style.money_digits(currency)
    most = f"{style.figure_words(most_saved(cost, bound, currency), digits)}{NO_BREAK}{currency}"
    least = 10.0 ** -style.money_digits(currency)
    if solved.verdict is Verdict.PROVEN_BEST and rest < least:
        smallest = style.figure_words(least, style.money_digits(currency))
        return [f"Proven: no plan that keeps the rules of the workbook is cheaper, not even by {smallest} "
                f"{currency}."]
    gap = f" ({style.percent_words(rest / cost, 'up')})" if cost > 0 else ""
    if solved.verdict is Verdict.PROVEN_BEST:
        return [f"Proven, as far as it matters: no plan that keeps the rules is cheaper by more than {most}{gap}."]
    if solved.verdict is Verdict.WITHIN_GAP:
        stop = style.percent_words(accepted_gap)
        return ["Good enough by your own setting: the search stopped once no plan could be cheaper by more than "
                f"{stop}. At most {most}{gap} could still be saved."]
    return ["The time limit ended the search. This is the best plan found; a better one could save at most "
            f"{most}{gap}. Whether there is one is not known: a higher time limit may tell."]


def most_saved(cost: float, bound: float, currency: str) -> float:
    """What a better plan could save at most, in whole minor units, never rounded in our favour."""
    scale = 10.0 ** style.money_digits(currency)
    least = max(0.0, cost - bound) * scale
    return math.ceil(least - 1e-6 * max(1.0, 1e-9 * abs(cost) * scale)) / scale


def made_of(before: Audit | None, now: Audit, currency: str, most: int = 3) -> str:
    """What a saving is made of, in a sentence, where parts of the cost move against each other; else ""."""
    if before is None:
        return ""
    was = {part.name: part.amount for part in before.parts}
    moved = {part.name: part.amount - was.pop(part.name, 0.0) for part in now.parts}
    moved |= {name: -amount for name, amount in was.items()}
    least = 10.0 ** -style.money_digits(currency)
    ranked = sorted((name for name, change in moved.items() if abs(change) >= least), key=lambda n: -abs(moved[n]))
    if len(ranked) < 2 or min(moved.values()) > -least or max(moved.values()) < least:
        return ""
    words = [f"{name.lower()} {style.money_words(abs(moved[name]), currency)} {'less' if moved[name] < 0 else 'more'}"
             for name in ranked[:most]]
    return f" The difference: {', '.join(words)}{', the rest in smaller parts' if len(ranked) > most else ''}."


def saving_note(solved: Solved[Any]) -> str:
    """Small print under the most that could still be saved."""
    return {
        Verdict.PROVEN_BEST: "proven for every plan that keeps the rules",
        Verdict.WITHIN_GAP: "within the gap that the workbook accepts",
        Verdict.BEST_FOUND: "the time limit ended the search",
    }.get(solved.verdict, "")
