"""Small invented studies for the tests of commands, screens, figures and files."""

from __future__ import annotations

import math
from pathlib import Path

WELLS = [f"{row}{column}" for row in "ABCDEFGH" for column in range(1, 13)]

STUDY = """\
[study]
title = "Small invented study"

[[factors]]
name = "ph"
label = "pH"
low = 4.5
high = 7.5
step = 0.5
kept_within = 0.1

[[factors]]
name = "salt"
label = "Salt"
unit = "mM"
low = 50
high = 450
step = 50

[[responses]]
name = "recovery"
label = "Recovery"
kind = "fraction"
at_least = 0.8

[protein]
available_mg = 40
reserved_mg = 10
per_well_mg = 0.25
"""

ONE_FACTOR = """\
[study]
title = "One factor, invented"

[[factors]]
name = "salt"
label = "Salt"
unit = "mM"
low = 0
high = 500
step = 10

[[responses]]
name = "recovery"
label = "Recovery"
kind = "fraction"
at_least = 0.8

[[responses]]
name = "hcp"
label = "HCP"
unit = "ng/mL"
kind = "positive"
at_most = 100
"""

RESIN = """
[[factors]]
name = "resin"
label = "Resin"
choices = ["A", "B"]
"""

LOAD = """
[[factors]]
name = "load"
label = "Load"
unit = "mg/mL"
low = 5
high = 20
step = 5
scale = "log"
"""


def recovery(ph: float, salt: float, shift: float = 0.0) -> float:
    """An invented recovery that rises with pH and salt."""
    f = 1.0 + 2.0 * (ph - 6.0) + 0.012 * (salt - 200.0) + shift
    return round(0.97 / (1.0 + math.exp(-f)), 3)


def plate(count: int = 12, column: str = "", value: str = "") -> str:
    """A plate table of conditions that fill the range, with a further column if named."""
    lines = ["well,role,ph,salt" + (f",{column}" if column else "") + ",recovery,exclude"]
    for i, well in enumerate(WELLS[:count]):
        ph, salt = 4.5 + 0.5 * (i % 7), 50 + 50 * (4 * i % 9)
        more = f",{value.split('|')[i % len(value.split('|'))]}" if column else ""
        lines.append(f"{well},test,{ph},{salt}{more},{recovery(ph, salt)},")
    return "\n".join(lines) + "\n"


def second_plate(share: float = 0.98) -> str:
    """The same conditions on another plate, which reads a little low."""
    heading, *rows = plate().splitlines()
    read = [row.split(",") for row in rows]
    again = [",".join([*row[:4], f"{share * float(row[4]):.3f}", ""]) for row in read]
    return "\n".join([heading, *again]) + "\n"


def one_factor_plate(hcp: bool = True) -> str:
    """A plate table over salt alone, twice each; without `hcp` that response is awaited."""
    lines = ["well,salt,recovery,hcp"]
    for i, well in enumerate(WELLS[:14]):
        salt = 50 + 70 * (i // 2)
        y = 0.97 / (1.0 + math.exp(-(salt - 150) / 50)) + 0.01 * (-1) ** i
        read = f"{15 * math.exp(salt / 180) * (1 + 0.05 * (-1) ** (i // 3)):.1f}" if hcp else ""
        lines.append(f"{well},{salt},{y:.3f},{read}")
    return "\n".join(lines) + "\n"


def write(folder: Path, files: dict[str, str | bytes]) -> Path:
    """Write a study's files into a folder, and return it."""
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content.encode() if isinstance(content, str) else content)
    return folder


def small(folder: Path, **changed: str | bytes) -> Path:
    """Write the small study with two factors; `toml` and `plate` replace its files."""
    files: dict[str, str | bytes] = {
        "study.toml": changed.get("toml", STUDY),
        "plates/plate-01.csv": changed.get("plate", plate()),
    }
    return write(folder, files)


def tree(folder: Path) -> dict[str, bytes]:
    """Every file below a folder with its content, hidden ones too."""
    return {
        p.relative_to(folder).as_posix(): p.read_bytes() for p in folder.rglob("*") if p.is_file()
    }
