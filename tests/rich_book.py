"""A workbook with about everything an analyst's workbook can hold, made by a writer and completed by hand.

By the writer: charts, a chart sheet, sparklines, notes, pictures, shapes, extended conditional formats,
validations, tables, filters, print titles, local names. By hand: pivot table, slicer, timeline, threaded
comments, form control, custom XML, external link, connection, query table, printer settings, sensitivity
label, calculation order, rich values, macros.
"""

import struct
import zlib
from io import BytesIO
from pathlib import Path

import xlsxwriter

from tests.packages import LINKS, MAIN, TYPES, WORKBOOK_TYPE, contents, links_xml, zipped

MICROSOFT = "http://schemas.microsoft.com/office"
ANA, REMARK, STORE = (f"{{0A1B2C3D-0000-4000-8000-00000000000{last}}}" for last in "ABC")
MACRO_TYPE = "application/vnd.ms-excel.sheet.macroEnabled.main+xml"

# part -> (content type, content); the parts a writer cannot make
BY_HAND: dict[str, tuple[str, str | bytes]] = {
    "xl/pivotTables/pivotTable1.xml": (f"{TYPES}.pivotTable+xml", (
        f'<pivotTableDefinition xmlns="{MAIN}" name="Pivot" cacheId="7" dataCaption="Values">'
        '<location ref="H20:I24" firstHeaderRow="1" firstDataRow="1" firstDataCol="1"/>'
        '<pivotFields count="2"><pivotField axis="axisRow" showAll="0"><items count="1"><item t="default"/></items>'
        '</pivotField><pivotField dataField="1" showAll="0"/></pivotFields><rowFields count="1"><field x="0"/>'
        '</rowFields><dataFields count="1"><dataField name="Sum" fld="1"/></dataFields></pivotTableDefinition>')),
    "xl/pivotCache/pivotCacheDefinition1.xml": (f"{TYPES}.pivotCacheDefinition+xml", (
        f'<pivotCacheDefinition xmlns="{MAIN}" xmlns:r="{LINKS}" r:id="rId1" recordCount="0"><cacheSource '
        'type="worksheet"><worksheetSource ref="A1:B5" sheet="Sites"/></cacheSource><cacheFields count="2">'
        '<cacheField name="Site" numFmtId="0"><sharedItems/></cacheField><cacheField name="Fixed cost" '
        'numFmtId="0"><sharedItems/></cacheField></cacheFields></pivotCacheDefinition>')),
    "xl/pivotCache/pivotCacheRecords1.xml": (
        f"{TYPES}.pivotCacheRecords+xml", f'<pivotCacheRecords xmlns="{MAIN}" count="0"/>'),
    "xl/slicers/slicer1.xml": ("application/vnd.ms-excel.slicer+xml", (
        f'<slicers xmlns="{MICROSOFT}/spreadsheetml/2009/9/main"><slicer name="Site" cache="Slicer_Site" '
        'caption="Site" rowHeight="241300"/></slicers>')),
    "xl/slicerCaches/slicerCache1.xml": ("application/vnd.ms-excel.slicerCache+xml", (
        f'<slicerCacheDefinition xmlns="{MICROSOFT}/spreadsheetml/2009/9/main" name="Slicer_Site" '
        'sourceName="Site"/>')),
    "xl/timelines/timeline1.xml": ("application/vnd.ms-excel.timeline+xml", (
        f'<timelines xmlns="{MICROSOFT}/spreadsheetml/2010/11/main"><timeline name="When" cache="When" '
        'level="2" selectionLevel="2"/></timelines>')),
    "xl/threadedComments/threadedComment1.xml": ("application/vnd.ms-excel.threadedcomments+xml", (
        f'<ThreadedComments xmlns="{MICROSOFT}/spreadsheetml/2018/threadedcomments"><threadedComment '
        f'ref="B2" dT="2026-12-01T10:00:00.00" personId="{ANA}" id="{REMARK}"><text>Ask the landlord</text>'
        "</threadedComment></ThreadedComments>")),
    "xl/persons/person.xml": ("application/vnd.ms-excel.person+xml", (
        f'<personList xmlns="{MICROSOFT}/spreadsheetml/2018/threadedcomments"><person displayName="Ana" '
        f'id="{ANA}" userId="ana" providerId="None"/></personList>')),
    "xl/ctrlProps/ctrlProp1.xml": ("application/vnd.ms-excel.controlproperties+xml", (
        f'<formControlPr xmlns="{MICROSOFT}/spreadsheetml/2009/9/main" objectType="CheckBox"/>')),
    "xl/externalLinks/externalLink1.xml": (f"{TYPES}.externalLink+xml", (
        f'<externalLink xmlns="{MAIN}" xmlns:r="{LINKS}"><externalBook r:id="rId1"><sheetNames><sheetName '
        'val="Rates"/></sheetNames></externalBook></externalLink>')),
    "xl/connections.xml": (f"{TYPES}.connections+xml", (
        f'<connections xmlns="{MAIN}"><connection id="1" name="Rates" type="5" refreshedVersion="6"/>'
        "</connections>")),
    "xl/queryTables/queryTable1.xml": (f"{TYPES}.queryTable+xml", (
        f'<queryTable xmlns="{MAIN}" name="Rates" connectionId="1"/>')),
    "xl/calcChain.xml": (f"{TYPES}.calcChain+xml", f'<calcChain xmlns="{MAIN}"><c r="B6" i="1"/></calcChain>'),
    "xl/metadata.xml": (f"{TYPES}.sheetMetadata+xml", f'<metadata xmlns="{MAIN}"/>'),
    "xl/richData/rdrichvalue.xml": ("application/vnd.ms-excel.rdrichvalue+xml", (
        f'<rvData xmlns="{MICROSOFT}/spreadsheetml/2017/richdata" count="0"/>')),
    "customXml/itemProps1.xml": (
        "application/vnd.openxmlformats-officedocument.customXmlProperties+xml",
        '<ds:datastoreItem xmlns:ds="http://schemas.openxmlformats.org/officeDocument/2006/customXml" '
        f'ds:itemID="{STORE}"/>'),
    "docMetadata/LabelInfo.xml": ("application/vnd.ms-office.classificationlabels+xml", (
        f'<clbl:labelList xmlns:clbl="{MICROSOFT}/2020/mipLabelMetadata"/>')),
    "xl/printerSettings/printerSettings1.bin": ("", bytes(range(256)) * 4),
    "customXml/item1.xml": ("", "<plan xmlns=\"urn:x\"><note>a &amp; b</note></plan>"),
    "xl/vbaProject.bin": (
        "application/vnd.ms-office.vbaProject", b"\xd0\xcf\x11\xe0" + bytes(range(255, -1, -1)) * 20),
}
FROM_WORKBOOK = [
    ("hand1", "pivotCacheDefinition", "pivotCache/pivotCacheDefinition1.xml"),
    ("hand2", f"{MICROSOFT}/2007/relationships/slicerCache", "slicerCaches/slicerCache1.xml"),
    ("hand3", f"{MICROSOFT}/2017/10/relationships/person", "persons/person.xml"),
    ("hand4", "externalLink", "externalLinks/externalLink1.xml"),
    ("hand5", "connections", "connections.xml"),
    ("hand6", "calcChain", "calcChain.xml"),
    ("hand7", "sheetMetadata", "metadata.xml"),
    ("hand8", f"{MICROSOFT}/2017/06/relationships/rdRichValue", "richData/rdrichvalue.xml"),
    ("hand9", "customXml", "../customXml/item1.xml"),
    ("hand10", f"{MICROSOFT}/2006/relationships/vbaProject", "vbaProject.bin"),
]
FROM_FIRST_SHEET = [
    ("hand1", "pivotTable", "../pivotTables/pivotTable1.xml"),
    ("hand2", f"{MICROSOFT}/2007/relationships/slicer", "../slicers/slicer1.xml"),
    ("hand3", f"{MICROSOFT}/2011/relationships/timeline", "../timelines/timeline1.xml"),
    ("hand4", f"{MICROSOFT}/2017/10/relationships/threadedComment", "../threadedComments/threadedComment1.xml"),
    ("hand5", "ctrlProp", "../ctrlProps/ctrlProp1.xml"),
    ("hand6", "queryTable", "../queryTables/queryTable1.xml"),
    ("hand7", "printerSettings", "../printerSettings/printerSettings1.bin"),
]


