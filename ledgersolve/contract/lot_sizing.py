"""What a lot-sizing workbook holds: settings and sheets."""

import math

from ledgersolve.contract import settings
from ledgersolve.contract.columns import Entry, Holds, JobContract, ListSheet, MatrixSheet
from ledgersolve.contract.reading import Job

PERIODS, ITEMS, DEMAND, RESOURCES = "Periods", "Items", "Demand", "Resources"
CAPACITY, PERIOD_COSTS, RECEIPTS = "Capacity", "Period costs", "Receipts"
FAMILIES, TODAY_PLAN = "Families", "Today plan"

PERIODS_A_YEAR = "Periods a year"
HOLDING_RATE = "Yearly holding rate (%)"
LATE = "Late deliveries"

SETTINGS = (
    Entry("Period unit", "What a period is.", Holds.TEXT, "week", default="period"),
    Entry(PERIODS_A_YEAR, "Number of periods in a year, for a yearly holding rate.", example=52,
          unit="periods", low=0, above=True, high=1e6),
    Entry(HOLDING_RATE, "Yearly cost of holding, in percent of Unit value, for items without a holding cost.",
          example=20, unit="% a year", high=1000),
    Entry(LATE, "yes: an item that has a backlog cost may be delivered late.", Holds.YES_NO, "no",
          default=False),
    Entry(settings.COMPARE, "yes: the plan in the sheet Today plan is costed too.", Holds.YES_NO, "yes",
          default_words="yes if the sheet Today plan is filled"),
)

_MONEY, _UNITS, _PER_UNIT, _TIME = "currency", "item's units", "currency per unit", "time units"
_HOLDING = "currency per unit and period"

PERIODS_SHEET = ListSheet(
    PERIODS, "One row a period, in order.",
    (
        Entry("Period", "Code of the period.", Holds.CODE, "W01", required=True),
        Entry("Start", "First day of the period.", Holds.DATE, "2027-01-04"),
    ),
    key=("Period",), required=True,
)

ITEMS_SHEET = ListSheet(
    ITEMS, "One row an item that is made.",
    (
        Entry("Item", "Code of the item.", Holds.CODE, "P100", required=True),
        Entry("Name", "Name for the result sheets.", Holds.TEXT, "Paint, white, 5 l",
              default_words="the code"),
        Entry("Unit", "Unit in which the item is counted.", Holds.TEXT, "can", default="unit"),
        Entry("Setup cost", "Paid in every period in which the item is made.", example=320, unit=_MONEY,
              required=True),
        Entry("Unit cost", "Cost of making a unit.", example=4.2, unit=_PER_UNIT, default=0.0),
        Entry("Holding cost", "Cost of a unit in stock at a period's end.", example=0.05, unit=_HOLDING,
              default_words="Yearly holding rate (%) on Unit value, spread over Periods a year"),
        Entry("Unit value", "Value of a unit, for the yearly holding rate.", example=11.5, unit=_PER_UNIT),
        Entry("Opening stock", "Stock before the first period.", example=140, unit=_UNITS, default=0.0),
        Entry("Safety stock", "Least stock at each period's end.", example=60, unit=_UNITS, default=0.0),
        Entry("Closing stock", "Least stock at the end of the last period, in place of the safety stock.",
              example=100, unit=_UNITS, default_words="the safety stock"),
        Entry("Most stock", "Most stock at a period's end.", example=2500, unit=_UNITS, default=math.inf),
        Entry("Least lot", "Least units made in a period in which the item is made.", example=50, unit=_UNITS,
              default=0.0),
        Entry("Most lot", "Most units made in a period.", example=1200, unit=_UNITS, default=math.inf),
        Entry("Lot multiple", "Units made in a period are a whole multiple of this.", example=10, unit=_UNITS,
              above=True),
        Entry("Backlog cost",
              "Cost of a unit that is late at a period's end; without it the item is never late.",
              example=0.4, unit=_HOLDING),
        Entry("Lost sale cost", "Cost of a unit of demand that is never met; without it all demand is met.",
              example=25, unit=_PER_UNIT),
        Entry("Resource", "Code of the resource on which the item is made.", Holds.CODE, "MIX",
              refers=RESOURCES),
        Entry("Time per unit", "Time on the resource for a unit.", example=0.02, unit=_TIME, default=0.0),
        Entry("Setup time", "Time on the resource in every period in which the item is made.", example=1.5,
              unit=_TIME, default=0.0),
        Entry("Family", "Code of the family, whose setup its items share.", Holds.CODE, "WHITE",
              refers=FAMILIES),
    ),
    key=("Item",), required=True,
)

