"""Figures, maps and the page for briefings. Knows no equation."""
