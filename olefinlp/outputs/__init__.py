"""Workbook, charts, csv, json, printed summary."""
