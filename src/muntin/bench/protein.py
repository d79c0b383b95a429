"""Protein: what was used, what a plan needs, what is left."""

from __future__ import annotations

from collections.abc import Iterable

from muntin.record.study import Study

LOADED = ("test", "bridge", "reference", "load", "no_resin")


def wells_with_protein(roles: Iterable[str]) -> int:
    """How many wells of these roles are given protein; loads and wells without resin are too."""
    return sum(role in LOADED for role in roles)


def protein_left_mg(study: Study) -> float | None:
    """Protein that may still be used, in mg: at hand, less reserve and all wells that were run,
    void and excluded ones too; None where the study does not say.
    """
    protein = study.definition.protein
    if protein is None:
        return None
    used = wells_with_protein(study.wells["role"]) * protein.per_well_mg
    return protein.available_mg - protein.reserved_mg - used


def protein_needed_mg(study: Study, roles: Iterable[str]) -> float | None:
    """Protein that wells of these roles need, in mg; None where the study does not say."""
    protein = study.definition.protein
    return None if protein is None else wells_with_protein(roles) * protein.per_well_mg
