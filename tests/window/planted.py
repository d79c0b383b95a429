"""Invented studies of three plates, sound ones and ones with a single fault planted in them."""

from __future__ import annotations

from pathlib import Path
from typing import Any, Literal

import numpy as np
import pandas as pd
from scipy.special import expit

from muntin.record import Study
from tests.studies import PH, RECOVERY, SALT, logit_of, spread, written

Plant = Literal["outlier", "plate", "stocks", "confounded", "prior"]

FACTORS = [{**PH, "step": 0.25}, {**SALT, "step": 25}]
NOISE, PLATE_SD = 0.025, 0.02
# Logits, up or down; what a stock made a little wrong does to a condition.
STOCK_OFF = 0.4
WELLS, REPEATS, BRIDGES = 14, 4, 8
# The well of the second plate that reads far off.
WILD = 6
# Readings scatter by 0.025; this study holds 0.1 likely, and 0.05 hardly.
WRONG_PRIOR = {**RECOVERY, "priors": {"noise_sd": {"median": 0.1, "log_sd": 0.3}}}


def study(folder: Path, seed: int, plant: Plant | None = None, plates: int = 3) -> Study:
    """A study drawn from the seed, with one fault or none; what is drawn is the same in both."""
    rng = np.random.default_rng(seed)
    first = conditions(seed, 0)
    tables = []
    for number in range(plates):
        plate = conditions(seed, number)
        if plant == "confounded":
            plate["ph"] = (5.0, 6.0, 7.0)[number]
        elif number:
            plate = pd.concat([plate, first.iloc[:BRIDGES]], ignore_index=True)
        error = PLATE_SD * rng.standard_normal() - (0.3 if plant == "plate" and number == 1 else 0)
        latent = logit_of(plate)
        draws = STOCK_OFF * np.sign(rng.standard_normal(len(plate)))
        if plant == "stocks":
            stocks = plate.groupby(["ph", "salt"], sort=False).ngroup()
            latent = latent + draws[stocks]
        y = (1.0 + error) * expit(latent) + NOISE * rng.standard_normal(len(plate))
        if plant == "outlier" and number == 1:
            y[WILD] += -0.3 if y[WILD] > 0.5 else 0.3
        tables.append(plate.assign(recovery=np.round(y, 4)))
    given: dict[str, Any] = {"responses": [WRONG_PRIOR if plant == "prior" else RECOVERY]}
    return written(folder, tables, factors=FACTORS, **given)


def conditions(seed: int, number: int) -> pd.DataFrame:
    """The conditions of one plate: some that fill the range, and the first few of them again."""
    filling = spread(FACTORS, WELLS, 10 * seed + number)
    return pd.concat([filling, filling.iloc[:REPEATS]], ignore_index=True)
