"""Reads: every absorbance as it came, from a tidy table or from grids."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from muntin.assay.grids import GridName, grid_name, name_fault, read_grid
from muntin.assay.mapping import mapped
from muntin.record.assay import READ_COLUMNS, Assay
from muntin.record.cells import CellError, parse_number
from muntin.record.faults import Fault, Findings, counted, did_you_mean, listed, number, quoted
from muntin.record.tables import Table, missing_column, read_table, table_files
from muntin.record.wells import WellError, last_well, well_name

_NEEDED = ("well", "fraction", "wavelength", "absorbance")
_OVER = re.compile(r"(?:>|≥)=?\s*(.*)|over", re.IGNORECASE)
# No plate reader tells more absorbance than this, AU.
_MOST_AU = 10.0
_ONE_IN = re.compile(r"1\s*:\s*(.+)")


@dataclass(frozen=True, kw_only=True, slots=True)
class Read:
    """One read. `absorbance` in AU, a limit where `over` (the reader could not tell more);
    `dilution` the factor by which the sample was diluted; `volume` what was collected of the
    fraction, µL, NaN where not weighed; `file` and `where` its address.
    """

    plate: str
    well: str
    fraction: str
    wavelength: float
    absorbance: float
    over: bool = False
    dilution: float = 1.0
    volume: float = float("nan")
    file: str = ""
    where: str = ""


@dataclass(frozen=True, kw_only=True, slots=True)
class Asked:
    """What reads may name: plates of the study, fractions and wavelengths of [assay], the size."""

    plates: tuple[str, ...]
    size: int
    assay: Assay

    @property
    def fractions(self) -> tuple[str, ...]:
        """All fractions, that of the load's own samples first."""
        return (self.assay.load_fraction, *self.assay.fractions)

    @property
    def wavelengths(self) -> tuple[float, ...]:
        """All wavelengths, that of the protein first."""
        assay = self.assay
        return (assay.protein_nm, *assay.scatter_nm, *assay.water_band_nm)


def read_reads(path: Path, asked: Asked, found: Findings) -> list[Read]:
    """Return all reads in a table or a folder of tables and grids; faults join `found`."""
    if not path.exists():
        problem = "there is no such file or folder"
        found.faults.append(Fault(file=str(path), problem=problem, hint="name a table or a folder"))
        return []
    files = [p for _, p in table_files(path, found)] if path.is_dir() else [path]
    if not files and not found.faults:
        problem = "holds no .csv or .xlsx table"
        found.faults.append(Fault(file=str(path), problem=problem))
    reads: list[Read] = []
    volumes: dict[tuple[str, str, str], float] = {}
    before = len(found.faults)
    for file in files:
        name = grid_name(file.stem, asked.plates, asked.fractions)
        if name is not None:
            _grid(file, name, asked, reads, volumes, found)
            continue
        fault = name_fault(file, asked.plates, asked.fractions)
        if fault is None:
            reads += _tidy(file, asked, found)
        else:
            found.faults.append(fault)
    found.faults.extend(_too_high(reads))
    if path.is_dir():
        # A plate table may bear the same name.
        added = [replace(f, file=f"{path.name}/{f.file}") for f in found.faults[before:]]
        found.faults[before:] = added
    kept = _once(reads, found)
    found.notices.extend(_repeated(kept))
    return _weighed(kept, volumes)


def _grid(
    file: Path,
    name: GridName,
    asked: Asked,
    reads: list[Read],
    volumes: dict[tuple[str, str, str], float],
    found: Findings,
) -> None:
    """Add a grid's reads, or the volumes that it holds."""
    if name.wavelength is not None and name.wavelength not in asked.wavelengths:
        _unknown_wavelength(file.name, name.wavelength, asked, found)
        return
    for well, (cell, where) in read_grid(file, asked.size, found).items():
        value, over = _absorbance(cell, file.name, where, found)
        if value is None:
            continue
        if name.wavelength is None:
            volumes[name.plate, well, name.fraction] = value
            continue
        reads.append(
            Read(
                plate=name.plate,
                well=well,
                fraction=name.fraction,
                wavelength=name.wavelength,
                absorbance=asked.assay.linear_high if np.isnan(value) else value,
                over=over,
                dilution=name.dilution,
                file=file.name,
                where=where,
            )
        )