def rich_book(path: Path, *, macros: bool = True) -> Path:
    """Write the workbook; without macros it is an .xlsx."""
    written = BytesIO()
    _by_writer(written)
    plain = path.with_suffix(".plain")
    plain.write_bytes(written.getvalue())
    parts: dict[str, str | bytes] = dict(contents(plain))
    plain.unlink()
    for part, (_, content) in BY_HAND.items():
        parts[part] = content
    parts["xl/pivotTables/_rels/pivotTable1.xml.rels"] = links_xml(
        [("rId1", "pivotCacheDefinition", "../pivotCache/pivotCacheDefinition1.xml")])
    parts["xl/pivotCache/_rels/pivotCacheDefinition1.xml.rels"] = links_xml(
        [("rId1", "pivotCacheRecords", "pivotCacheRecords1.xml")])
    parts["xl/externalLinks/_rels/externalLink1.xml.rels"] = links_xml(
        [("rId1", "externalLinkPath", "file:///C:/rates.xlsx")]).replace('xlsx"', 'xlsx" TargetMode="External"')
    parts["customXml/_rels/item1.xml.rels"] = links_xml([("rId1", "customXmlProps", "itemProps1.xml")])
    _link(parts, "xl/_rels/workbook.xml.rels", FROM_WORKBOOK)
    _link(parts, "xl/worksheets/_rels/sheet1.xml.rels", FROM_FIRST_SHEET)
    _link(parts, "_rels/.rels", [("hand1", f"{MICROSOFT}/2020/02/relationships/classificationlabels",
                                  "docMetadata/LabelInfo.xml")])
    _declare(parts, macros=macros)
    workbook = text(parts["xl/workbook.xml"])
    caches = '<pivotCaches><pivotCache cacheId="7" r:id="hand1"/></pivotCaches>'
    books = '<externalReferences><externalReference r:id="hand4"/></externalReferences>'
    parts["xl/workbook.xml"] = workbook.replace("</workbook>", caches + "</workbook>").replace(
        "</sheets>", "</sheets>" + books)
    if not macros:
        del parts["xl/vbaProject.bin"]
    return zipped(path, parts)


