"""Acids of the tables that no buffer of muntin is made from, for the standards that need them."""

from pathlib import Path

import pandas as pd

from muntin.bench.buffer.acids import COUPLES, Acid, Step

DATA = Path(__file__).parent / "data"


def constants() -> pd.DataFrame:
    """The constants by acid, one row a proton."""
    return pd.read_csv(DATA / "buffer_pk.csv").set_index("acid")


def acid_of(*names: str) -> Acid:
    """The acid of one or more rows of the table, the first proton first."""
    rows = constants().loc[[*names]]
    values = rows[["pk25", "enthalpy_kj_mol", "heat_capacity_j_k_mol"]].to_numpy()
    return Acid(int(rows["charge"].iloc[0]), tuple(Step(*row) for row in values.tolist()))


PHOSPHORIC = COUPLES["phosphate"].acid
TRIS = COUPLES["Tris"].acid
ACETIC = COUPLES["acetate"].acid
PHTHALIC = acid_of("phthalic1", "phthalic2")
BORIC = acid_of("boric")
