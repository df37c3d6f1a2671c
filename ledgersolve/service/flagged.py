"""The workbook that goes back where the program itself could not make one."""

from io import BytesIO

import xlsxwriter

_DARK, _ACCENT, _GREY = "#1F2933", "#8A3B12", "#52606D"


def flagged_workbook(drop_name: str, headline: str, sentences: list[str], job: str) -> bytes:
    """Make a workbook of one sheet that says in plain words what happened.

    It needs nothing of the dropped file: that file may be what stops the program.
    """
    made = BytesIO()
    options = {"in_memory": True, "strings_to_formulas": False, "strings_to_urls": False}
    with xlsxwriter.Workbook(made, options) as workbook:
        sheet = workbook.add_worksheet("Not solved")
        sheet.hide_gridlines(2)
        sheet.set_column(0, 0, 3)
        sheet.set_column(1, 1, 96)
        title = workbook.add_format({"bold": True, "font_size": 16, "font_color": _ACCENT})
        text = workbook.add_format({"text_wrap": True, "valign": "top", "font_color": _DARK})
        small = workbook.add_format({"text_wrap": True, "font_size": 9, "font_color": _GREY})
        sheet.write_string(1, 1, headline, title)
        sheet.write_string(2, 1, drop_name[:32000], small)
        row = 4
        for sentence in sentences:
            sheet.write_string(row, 1, sentence[:32000], text)
            row += 1
        sheet.write_string(row + 1, 1, f"Job {job}. The original workbook is kept by the service.", small)
        sheet.set_landscape()
        sheet.fit_to_pages(1, 0)
    return made.getvalue()
