"""Figures as SVG text: each takes plain numbers and returns the same bytes for the same numbers."""
