"""Files in and out: CSV, XLSX and TOML read into plain text with rows and columns; results written
whole or not at all. The only part that knows openpyxl. What a cell means is decided further on."""

from leachkin.files.csv_sheet import read_csv, read_csv_grid
from leachkin.files.grid import Grid, fold_cell, grid_of
from leachkin.files.numerals import ERROR_CODES, parse_numeral
from leachkin.files.paths import check_path_text, file_bytes
from leachkin.files.sheet import Sheet, SheetRow, build_sheet, column_letters
from leachkin.files.template_writer import TemplateSheet, write_template
from leachkin.files.toml_document import TomlDocument, read_toml
from leachkin.files.workbook import (
    WORKBOOK_ENDINGS,
    read_grid,
    read_sheet,
    read_workbook,
    read_xlsx_sheet,
    sheet_names,
)
from leachkin.files.workbook_writer import write_xlsx
from leachkin.files.write import whole_directory, write_csv, write_json, write_text

__all__ = [
    "ERROR_CODES",
    "WORKBOOK_ENDINGS",
    "Grid",
    "Sheet",
    "SheetRow",
    "TemplateSheet",
    "TomlDocument",
    "build_sheet",
    "check_path_text",
    "column_letters",
    "file_bytes",
    "fold_cell",
    "grid_of",
    "parse_numeral",
    "read_csv",
    "read_csv_grid",
    "read_grid",
    "read_sheet",
    "read_toml",
    "read_workbook",
    "read_xlsx_sheet",
    "sheet_names",
    "whole_directory",
    "write_csv",
    "write_json",
    "write_template",
    "write_text",
    "write_xlsx",
]
