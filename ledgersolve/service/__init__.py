"""The folder service: a workbook dropped in, one file returned, whatever dies in between."""
