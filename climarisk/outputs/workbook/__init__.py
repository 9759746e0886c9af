"""The workbook of a study: sheets made for people, in one file."""
