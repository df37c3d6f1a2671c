"""Question 5, the part about variants: what keeping this plan's sites costs where a variant comes true."""

from collections.abc import Sequence

import numpy as np

from ledgersolve.findings import NOT_ANSWERED, Answered, Column
from ledgersolve.mip import Solved
from ledgersolve.site_selection.asker import Asker, Found, codes, found, listed, money
from ledgersolve.site_selection.case import CLOSED, OPEN, Case
from ledgersolve.site_selection.plan import Plan

Row = tuple[str | float | None, ...]
QUESTION = "What if a variant comes true?"


def variants_regret(asker: Asker, solved: Sequence[Solved[Plan]]) -> Answered:
    """Cost the plan's sites under every variant, and hold that against the variant's own best plan.

    ``solved`` has the variants' own solves, in the order of the case's variants. What keeping the sites costs
    more is told at most: the sites' cost less what the variant's best plan costs at least.
    """
    case = asker.case
    asker.asks = len(case.variants)
    rows: list[Row] = []
    regrets: list[tuple[float, str]] = []
    broken: list[str] = []
    for variant, own in zip(case.variants, solved, strict=False):
        changed, best = case.under(variant), found(own)
        why = _breaks(changed, asker.base)
        if why:
            rows.append((variant.name, None, best.high, None, why))
            broken.append(variant.name)
            continue
        kept = asker.kept(changed, ("variant", variant.name))
        row, regret = _row(variant.name, kept, best)
        rows.append(row)
        if kept.impossible:
            broken.append(variant.name)
        elif regret is not None:
            regrets.append((regret, variant.name))
    columns = (Column("Variant"), Column("With these sites", "money"), Column("With its best sites", "money"),
               Column("These sites cost more, by at most", "money"), Column("How sure"))
    missing = [str(row[0]) for row in rows if NOT_ANSWERED in str(row[4])]
    words = _words(case, regrets, broken, missing)
    return Answered(QUESTION, words, columns, tuple(rows), headline=bool(regrets or broken))


def _breaks(changed: Case, base: Plan) -> str:
    """Say which rule of a variant the plan's sites do not keep; empty where they keep all that concern sites."""
    shut = [int(j) for j in np.flatnonzero(base.open & (changed.rule == CLOSED))]
    missed = [int(j) for j in np.flatnonzero(~base.open & (changed.rule == OPEN))]
    count = int(base.open.sum())
    if shut:
        return f"not with these sites: it closes {codes(changed, shut)}"
    if missed:
        return f"not with these sites: it opens {codes(changed, missed)}"
    if changed.most_sites is not None and count > changed.most_sites:
        return f"not with these sites: it allows {changed.most_sites}, these are {count}"
    if changed.fewest_sites is not None and count < changed.fewest_sites:
        return f"not with these sites: it asks for {changed.fewest_sites}, these are {count}"
    return ""


def _row(name: str, kept: Found, best: Found) -> tuple[Row, float | None]:
    if kept.impossible:
        return (name, None, best.high, None, "these sites cannot keep its rules"), None
    if kept.high is None or best.low is None:
        return (name, kept.high, best.high, None, NOT_ANSWERED), None
    regret = max(0.0, kept.high - best.low)
    best_high = kept.high if best.high is None else min(best.high, kept.high)
    sure = "exact" if kept.exact and best.exact else "at most; the figure itself is not known yet"
    return (name, kept.high, best_high, regret, sure), regret


def _words(case: Case, regrets: list[tuple[float, str]], broken: list[str], missing: list[str]) -> str:
    sentences = []
    if regrets:
        worst, name = max(regrets)
        sentences.append("In every variant with a figure these sites are the best ones." if worst <= 0 else (
            f"Keeping these sites costs at most {money(case, worst, 'up')} more than the best ones, in {name}."))
    if broken:
        sentences.append(f"Not possible with these sites: {listed(broken)}.")
    if missing:
        sentences.append(f"{NOT_ANSWERED.capitalize()}: {listed(missing)}.")
    return " ".join(sentences)