def text(content: str | bytes) -> str:
    """Text of a part."""
    return content if isinstance(content, str) else content.decode()


def _link(parts: dict[str, str | bytes], name: str, links: list[tuple[str, str, str]]) -> None:
    added = links_xml(links)
    inside = added[added.index("<Relationship "):]
    parts[name] = text(parts[name]).replace("</Relationships>", inside)


def _declare(parts: dict[str, str | bytes], *, macros: bool) -> None:
    listed = "".join(f'<Override PartName="/{part}" ContentType="{kind}"/>'
                     for part, (kind, _) in BY_HAND.items() if kind and (macros or "vba" not in part))
    types = text(parts["[Content_Types].xml"]).replace("</Types>", listed + "</Types>").replace(
        "<Override", f'<Default Extension="bin" ContentType="{TYPES}.printerSettings"/><Override', 1)
    if macros:
        types = types.replace(WORKBOOK_TYPE, MACRO_TYPE)
    else:
        links = text(parts["xl/_rels/workbook.xml.rels"])
        start = links.index('<Relationship Id="hand10"')
        parts["xl/_rels/workbook.xml.rels"] = links[:start] + links[links.index("/>", start) + 2:]
    parts["[Content_Types].xml"] = types


def _by_writer(target: BytesIO) -> None:
    book = xlsxwriter.Workbook(target, {"in_memory": True})
    money = book.add_format({"num_format": '#,##0.00 "EUR"', "bold": True, "bg_color": "#DDEEFF", "border": 1})
    green = book.add_format({"bg_color": "#CCFFCC"})
    sites = book.add_worksheet("Sites")
    sites.write_row(0, 0, ["Site", "Fixed cost", "When"])
    for row, (site, cost) in enumerate([("HAM", 1200), ("MUC", 900.5), ("BER", 700), ("CGN", 1)], 1):
        sites.write(row, 0, site)
        sites.write(row, 1, cost, money)
    sites.write_formula("B6", "=SUM(B2:B5)", money, 2801.5)
    sites.write_rich_string("C2", "since ", book.add_format({"italic": True}), "spring")
    sites.write_comment("B2", "A note", {"x_scale": 2})
    sites.insert_textbox("E2", "A shape")
    sites.insert_image("G2", "dot.png", {"image_data": BytesIO(_png())})
    sites.set_header("&L&[Picture]", {"image_left": "dot.png", "image_data_left": BytesIO(_png())})
    sites.add_sparkline("D2", {"range": "Sites!B2:B5"})
    sites.conditional_format("B2:B5", {"type": "data_bar", "data_bar_2010": True})
    sites.conditional_format("B2:B5", {"type": "cell", "criteria": ">", "value": 1000, "format": green})
    sites.conditional_format("C2:C5", {"type": "icon_set", "icon_style": "3_traffic_lights"})
    sites.data_validation("A2:A9", {"validate": "length", "criteria": "<", "value": 20})
    sites.write_url("A8", "https://example.com/", string="a link")
    sites.autofilter("A1:B5")
    sites.repeat_rows(0)
    sites.freeze_panes(1, 0)
    chart = book.add_chart({"type": "column"})
    chart.add_series({"values": "=Sites!$B$2:$B$5", "trendline": {"type": "linear"}})
    sites.insert_chart("J2", chart)
    picture = book.add_chart({"type": "line"})
    picture.add_series({"values": "=Sites!$B$2:$B$5"})
    book.add_chartsheet("Picture").set_chart(picture)
    lanes = book.add_worksheet("Lanes")
    lanes.add_table("A1:B4", {"name": "LaneTable", "data": [["HAM", 1], ["MUC", 2], ["BER", 3]]})
    lanes.print_area("A1:B4")
    hidden = book.add_worksheet("Rates & more")
    hidden.write_formula("A1", "='Sites'!B2", None, 1200)
    hidden.hide()
    book.define_name("Rate", "='Rates & more'!$A$1")
    book.define_name("Lanes!Local", "=Lanes!$B$2")
    book.close()


def _png() -> bytes:
    """A picture of one dot."""
    def chunk(kind: bytes, content: bytes) -> bytes:
        return struct.pack(">L", len(content)) + kind + content + struct.pack(">L", zlib.crc32(kind + content))

    head = struct.pack(">LLBBBBB", 1, 1, 8, 2, 0, 0, 0)
    return (b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", head) + chunk(b"IDAT", zlib.compress(b"\0\xff\0\0"))
            + chunk(b"IEND", b""))