def _unknown_wavelength(file: str, given: float, asked: Asked, found: Findings) -> None:
    found.notices.append(
        f"{file}: {given:g} nm is none of the wavelengths of [assay] "
        f"({', '.join(f'{nm:g}' for nm in asked.wavelengths)}); left out"
    )


def _absorbance(cell: str, file: str, where: str, found: Findings) -> tuple[float | None, bool]:
    """The number in a cell and whether the read is above it; NaN for "over" without a number."""
    over = _OVER.fullmatch(cell)
    text = cell if over is None else over[1] or ""
    if over is not None and not text:
        return float("nan"), True
    try:
        return parse_number(text), over is not None
    except CellError as error:
        hint = error.hint or 'write ">" and the limit, or "over", where the reader could not tell'
        found.faults.append(
            Fault(file=file, where=where, value=quoted(cell), problem=str(error), hint=hint)
        )
    return None, False


def _tidy(file: Path, asked: Asked, found: Findings) -> list[Read]:
    known = [*READ_COLUMNS, *asked.assay.columns.values()]
    table = read_table(file, file.name, known, found)
    if table is None:
        return []
    table = mapped(table, asked.assay.columns, found)
    lacking = [name for name in _NEEDED if name not in table.columns]
    if "plate" not in table.columns and len(asked.plates) != 1:
        lacking.append("plate")
    if lacking:
        found.faults.extend(missing_column(table, name, _form_hint(asked)) for name in lacking)
        return []
    others = [name for name in table.columns if name not in READ_COLUMNS]
    if others:
        found.notices.append(f"{file.name}: columns not used: {', '.join(others)}")
    rows = (_row(table, row, asked, found) for row in range(len(table)))
    return [read for read in rows if read is not None]


def _form_hint(asked: Asked) -> str:
    return (
        "a tidy table has the headings well, fraction, wavelength, absorbance, and plate where "
        "there are several ([assay.columns] names your own); a grid is named "
        f"PLATE_FRACTION_WAVELENGTH.csv, such as {asked.plates[0] if asked.plates else 'plate-01'}_"
        f"{asked.fractions[-1]}_280.csv"
    )


def _row(table: Table, row: int, asked: Asked, found: Findings) -> Read | None:
    before = len(found.faults)
    cell = {name: table.cells(name)[row] for name in READ_COLUMNS}
    if not cell["absorbance"]:
        return None
    plate = _one_of(table, row, "plate", asked.plates, found)
    fraction = _one_of(table, row, "fraction", asked.fractions, found)
    well = _well(table, row, asked.size, found)
    wavelength = _number(table, row, "wavelength", found)
    value, over = _absorbance(cell["absorbance"], table.file, table.where[row], found)
    dilution = _dilution(table, row, found)
    volume = _number(table, row, "volume_ul", found) if cell["volume_ul"] else float("nan")
    _check_stage(table, row, fraction, asked, found)
    if volume < 0:
        found.faults.append(table.fault(row, "volume_ul", "must be 0 or above"))
    if len(found.faults) > before or value is None:
        return None
    if wavelength not in asked.wavelengths:
        known = [f"{nm:g}" for nm in asked.wavelengths]
        problem = "is none of the wavelengths of [assay]"
        hint = f"known: {', '.join(known)} nm"
        found.faults.append(table.fault(row, "wavelength", problem, hint=hint))
        return None
    return Read(
        plate=plate,
        well=well,
        fraction=fraction,
        wavelength=wavelength,
        absorbance=asked.assay.linear_high if np.isnan(value) else value,
        over=over,
        dilution=dilution,
        volume=volume,
        file=table.file,
        where=table.where[row],
    )


def _one_of(table: Table, row: int, column: str, known: Sequence[str], found: Findings) -> str:
    cell = table.cells(column)[row]
    if not cell and len(known) == 1:
        return known[0]
    same = [name for name in known if name.casefold() == cell.casefold()]
    if same:
        return same[0]
    what = "plate that was run" if column == "plate" else "fraction of [assay]"
    hint = did_you_mean(cell, known) if cell and known else ", ".join(known)
    found.faults.append(table.fault(row, column, f"is not a {what}", hint=hint))
    return ""


