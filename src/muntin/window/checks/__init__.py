"""Checks of the model against the readings, each ending in a plain sentence."""

from muntin.window.checks.check import Check
from muntin.window.checks.every import study_checks

__all__ = ["Check", "study_checks"]
