"""Figures and printable pages."""
