"""Rehearsal: whole plate series played forward on drawn truths."""
