"""Workbooks in and out; knows no job."""
