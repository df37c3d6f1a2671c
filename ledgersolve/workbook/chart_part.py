"""A chart part with every switch written out.

Much of a chart's markup may be left out, and what holds then depends on the version of the program named in the
workbook's properties: ECMA-376 part 1 says "true" for most switches, the programs of 2007 took "false", and
readers choose by that version. In an analyst's workbook of 2016 a chart that leaves them out gets smoothed lines,
legend keys beside its labels and marks across every axis. Written out, a chart looks the same in every workbook.
"""

from xml.etree import ElementTree

_CHART = "http://schemas.openxmlformats.org/drawingml/2006/chart"
_SPACES = {
    "c": _CHART,
    "a": "http://schemas.openxmlformats.org/drawingml/2006/main",
    "r": "http://schemas.openxmlformats.org/officeDocument/2006/relationships",
}
_DECLARATION = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'
_AXIS = {"delete": "0", "majorTickMark": "out", "minorTickMark": "none"}
_AXIS_HEAD = ("axId", "scaling", "delete", "axPos", "majorGridlines", "minorGridlines", "title", "numFmt",
              "majorTickMark", "minorTickMark")
_SHOWN = {"showLegendKey": "0", "showVal": "0", "showCatName": "0", "showSerName": "0", "showPercent": "0",
          "showBubbleSize": "0"}
_SERIES_HEAD = ("idx", "order", "tx", "spPr")
_SERIES_TAIL = ("dPt", "dLbls", "trendline", "errBars", "cat", "val", "xVal", "yVal", "smooth")

_SWITCHES: dict[str, tuple[tuple[str, ...], dict[str, str]]] = {
    "chartSpace": (("date1904", "lang", "roundedCorners"), {"roundedCorners": "0"}),
    "chart": (("title", "autoTitleDeleted", "plotArea", "legend", "plotVisOnly", "dispBlanksAs"),
              {"autoTitleDeleted": "0", "plotVisOnly": "1", "dispBlanksAs": "gap"}),
    "title": (("tx", "layout", "overlay"), {"overlay": "0"}),
    "legend": (("legendPos", "legendEntry", "layout", "overlay"), {"overlay": "0"}),
    "barChart": (("barDir", "grouping", "varyColors"), {"varyColors": "0"}),
    "lineChart": (("grouping", "varyColors"), {"varyColors": "0"}),
    "scatterChart": (("scatterStyle", "varyColors"), {"varyColors": "0"}),
    "catAx": ((*_AXIS_HEAD, "tickLblPos", "spPr", "txPr", "crossAx", "crosses", "crossesAt", "auto", "lblAlgn",
               "lblOffset", "tickLblSkip", "tickMarkSkip", "noMultiLvlLbl"), _AXIS | {"noMultiLvlLbl": "0"}),
    "valAx": (_AXIS_HEAD, _AXIS),
    "dLbl": (("idx", "layout", "tx", "numFmt", "spPr", "txPr", "dLblPos", *_SHOWN), _SHOWN),
    "dLbls": (("dLbl", "numFmt", "spPr", "txPr", "dLblPos", *_SHOWN), _SHOWN),
}
"""By element: the order of its children as far as it matters here, and the switches with what they are to say."""

_SERIES = {
    "barChart": ((*_SERIES_HEAD, "invertIfNegative", "pictureOptions", *_SERIES_TAIL), {"invertIfNegative": "0"}),
    "lineChart": ((*_SERIES_HEAD, "marker", *_SERIES_TAIL), {"smooth": "0"}),
    "scatterChart": ((*_SERIES_HEAD, "marker", *_SERIES_TAIL), {"smooth": "0"}),
}
"""The same for the series in each kind of plot."""


def spelled_out(text: str) -> str:
    """Give the text of a chart part with its switches written out; those that are written stay as they are."""
    for prefix, address in _SPACES.items():
        ElementTree.register_namespace(prefix, address)
    root = ElementTree.fromstring(text.encode("utf-8"))  # our own part, written a moment ago: no guard is needed
    for parent in list(root.iter()):
        name = _name(parent)
        if name in _SWITCHES:
            _complete(parent, *_SWITCHES[name])
        if name in _SERIES:
            for series in parent.findall(f"{{{_CHART}}}ser"):
                _complete(series, *_SERIES[name])
    written = ElementTree.tostring(root, encoding="unicode").replace(" />", "/>")  # text holds no bare ">"
    return f"{_DECLARATION}{written}"


def _name(element: ElementTree.Element) -> str:
    space, _, name = element.tag.rpartition("}")
    return name if space == f"{{{_CHART}" else ""


def _complete(parent: ElementTree.Element, order: tuple[str, ...], switches: dict[str, str]) -> None:
    """Add the switches that the element lacks, each behind all that belongs before it."""
    there = {_name(child) for child in parent}
    if "delete" in there and "delete" not in switches:
        return  # a label or entry that is left out altogether takes no switches
    for switch, value in switches.items():
        if switch in there:
            continue
        before = order[:order.index(switch)]
        place = max((k + 1 for k, child in enumerate(parent) if _name(child) in before), default=0)
        parent.insert(place, ElementTree.Element(f"{{{_CHART}}}{switch}", {"val": value}))