def _well(table: Table, row: int, size: int, found: Findings) -> str:
    try:
        return well_name(table.cells("well")[row], size)
    except WellError as error:
        hint = f"A1 to {last_well(size)}"
        found.faults.append(table.fault(row, "well", str(error), hint=hint))
        return ""


def _number(table: Table, row: int, column: str, found: Findings) -> float:
    try:
        return parse_number(table.cells(column)[row], table.comma)
    except CellError as error:
        found.faults.append(table.fault(row, column, str(error), hint=error.hint))
        return float("nan")


def _dilution(table: Table, row: int, found: Findings) -> float:
    """The factor in a cell: 5 or 1:5, one part in five; 1 where empty."""
    cell = table.cells("dilution")[row]
    if not cell:
        return 1.0
    part = _ONE_IN.fullmatch(cell)
    try:
        factor = parse_number(part[1] if part else cell, table.comma)
    except CellError as error:
        hint = error.hint or "write the factor, 5, or one part in so many, 1:5"
        found.faults.append(table.fault(row, "dilution", str(error), hint=hint))
        return float("nan")
    if factor < 1:
        problem = "must be at least 1, the factor by which the sample was diluted"
        found.faults.append(table.fault(row, "dilution", problem))
    return factor


def _check_stage(table: Table, row: int, fraction: str, asked: Asked, found: Findings) -> None:
    """A stage is told by the fraction; where the table names it too, both must agree."""
    kinds: Mapping[str, str] = {s.fraction: s.stage for s in asked.assay.stages}
    cell = table.cells("stage")[row].lower()
    kind = kinds.get(fraction, "load")
    if cell and fraction and cell not in (kind, fraction.lower()):
        problem = f"is not the stage of {fraction}, which is {kind}"
        found.faults.append(table.fault(row, "stage", problem, hint="study.toml, assay, stages"))


def _too_high(reads: Sequence[Read]) -> Iterator[Fault]:
    """Yield a fault a file that holds more absorbance than there can be."""
    by_file: dict[str, list[Read]] = {}
    for read in reads:
        if read.absorbance > _MOST_AU:
            by_file.setdefault(read.file, []).append(read)
    for file, here in by_file.items():
        rest = f", and {counted(len(here) - 1, 'more read')} of this file" if here[1:] else ""
        yield Fault(
            file=file,
            where=here[0].where,
            column="absorbance",
            value=number(here[0].absorbance),
            problem=f"lies above {number(_MOST_AU)} AU, more than a reader tells{rest}",
            hint="reads are taken in AU: 1000 mAU are 1",
        )


def _repeated(reads: Sequence[Read]) -> Iterator[str]:
    """Yield what was read more than once at one dilution, by plate."""
    times = Counter((r.plate, r.well, r.fraction, r.wavelength, r.dilution) for r in reads)
    by_plate: dict[str, list[str]] = {}
    for (plate, well, fraction, wavelength, _), count in times.items():
        if count > 1:
            by_plate.setdefault(plate, []).append(f"{well} {fraction} {wavelength:g} nm")
    for plate, samples in by_plate.items():
        yield (
            f"{plate}: {counted(len(samples), 'sample')} with several reads at one dilution, whose "
            f"mean is taken ({listed(samples, most=3)})"
        )


def _once(reads: list[Read], found: Findings) -> list[Read]:
    """Take out what stands in a second file again, as where a grid was pasted into a table too."""
    first: dict[tuple[object, ...], str] = {}
    kept, twice = [], Counter[tuple[str, str]]()
    for read in reads:
        at = (read.plate, read.well, read.fraction, read.wavelength, read.dilution, read.absorbance)
        file = first.setdefault(at, read.file)
        if file == read.file:
            kept.append(read)
        else:
            twice[read.file, file] += 1
    found.notices.extend(
        f"{file}: {counted(count, 'read')} stand in {other} as well, and are taken once"
        for (file, other), count in twice.items()
    )
    return kept


def _weighed(reads: list[Read], volumes: Mapping[tuple[str, str, str], float]) -> list[Read]:
    return [
        replace(read, volume=volumes[at])
        if (at := (read.plate, read.well, read.fraction)) in volumes
        else read
        for read in reads
    ]
