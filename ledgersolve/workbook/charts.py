"""Native charts of result sheets: explicit colours and patterns, readable in black and white."""

from io import StringIO
from typing import Any

import xlsxwriter
from xlsxwriter.chart_bar import ChartBar
from xlsxwriter.chart_column import ChartColumn
from xlsxwriter.chart_line import ChartLine
from xlsxwriter.chart_scatter import ChartScatter
from xlsxwriter.worksheet import Worksheet

from ledgersolve.workbook.chart_part import spelled_out
from ledgersolve.workbook.cleaning import clean_text
from ledgersolve.workbook.sheets import Area, Chart, Series

_KINDS: dict[str, dict[str, str]] = {
    "column": {"type": "column"},
    "stacked column": {"type": "column", "subtype": "stacked"},
    "bar": {"type": "bar"},
    "stacked bar": {"type": "bar", "subtype": "stacked"},
    "line": {"type": "line"},
    "scatter": {"type": "scatter"},
    "step": {"type": "column"},
}
_INK, _GREY, _FAINT = "#1F2933", "#52606D", "#D5DBE1"
_FONT = {"name": "Arial", "size": 9, "color": _INK}


class _SpelledOut:
    """A chart of the library whose part says every switch in so many words."""

    fh: Any
    internal_fh: bool

    def _assemble_xml_file(self) -> None:
        target, ours = self.fh, self.internal_fh
        self.fh, self.internal_fh = StringIO(), False  # the library closes a file of its own once it is done
        super()._assemble_xml_file()  # type: ignore[misc]  # of the library's class beside this one
        target.write(spelled_out(self.fh.getvalue()))
        if ours:
            target.close()


class _Column(_SpelledOut, ChartColumn):  # type: ignore[misc]  # the library carries no types
    pass


class _Bar(_SpelledOut, ChartBar):  # type: ignore[misc]
    pass


class _Line(_SpelledOut, ChartLine):  # type: ignore[misc]
    pass


class _Scatter(_SpelledOut, ChartScatter):  # type: ignore[misc]
    pass


_CLASSES = {"column": _Column, "bar": _Bar, "line": _Line, "scatter": _Scatter}


def insert_chart(book: xlsxwriter.Workbook, worksheet: Worksheet, chart: Chart) -> None:
    """Draw the chart on the worksheet at its place and size (pixels)."""
    drawn = book.add_chart(_KINDS[chart.kind])
    drawn.__class__ = _CLASSES[_KINDS[chart.kind]["type"]]  # the library makes charts of its own classes only
    for series in chart.series:
        if series.kind != "line":
            drawn.add_series(_series(series, chart.kind))
    over = [series for series in chart.series if series.kind == "line"]
    if over:
        lines = book.add_chart({"type": "line"})
        for series in over:
            lines.add_series(_line(series))
        drawn.combine(lines)
    _dress(drawn, chart)
    worksheet.insert_chart(
        chart.row, chart.column, drawn,
        {"object_position": 2, "description": chart.description or chart.title, "x_offset": 2, "y_offset": 2},
    )


def _place(area: Area) -> list[object]:
    return [area.sheet, area.first_row, area.first_column, area.last_row, area.last_column]


def _base(series: Series) -> dict[str, Any]:
    given: dict[str, Any] = {
        "name": clean_text(series.name), "categories": _place(series.categories), "values": _place(series.values),
    }
    if series.secondary:
        given["y2_axis"] = True
    if series.point_labels:
        words = [{"value": clean_text(label)} for label in series.point_labels]
        given["data_labels"] = {"value": True, "custom": words, "position": "right", "font": _FONT | {"bold": True}}
    elif series.labels:
        given["data_labels"] = {"value": True, "font": _FONT}
    return given


