"""Spreadsheets: the template, the reader, the results workbook. Knows no equation."""
