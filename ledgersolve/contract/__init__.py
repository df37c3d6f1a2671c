"""What a workbook holds."""
