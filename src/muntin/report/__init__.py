"""Figures and pages to look at and hand over."""
