"""What a site-selection workbook holds: settings and sheets."""

import math

from ledgersolve.contract import settings
from ledgersolve.contract.columns import Entry, Holds, JobContract, ListSheet, MatrixSheet
from ledgersolve.contract.reading import Job

SITES, CUSTOMERS, LANES = "Sites", "Customers", "Lanes"
LANE_COSTS, DISTANCES, VARIANTS = "Lane costs", "Distances", "Variants"

RATE = "Cost per unit and distance"
ROAD_FACTOR = "Road factor"
BASIS = "Lane cost basis"
LONGEST = "Longest distance"
SHARE = "Share within distance (%)"
SHARE_DISTANCE = "Distance for share"

SETTINGS = (
    Entry("Demand unit", "Unit in which demand and capacity are counted.", Holds.TEXT, "pallet",
          default="unit"),
    Entry("Period covered", "What one figure of fixed cost and demand covers.", Holds.TEXT, "year",
          default="year"),
    Entry(BASIS, "Whether a lane's cost is for one unit or serves all of the customer's demand.",
          Holds.CHOICE,
          "per unit", default="per unit", choices=("per unit", "whole demand")),
    Entry("Distance unit", "Unit of all distances.", Holds.CHOICE, "km", default="km", choices=("km", "mi")),
    Entry(RATE, "Cost of one unit over one unit of distance, for lanes without a cost of their own; on the "
          "whole-demand basis it is multiplied by the customer's demand.", example=0.12,
          unit="currency per demand unit and distance unit"),
    Entry(ROAD_FACTOR, "Road distance over great-circle distance; used for distances from coordinates only.",
          example=1.3, default=1.0, low=1.0, high=100.0),
    Entry("Fewest sites", "Least number of open sites.", Holds.WHOLE, 2),
    Entry("Most sites", "Largest number of open sites.", Holds.WHOLE, 6),
    Entry(LONGEST, "Service promise for every customer: no delivery over a longer distance.", example=250,
          unit="distance units"),
    Entry(SHARE, "At least this share of all demand is served within Distance for share.", example=90,
          unit="%", low=0, high=100),
    Entry(SHARE_DISTANCE, "The distance that Share within distance (%) counts.", example=150,
          unit="distance units"),
    Entry("Single sourcing", "yes: every customer is served from one site.", Holds.YES_NO, "no",
          default=False),
    Entry("Unmet demand cost", "Cost of a unit that is not delivered; when empty all demand must be met.",
          example=40, unit="currency per demand unit"),
    Entry(settings.COMPARE, "yes: today's network, from Today in Sites, is costed too.", Holds.YES_NO, "yes",
          default_words="yes if any Today is yes"),
)

_SWAPPED = "Are latitude and longitude swapped?"
_MONEY, _UNITS, _PER_UNIT, _DISTANCE = "currency", "demand units", "currency per demand unit", "distance units"

SITES_SHEET = ListSheet(
    SITES, "One row a possible site, or a size of one.",
    (
        Entry("Site", "Code of the site.", Holds.CODE, "HAM", required=True),
        Entry("Name", "Name for the result sheets.", Holds.TEXT, "Hamburg", default_words="the code"),
        Entry("Fixed cost", "Cost of the site being open, for the period covered.", example=180000,
              unit=_MONEY,
              required=True),
        Entry("Capacity", "Most units the site can handle.", example=24000, unit=_UNITS, default=math.inf),
        Entry("Least volume", "Least units the site must handle if it is open.", example=2000, unit=_UNITS,
              default=0.0),
        Entry("Handling cost", "Cost of a unit handled at the site.", example=1.8, unit=_PER_UNIT,
              default=0.0),
        Entry("Rule", "Whether the site may be open, has to be open, or stays closed.", Holds.CHOICE, "free",
              default="free", choices=("free", "open", "closed")),
        Entry("Today", "yes: in use today.", Holds.YES_NO, "yes", default=False),
        Entry("Opening cost", "Paid once if the site is opened and not in use today.", example=35000,
              unit=_MONEY,
              default=0.0),
        Entry("Closing cost", "Paid once if the site is in use today and closed.", example=20000, unit=_MONEY,
              default=0.0),
        Entry("Group", "Name shared by the sizes of one site, of which at most one opens.", Holds.CODE,
              "Hamburg sizes"),
        Entry("Latitude", "Decimal degrees (WGS 84), north positive.", example=53.55, unit="degrees", low=-90,
              high=90, hint=_SWAPPED),
        Entry("Longitude", "Decimal degrees (WGS 84), east positive.", example=9.99, unit="degrees", low=-180,
              high=180, hint=_SWAPPED),
    ),
    key=("Site",), required=True,
)

