"""Small invented studies for tests: written as files, then opened like any other."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from scipy.special import expit
from scipy.stats.qmc import Sobol

from muntin.bench import well_names
from muntin.record import Study, open_study
from muntin.record.definition import Definition, definition_faults
from muntin.window.assessment import Assessment

Keys = Mapping[str, Any]

PH: Keys = {"name": "ph", "label": "pH", "low": 4.5, "high": 7.5, "step": 0.5}
SALT: Keys = {"name": "salt", "unit": "mM", "low": 50, "high": 450, "step": 50}
RESIN: Keys = {"name": "resin", "choices": ["Alpha", "Beta", "Gamma"]}
LOAD: Keys = {"name": "load", "low": 5, "high": 40, "step": 5, "scale": "log"}
TIME: Keys = {"name": "minutes", "low": 10, "high": 60, "step": 10}
RECOVERY: Keys = {"name": "recovery", "label": "Recovery", "kind": "fraction", "at_least": 0.8}
HCP: Keys = {"name": "hcp", "unit": "ng/mL", "kind": "positive", "at_most": 100}
SHIFT: Keys = {"name": "shift", "kind": "real", "at_least": -2.0, "at_most": 2.0}


def tables(**given: Any) -> dict[str, Any]:
    """Tables of a definition: ph and salt, recovery at least 0.8, where not given otherwise."""
    own = {"factors": [PH, SALT], "responses": [RECOVERY], "study": {}}
    whole = {**own, **given}
    whole["study"] = {"title": "Small invented study", **whole["study"]}
    return whole


def text(**given: Any) -> str:
    """The same as the text of a study.toml."""
    parts = []
    for name, table in tables(**given).items():
        several = not isinstance(table, Mapping)
        for one in table if several else [table]:
            keys = "".join(f"{key} = {_literal(value)}\n" for key, value in one.items())
            parts.append(f"[[{name}]]\n{keys}" if several else f"[{name}]\n{keys}")
    return "\n".join(parts)


def _literal(value: Any) -> str:
    """A value as TOML writes it; lists, numbers and texts are written as in JSON."""
    if isinstance(value, Mapping):
        return "{" + ", ".join(f"{key} = {_literal(v)}" for key, v in value.items()) + "}"
    return json.dumps(value)


def written(folder: Path, plates: Sequence[pd.DataFrame] = (), **given: Any) -> Study:
    """Write a study with one table a plate, wells in the order of the rows, and open it."""
    (folder / "plates").mkdir(parents=True, exist_ok=True)
    (folder / "study.toml").write_text(text(**given))
    for number, plate in enumerate(plates, start=1):
        rows = plate if "well" in plate else plate.assign(well=well_names(96)[: len(plate)])
        rows.to_csv(folder / "plates" / f"plate-{number:02d}.csv", index=False)
    return open_study(folder)


def changed(view: Assessment, **given: Any) -> Assessment:
    """The same posterior under another definition; only keys of plans and targets may differ."""
    definition = Definition.model_validate(tables(**given))
    assert definition_faults(definition) == []
    return replace(view, study=replace(view.study, definition=definition))


def spread(factors: Sequence[Keys], count: int, seed: int = 0) -> pd.DataFrame:
    """Conditions (count, factors) on bench steps that fill the range (Sobol' points)."""
    points = Sobol(len(factors), rng=np.random.default_rng(seed)).random_base2(10)[:count]
    columns = {}
    for factor, unit in zip(factors, points.T, strict=True):
        if "choices" in factor:
            levels = np.array(factor["choices"], dtype=object)
        else:
            steps = round((factor["high"] - factor["low"]) / factor["step"])
            levels = np.round(factor["low"] + factor["step"] * np.arange(steps + 1), 6)
        columns[factor["name"]] = levels[(unit * len(levels)).astype(int)]
    return pd.DataFrame(columns)


def logit_of(conditions: pd.DataFrame) -> np.ndarray:
    """An invented latent recovery (n,): it rises with pH and salt, where there are such."""
    latent = np.full(len(conditions), 0.5)
    for name, middle, slope in (("ph", 6.0, 1.6), ("salt", 250.0, 0.010), ("load", 15.0, -0.05)):
        if name in conditions:
            latent = latent + slope * (conditions[name].to_numpy(dtype=float) - middle)
    if "resin" in conditions:
        latent = latent + 0.6 * (conditions["resin"] == "Alpha").to_numpy()
    return latent


def read(conditions: pd.DataFrame, seed: int = 1, plate_error: float = 0.0) -> pd.DataFrame:
    """The conditions with an invented reading of recovery each, noise 0.02."""
    noise = 0.02 * np.random.default_rng(seed).standard_normal(len(conditions))
    y = (1.0 + plate_error) * expit(logit_of(conditions)) + noise
    return conditions.assign(recovery=np.round(y, 4))


def read_hcp(conditions: pd.DataFrame, seed: int = 1) -> pd.DataFrame:
    """The conditions with an invented positive reading each, which rises with salt; noise 10 %."""
    noise = 0.1 * np.random.default_rng(seed).standard_normal(len(conditions))
    y = np.exp(3.0 + 0.006 * (conditions["salt"].to_numpy(dtype=float) - 250.0) + noise)
    return conditions.assign(hcp=np.round(y, 3))


def read_shift(conditions: pd.DataFrame, seed: int = 1) -> pd.DataFrame:
    """The conditions with an invented real reading each, which falls with pH; noise 0.2."""
    noise = 0.2 * np.random.default_rng(seed).standard_normal(len(conditions))
    y = 1.5 * (6.0 - conditions["ph"].to_numpy(dtype=float)) + noise
    return conditions.assign(shift=np.round(y, 3))