def _series(series: Series, kind: str) -> dict[str, Any]:
    if kind == "line":
        return _line(series)
    if kind == "scatter":
        return _points(series)
    given = _base(series) | {"border": {"color": _INK, "width": 0.75}}
    if series.pattern:
        given["pattern"] = {
            "pattern": series.pattern, "fg_color": f"#{series.colour}", "bg_color": "#FFFFFF",
        }
    else:
        given["fill"] = {"color": f"#{series.colour}"}
    given["gap"] = 0 if kind == "step" else 60
    if "stacked" in kind:
        given["overlap"] = 100
    return given


def _line(series: Series) -> dict[str, Any]:
    line: dict[str, Any] = {"color": f"#{series.colour}", "width": series.line_width}
    if series.dash:
        line["dash_type"] = series.dash
    return _base(series) | {"line": line, "marker": _marker(series)}


def _points(series: Series) -> dict[str, Any]:
    given = _base(series)
    if series.dash:  # a chain of segments; an empty row lifts the pen
        given["line"] = {"color": f"#{series.colour}", "width": series.line_width, "dash_type": series.dash}
    else:
        given["line"] = {"none": True}
    given["marker"] = _marker(series)
    return given


def _marker(series: Series) -> dict[str, Any]:
    if not series.marker:
        return {"type": "none"}
    open_mark = series.pattern == "open"
    return {
        "type": series.marker, "size": series.marker_size,
        "border": {"color": f"#{series.colour}", "width": 1.25},
        "fill": {"none": True} if open_mark else {"color": f"#{series.colour}"},
    }


def _dress(drawn: Any, chart: Chart) -> None:
    drawn.set_title({
        "name": clean_text(chart.title), "overlay": False, "layout": None,
        "name_font": {"name": "Arial", "size": 11, "bold": True, "color": _INK},
    })
    scatter, bar = chart.kind == "scatter", "bar" in chart.kind
    figures = chart.x_number_format or chart.number_format
    across = _axis(chart.x_title, chart.x_limits, figures if scatter else "", not scatter)
    up = _axis(chart.y_title, chart.y_limits, chart.number_format, not scatter)
    if chart.from_zero:
        up["min"] = 0
    if chart.step is not None:
        up["major_unit"] = chart.step
    if chart.x_step is not None:
        across["major_unit"] = chart.x_step
    if bar:
        across["reverse"] = True  # first category on top
        across, up = up, across  # the library names the axes of bars by where they are drawn
        up["major_gridlines"]["visible"] = False
        across["label_position"] = "high"
    elif not scatter:
        across["major_gridlines"]["visible"] = False
    drawn.set_x_axis(across)
    drawn.set_y_axis(up)
    if chart.plot is not None:
        left, top, width, height = chart.plot
        layout = {"x": left, "y": top, "width": width, "height": height}
        drawn.set_plotarea({"fill": {"color": "#FFFFFF"}, "layout": layout})
    else:
        drawn.set_plotarea({"fill": {"color": "#FFFFFF"}})
    if chart.legend:
        left_out = [place for place, series in enumerate(chart.series) if not series.in_legend]
        drawn.set_legend({"position": chart.legend, "font": _FONT, "delete_series": left_out})
    else:
        drawn.set_legend({"none": True})
    drawn.set_chartarea({"border": {"none": True}, "fill": {"color": "#FFFFFF"}})
    drawn.show_blanks_as("gap")
    drawn.set_size({"width": chart.width, "height": chart.height})


def _axis(title: str, limits: tuple[float, float] | None, number_format: str, grid: bool) -> dict[str, Any]:
    given: dict[str, Any] = {
        "num_font": _FONT, "name_font": _FONT | {"bold": False, "color": _GREY},
        "line": {"color": _GREY, "width": 0.75},
        "major_gridlines": {"visible": grid, "line": {"color": _FAINT, "width": 0.5}},
    }
    if title:
        given["name"] = title
    if limits is not None:
        given["min"], given["max"] = limits
        given["crossing"] = "min"  # the other axis stands at the lower end, not at 0
    if number_format:
        given["num_format"] = number_format
    return given
