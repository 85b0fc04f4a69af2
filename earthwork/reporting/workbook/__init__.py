"""The workbook: the quantities and plans of a site with live formulas."""
