"""Question 8: what rules of thumb, and today's plan, would cost on the same data."""

from ledgersolve.findings import Answered, Column
from ledgersolve.lot_sizing.audit import audit
from ledgersolve.lot_sizing.case import Case
from ledgersolve.lot_sizing.plan import Plan, plan_from_made, resource_need
from ledgersolve.lot_sizing.rules_of_thumb import RULES, quantities
from ledgersolve.lot_sizing.why_lots import money


def against_rules(case: Case, plan: Plan, cost: float) -> Answered:
    """Cost and hours of rules of thumb and of today's plan on the same data, each audited."""
    plans = [("This plan", plan)]
    plans += [(name, plan_from_made(case, quantities(case, cover))) for name, cover in RULES]
    if case.compare_today and case.today is not None:
        plans.append(("Today's plan", plan_from_made(case, case.today)))
    rows: list[tuple[str | float | None, ...]] = []
    for name, other in plans:
        checked = audit(case, other)
        broken = sorted({check.rule for check in checked.broken()})
        fits = "yes" if checked.ok else "no: " + ", ".join(broken).lower()
        hours = float(resource_need(case, other.made).sum()) if case.resources else None
        rows.append((name, checked.total, checked.total - cost, float(other.setups), hours, fits))
    thumbs = {name for name, _ in RULES}
    kept = [row for row in rows if row[0] in thumbs and row[5] == "yes"]
    words = _breaking(case, rows)
    if kept:
        best = min(kept, key=lambda row: float(str(row[1])))
        extra = float(str(best[2]))
        words = (f"The best rule of thumb that keeps every rule ({best[0]}) costs {money(case, abs(extra))} "
                 f"{'more' if extra >= 0 else 'less'} than this plan.")
    columns = (Column("Plan"), Column("Cost", "money"), Column("More than this plan", "money"),
               Column("Setups", "number"), Column("Time on resources", "number"), Column("Keeps every rule"))
    return Answered("What would rules of thumb cost?", words, columns, tuple(rows), headline=bool(kept))


def _breaking(case: Case, rows: list[tuple[str | float | None, ...]]) -> str:
    """Say of plans of which none keeps every rule what the cheapest rule of thumb breaks all the same."""
    rules = [row for row in rows[1:] if row[0] != "Today's plan"]
    name, _, more, _, _, fits = min(rules, key=lambda row: float(str(row[1])))
    extra = float(str(more))
    cost = f"{money(case, abs(extra))} {'more' if extra >= 0 else 'less'} than this plan"
    return (f"No rule of thumb keeps all rules of the workbook. The cheapest one ({name}) costs {cost} and breaks "
            f"{str(fits).removeprefix('no: ')}.")
