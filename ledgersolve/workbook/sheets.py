"""A result sheet as a value: cells, formulas with their cached values, charts, print setup.

``report`` makes these, ``workbook`` writes them; neither knows how the other works. Positions count from
0 here (row 0, column 0 is A1), as in the library that writes them.
"""

from dataclasses import dataclass, field
from typing import Literal

Scalar = str | float | int | bool | None


@dataclass(frozen=True)
class Style:
    """How a cell looks; equal styles share one format. Colours are ``RRGGBB``."""

    number_format: str = ""
    bold: bool = False
    italic: bool = False
    size: float = 10.0
    colour: str = "1F2933"
    fill: str = ""
    align: Literal["", "left", "center", "right"] = ""
    valign: Literal["top", "vcenter", "bottom"] = "vcenter"
    wrap: bool = False
    top: int = 0
    bottom: int = 0
    border_colour: str = "9AA5B1"
    indent: int = 0
    left: int = 0
    underline: bool = False


PLAIN = Style()


@dataclass(frozen=True, slots=True)
class Written:
    """One written cell: a value, or a formula (starting with ``=``) with its cached ``value``.

    Text is always written as text, also when it starts with ``=``; only ``formula`` makes a formula.
    ``link`` is an address inside the workbook (``'Sites'!D8``) that a click leads to.
    """

    value: Scalar
    style: Style = PLAIN
    formula: str = ""
    link: str = ""


@dataclass(frozen=True)
class Area:
    """A block of cells on a named sheet, inclusive, positions from 0."""

    sheet: str
    first_row: int
    first_column: int
    last_row: int
    last_column: int


@dataclass(frozen=True)
class Series:
    """One series of a chart with explicit colour; ``pattern`` keeps it apart in black and white."""

    name: str
    categories: Area
    values: Area
    colour: str
    pattern: str = ""
    marker: str = ""
    marker_size: int = 7
    secondary: bool = False
    line_width: float = 2.0
    dash: str = ""
    labels: bool = False
    kind: str = ""  # "line" over a column chart; "" = the chart's own kind
    point_labels: tuple[str, ...] = ()  # own words at the points, in place of their values
    in_legend: bool = True


@dataclass(frozen=True)
class Chart:
    """A native chart; ``kind`` is column, bar, stacked column, stacked bar, line, scatter or step."""

    kind: str
    title: str
    series: tuple[Series, ...]
    row: int
    column: int
    width: int = 640
    height: int = 300
    x_title: str = ""
    y_title: str = ""
    number_format: str = ""
    x_number_format: str = ""  # across in a scatter chart, where it differs
    x_limits: tuple[float, float] | None = None
    y_limits: tuple[float, float] | None = None
    legend: str = "bottom"
    from_zero: bool = False  # the value axis starts at 0
    step: float | None = None  # distance of the marks on the value axis
    x_step: float | None = None  # the same across, in a scatter chart
    plot: tuple[float, float, float, float] | None = None  # left, top, width, height as parts of the chart
    description: str = ""


@dataclass(frozen=True)
class RowGroup:
    """Rows that can be folded: first to last (from 0), inclusive, at an outline level from 1."""

    first: int
    last: int
    level: int = 1
    folded: bool = False


@dataclass(frozen=True)
class LiveFormat:
    """A conditional format: cells in the area get ``style`` where ``formula`` (starting with =) is true."""

    first_row: int
    first_column: int
    last_row: int
    last_column: int
    formula: str
    style: Style


@dataclass
class ResultSheet:
    """One sheet to be written. ``cells`` maps (row, column) to what stands there."""

    name: str
    cells: dict[tuple[int, int], Written] = field(default_factory=dict)
    widths: dict[int, float] = field(default_factory=dict)
    heights: dict[int, float] = field(default_factory=dict)
    charts: list[Chart] = field(default_factory=list)
    groups: list[RowGroup] = field(default_factory=list)
    live_formats: list[LiveFormat] = field(default_factory=list)
    merges: list[tuple[int, int, int, int]] = field(default_factory=list)
    frozen: tuple[int, int] = (0, 0)
    filter: tuple[int, int, int, int] | None = None
    landscape: bool = False
    pages_wide: int = 1
    pages_tall: int = 0
    repeat_rows: tuple[int, int] | None = None
    repeat_columns: tuple[int, int] | None = None
    print_area: tuple[int, int, int, int] | None = None
    footer: str = "&L&F&C&A&RPage &P of &N"
    tab_colour: str = ""
    gridlines: bool = False

    def put(self, row: int, column: int, value: Scalar, style: Style = PLAIN, *, formula: str = "",
            link: str = "") -> None:
        """Set one cell."""
        self.cells[row, column] = Written(value, style, formula, link)