CUSTOMERS_SHEET = ListSheet(
    CUSTOMERS, "One row a customer, or an area of customers.",
    (
        Entry("Customer", "Code of the customer.", Holds.CODE, "C001", required=True),
        Entry("Name", "Name for the result sheets.", Holds.TEXT, "Bremen", default_words="the code"),
        Entry("Demand", "Units wanted in the period covered.", example=1250, unit=_UNITS, required=True),
        Entry(LONGEST, "Service promise to this customer, in place of the setting.", example=120,
              unit=_DISTANCE,
              default_words="the setting"),
        Entry("Single source", "yes: served from one site only.", Holds.YES_NO, "no",
              default_words="the setting"),
        Entry("Latitude", "Decimal degrees (WGS 84), north positive.", example=53.08, unit="degrees", low=-90,
              high=90, hint=_SWAPPED),
        Entry("Longitude", "Decimal degrees (WGS 84), east positive.", example=8.8, unit="degrees", low=-180,
              high=180, hint=_SWAPPED),
    ),
    key=("Customer",), required=True,
)

LANES_SHEET = ListSheet(
    LANES, "One row a lane from a site to a customer; these rows win over the matrices and over coordinates.",
    (
        Entry("Site", "Code of the site.", Holds.CODE, "HAM", required=True, refers=SITES),
        Entry("Customer", "Code of the customer.", Holds.CODE, "C001", required=True, refers=CUSTOMERS),
        Entry("Unit cost", "Cost of the lane by the Lane cost basis: for a unit, or for all of the demand.",
              example=6.4, unit="currency, by Lane cost basis", default_words="from the distance"),
        Entry("Distance", "Length of the lane.", example=118, unit=_DISTANCE,
              default_words="from Distances or coordinates"),
        Entry("Allowed", "no: the lane must not be used.", Holds.YES_NO, "yes", default=True),
        Entry("Most", "Most units over the lane in the period covered.", example=900, unit=_UNITS,
              default=math.inf),
    ),
    key=("Site", "Customer"), one_of=("Unit cost", "Distance"),
)

LANE_COSTS_SHEET = MatrixSheet(
    LANE_COSTS,
    "Lane costs by the Lane cost basis: a row a site, a column a customer; an empty cell = no lane.",
    SITES, CUSTOMERS, "Site", "Customer",
    Entry("Lane cost", "Cost of the lane.", example=6.4, unit="currency, by Lane cost basis",
          default_words="no lane"),
)

DISTANCES_SHEET = MatrixSheet(
    DISTANCES, "Distances: a row a site, a column a customer.",
    SITES, CUSTOMERS, "Site", "Customer",
    Entry("Distance", "Length of the lane.", example=118, unit=_DISTANCE,
          default_words="not known"),
)

VARIANTS_SHEET = ListSheet(
    VARIANTS, "Cases solved beside the workbook's own; a variant changes only what its row names.",
    (
        Entry("Variant", "Name of the variant.", Holds.CODE, "Demand down a tenth", required=True),
        Entry("Demand factor", "All demand times this.", example=0.9, default=1.0, high=1e6),
        Entry("Lane cost factor", "All lane costs times this.", example=1.15, default=1.0, high=1e6),
        Entry("Fixed cost factor", "All fixed costs times this.", example=1, default=1.0, high=1e6),
        Entry("Fewest sites", "Least number of open sites.", Holds.WHOLE, 2, default_words="as in Settings"),
        Entry("Most sites", "Largest number of open sites.", Holds.WHOLE, 4,
              default_words="as in Settings"),
        Entry(LONGEST, "Service promise for every customer without one of its own.", example=200,
              unit=_DISTANCE,
              default_words="as in Settings"),
        Entry("Open", "Sites that have to be open in this variant.", Holds.CODES, "HAM, MUC", refers=SITES),
        Entry("Closed", "Sites that stay closed in this variant.", Holds.CODES, "BER", refers=SITES),
    ),
    key=("Variant",),
)

CONTRACT = JobContract(
    Job.SITE_SELECTION, (*settings.FIRST, *SETTINGS),
    (SITES_SHEET, CUSTOMERS_SHEET, LANES_SHEET, LANE_COSTS_SHEET, DISTANCES_SHEET, VARIANTS_SHEET),
    most_pairs=40_000_000,
)
"""The whole contract of the job."""

