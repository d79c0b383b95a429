"""A new study: sound as it stands, and every key it shows may be used."""

from __future__ import annotations

import re
import tomllib

import pytest

from muntin.record import StudyFaults, new_study, open_study
from muntin.record.template import study_text, toml_value

OPTIONAL = re.compile(r"#(\w+) = (.+)")
CLASHING = {"choices", "plan_choices", "typical", "load_factor", "resin_ul"}
CLASHING |= {"pka", "pka_per_c", "charge", "stock_charges"}  # of a buffer that is not known


@pytest.mark.parametrize("factors", [1, 2, 6])
def test_a_new_study_is_sound(tmp_path, factors):
    paths = new_study(tmp_path / "new" / "study", factors=factors)
    study = open_study(tmp_path / "new" / "study")
    assert len(study.definition.factors) == factors
    assert study.notices == ()
    assert [path.relative_to(tmp_path).as_posix() for path in paths] == [
        "new/study/study.toml",
        "new/study/plates/plate-01.csv",
    ]
    assert "invented" in study.definition.title.lower()


def test_the_plate_table_has_its_headings_only(tmp_path):
    _, plate = new_study(tmp_path)
    assert plate.read_text() == "well,role,elution_ph,salt,recovery,exclude\n"


def test_the_empty_plate_table_never_blocks_a_renamed_factor(tmp_path):
    path, _ = new_study(tmp_path)
    path.write_text(path.read_text().replace('"salt"', '"chloride"').replace("elution_ph", "ph"))
    study = open_study(tmp_path)
    assert [factor.name for factor in study.definition.factors] == ["ph", "chloride"]
    assert study.notices == ()


def _tables(text: str) -> list[list[str]]:
    lines, tables = text.splitlines(), []
    for line in lines:
        if re.match(r"#?\[", line):
            tables.append([line])
        elif tables:
            tables[-1].append(line)
    return tables


def _with_optional(text: str, wanted: set[tuple[str, str]]) -> str:
    lines, table = [], ""
    for line in text.splitlines():
        heading = re.fullmatch(r"#?(\[.+\])", line)
        table = heading[1] if heading else table
        key = OPTIONAL.fullmatch(line)
        use = (heading and (table, "") in wanted) or (key and (table, key[1]) in wanted)
        lines.append(line.removeprefix("#") if use else line)
    return "\n".join(lines)


def _optional_keys() -> list[tuple[str, str]]:
    keys, table = [], ""
    for line in study_text(2).splitlines():
        heading = re.fullmatch(r"#?(\[.+\])", line)
        table = heading[1] if heading else table
        key = OPTIONAL.fullmatch(line)
        if key and (key[1] not in CLASHING or table == "[fixed]"):
            keys.append((table, key[1]))
    return keys


def test_every_optional_key_works_when_its_mark_is_taken_away(tmp_path):
    new_study(tmp_path)
    keys = _optional_keys()
    assert len(keys) > 20
    headings = {(table, "") for table, _ in keys} - {("[study]", ""), ("[[factors]]", "")}
    text = _with_optional(study_text(2), set(keys) | headings)
    (tmp_path / "study.toml").write_text(text)
    definition = open_study(tmp_path).definition
    assert definition.fixed == {"resin_ul": 20.0, "hold_up_ul": 25.0, "contact_minutes": 60.0}
    assert [stage.stage for stage in definition.assay.stages] == ["load", "elution"]
    assert definition.limits[0].allow == "salt <= 900 - 150 * (elution_ph - 5)"
    assert definition.factors[0].plan_low == 5.0


def test_every_table_of_a_study_is_shown():
    shown = {re.sub(r"[#\[\]]|\..*", "", table[0]) for table in _tables(study_text(2))}
    from muntin.record.definition import Definition

    assert shown == set(Definition.model_fields)


@pytest.mark.parametrize("there", ["study.toml", "plates/plate-07.xlsx"])
def test_nothing_is_overwritten(tmp_path, there):
    path = tmp_path / there
    path.parent.mkdir(exist_ok=True)
    path.write_text("mine")
    with pytest.raises(StudyFaults) as raised:
        new_study(tmp_path)
    assert str(raised.value) == (
        f"{path}: is already there and is not overwritten (name another folder)"
    )
    assert [p for p in tmp_path.rglob("*") if p.is_file()] == [path]
    assert path.read_text() == "mine"


def test_a_file_is_no_place_for_a_study(tmp_path):
    path = tmp_path / "file"
    path.write_text("mine")
    with pytest.raises(StudyFaults) as raised:
        new_study(path)
    assert str(raised.value) == f"{path}: is a file, not a folder"


@pytest.mark.parametrize("factors", [0, 7])
def test_the_number_of_factors_is_bounded(tmp_path, factors):
    with pytest.raises(StudyFaults) as raised:
        new_study(tmp_path, factors=factors)
    assert str(raised.value) == (
        f"{tmp_path}: {factors} factors were asked for; a study has 1 to 6"
    )


@pytest.mark.parametrize(
    "value", ['say "no"', "pH µ", 3, 0.25, True, ["A", "B"], {"a": {"b": 1.5}}, [[1, 2], []]]
)
def test_values_survive_toml(value):
    assert tomllib.loads(f"key = {toml_value(value)}")["key"] == value


def test_names_of_priors_are_listed():
    said = " ".join(study_text().replace("\n#", " ").split())
    assert "noise_sd, scale_error, inside_error, ceiling_gap" in said