DEMAND_SHEET = MatrixSheet(
    DEMAND, "Demand: a row an item, a column a period; empty = 0.",
    ITEMS, PERIODS, "Item", "Period",
    Entry("Demand", "Units wanted in the period.", example=180, unit=_UNITS,
                                  default=0.0),
    required=True,
)

RESOURCES_SHEET = ListSheet(
    RESOURCES, "One row a machine, line or team that several items share.",
    (
        Entry("Resource", "Code of the resource.", Holds.CODE, "MIX", required=True),
        Entry("Capacity", "Time available in a period; the sheet Capacity can give it by period.", example=76,
              unit=_TIME, required=True, instead=CAPACITY),
        Entry("Overtime limit", "Most time above the capacity in a period.", example=12, unit=_TIME,
              default=0.0),
        Entry("Overtime cost", "Cost of a time unit of overtime.", example=55, unit="currency per time unit",
              default=0.0),
        Entry("Use cost", "Paid for each period in which the resource is used, e.g. a rented machine.",
              example=0, unit=_MONEY, default=0.0),
    ),
    key=("Resource",),
)

CAPACITY_SHEET = MatrixSheet(
    CAPACITY,
    "Capacity by period, in place of the one figure in Resources: a row a resource, a column a period.",
    RESOURCES, PERIODS, "Resource", "Period",
    Entry("Capacity", "Time available in the period.", example=76, unit=_TIME,
          default_words="Capacity in Resources"),
)

PERIOD_COSTS_SHEET = ListSheet(
    PERIOD_COSTS, "Costs of an item that differ in a period, in place of the item's own.",
    (
        Entry("Item", "Code of the item.", Holds.CODE, "P100", required=True, refers=ITEMS),
        Entry("Period", "Code of the period.", Holds.CODE, "W03", required=True, refers=PERIODS),
        Entry("Setup cost", "Paid if the item is made in the period.", example=400, unit=_MONEY,
              default_words="the item's"),
        Entry("Unit cost", "Cost of making a unit in the period.", example=4.5, unit=_PER_UNIT,
              default_words="the item's"),
        Entry("Holding cost", "Cost of a unit in stock at the period's end.", example=0.06, unit=_HOLDING,
              default_words="the item's"),
        Entry("Setup allowed", "no: the item must not be made in the period.", Holds.YES_NO, "no",
              default=True),
    ),
    key=("Item", "Period"),
)

RECEIPTS_SHEET = ListSheet(
    RECEIPTS, "Quantities already ordered, which arrive for use in the period.",
    (
        Entry("Item", "Code of the item.", Holds.CODE, "P100", required=True, refers=ITEMS),
        Entry("Period", "Code of the period.", Holds.CODE, "W02", required=True, refers=PERIODS),
        Entry("Quantity", "Units that arrive.", example=200, unit=_UNITS, required=True),
    ),
    key=("Item", "Period"),
)

FAMILIES_SHEET = ListSheet(
    FAMILIES, "Groups of items that share a setup, paid in each period in which any of them is made.",
    (
        Entry("Family", "Code of the family.", Holds.CODE, "WHITE", required=True),
        Entry("Setup cost", "Paid for each period in which any member is made.", example=250, unit=_MONEY,
              required=True),
        Entry("Setup time", "Time on the resource for it.", example=2, unit=_TIME, default=0.0),
        Entry("Resource", "Code of the resource that this time loads.", Holds.CODE, "MIX", refers=RESOURCES),
    ),
    key=("Family",),
)

TODAY_SHEET = MatrixSheet(
    TODAY_PLAN, "Quantities made in today's plan: a row an item, a column a period; empty = 0.",
    ITEMS, PERIODS, "Item", "Period",
    Entry("Made", "Units made in the period.", example=180, unit=_UNITS, default=0.0),
)

CONTRACT = JobContract(
    Job.LOT_SIZING, (*settings.FIRST, *SETTINGS),
    (PERIODS_SHEET, RESOURCES_SHEET, FAMILIES_SHEET, ITEMS_SHEET, DEMAND_SHEET, CAPACITY_SHEET,
     PERIOD_COSTS_SHEET, RECEIPTS_SHEET, TODAY_SHEET),
    most_pairs=5_000_000,
)
"""The whole contract of the job."""
