"""The sheets a report wants, by its kind; the graft settles them against the analyst's own names."""

DECISION, LEDGER, PROOF, RUN_RECORD = "Decision", "Ledger", "Proof", "Run record"
PLAN_SITES, PLAN_CUSTOMERS, PLAN_DELIVERIES = "Plan sites", "Plan customers", "Plan deliveries"
PLAN_VARIANTS, PROOF_PRICES, ANSWERS = "Plan variants", "Proof prices", "Questions answered"
PLAN_LOTS, PLAN_STOCK, PLAN_LOAD = "Plan lots", "Plan stock", "Plan load"
PLAN_LATE, PLAN_LOST, PLAN_MAP = "Plan late", "Plan lost", "Plan map"
TO_FIX, NO_PLAN = "To fix", "No plan"

_WANTED = {
    "site selection": (DECISION, LEDGER, PLAN_SITES, PLAN_CUSTOMERS, PLAN_DELIVERIES, PLAN_VARIANTS, ANSWERS, PROOF,
                       PROOF_PRICES, PLAN_MAP, RUN_RECORD),
    "lot sizing": (DECISION, LEDGER, PLAN_LOTS, PLAN_STOCK, PLAN_LATE, PLAN_LOST, PLAN_LOAD, ANSWERS, PROOF,
                   PROOF_PRICES, RUN_RECORD),
    "to fix": (TO_FIX, RUN_RECORD),
    "no plan": (NO_PLAN, RUN_RECORD),
}


def wanted_names(kind: str) -> tuple[str, ...]:
    """Give the sheet names a report of this kind may use, in order.

    ``kind`` is ``site selection``, ``lot sizing``, ``to fix`` or ``no plan``; a report leaves out sheets it has
    nothing for.
    """
    return _WANTED[kind]
