"""The colours of all pictures: cut is brown, fill is teal, both equally light; none tells anything alone."""

from __future__ import annotations

#: From deep to shallow.
CUT = ("#5B3410", "#96601F", "#CFA268", "#EEDFC6")
NO_CHANGE = "#F5F5F2"
#: From shallow to high.
FILL = ("#CBE5E2", "#6FB3AC", "#237872", "#07433F")
IMPORT = "#7A1FA2"
EXPORT = "#B5501A"
WATER = "#6BB1E8"
DRYING = "#F0C534"
LIMITS = "#1F1F1F"
INK = "#1F1F1F"
FAINT = "#6E6E6A"
PAPER = "#FFFFFF"
