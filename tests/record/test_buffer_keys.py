"""Keys of buffers: each fault with its value, what is allowed, and the nearest name."""

import pytest

from muntin.record import StudyFaults
from tests.bench.buffered import PH, SALT, buffer
from tests.studies import written

BENCH = {"ph_factor": "ph", "salt_factor": "salt", "salt_stock_mm": 2000}


def faults(folder, *buffers, factors=(PH, SALT), **bench):
    keys = {name: value for name, value in {**BENCH, **bench}.items() if value is not None}
    with pytest.raises(StudyFaults) as raised:
        written(folder, factors=factors, bench=keys, **{"bench.buffers": buffers})
    return [line.removeprefix("study.toml, bench, ") for line in raised.value.lines()]


def test_sound_buffers_have_no_faults(tmp_path):
    own = buffer("imidazole", pka=[6.99], pka_per_c=[-0.0215], charge=1, stock_charges=[1, 0])
    buffers = [buffer("Acetate", below_ph=5.6), buffer("acetate", from_ph=5.6, mm=50), own]
    study = written(tmp_path, factors=(PH, SALT), bench=BENCH, **{"bench.buffers": buffers})
    assert [b.known for b in study.definition.bench.buffers] == ["acetate", "acetate", None]


@pytest.mark.parametrize(
    ("given", "fault"),
    [
        (
            buffer("acetat"),
            'buffers, acetat, name: "acetat" is not a known buffer, and has no pka (did you mean '
            '"acetate"?)',
        ),
        (
            buffer("acetate", pka=[4.8], charge=0),
            'buffers, acetate, name: "acetate" is known; pka, charge belong to a buffer of your '
            "own, by another name",
        ),
        (
            buffer("MES", mm=300),
            "buffers, MES, mm: 300 lies above stock_mm, which is 200",
        ),
        (
            buffer("MES", from_ph=7, below_ph=6),
            "buffers, MES, from_ph: 7 must lie below below_ph, which is 6",
        ),
        (buffer("own", pka=[7, 6]), "buffers, own, pka: [7, 6] must rise"),
        (
            buffer("own", pka=[]),
            "buffers, own, pka: [] must be 1 to 4 numbers from -2 to 16",
        ),
        (
            buffer("own", pka=[7, 9], pka_per_c=[0.01]),
            "buffers, own, pka_per_c: [0.01] must be one number a pKa (2), from -0.1 to 0.1",
        ),
        (
            buffer("own", pka=[7, 9], stock_charges=[1, 0]),
            "buffers, own, stock_charges: [1, 0] must be the charge of the acid form, then the "
            "lower one of the base form, from 0 to -2",
        ),
        (
            buffer("MES", acid_stock="Water"),
            'buffers, MES, acid_stock: "Water" is the name of another bottle, of water or of load',
        ),
        (
            buffer("MES", acid_stock="MES", base_stock="mes"),
            'buffers, MES, base_stock: "mes" is the name of another bottle, of water or of load',
        ),
        (buffer("MES", acid_stock=" "), 'buffers, MES, acid_stock: " " is empty'),
    ],
)
def test_faults_of_one_buffer(tmp_path, given, fault):
    assert faults(tmp_path, given) == [fault]


def test_the_same_buffer_twice_at_one_ph(tmp_path):
    assert faults(tmp_path, buffer("MES", from_ph=5), buffer("mes", below_ph=6)) == [
        'buffers, mes, name: "mes" is there twice, for the same pH'
    ]


MIX = {"acid_stock": "acid mix", "base_stock": "base mix"}


@pytest.mark.parametrize(
    "buffers",
    [
        (buffer("MES", **MIX), buffer("acetate", mm=10, **{**MIX, "stock_mm": 100})),
        (buffer("MES", below_ph=6, **MIX), buffer("MES", from_ph=6, **{**MIX, "mm": 50})),
    ],
)
def test_buffers_may_share_their_bottles(tmp_path, buffers):
    written(tmp_path, factors=(PH, SALT), bench=BENCH, **{"bench.buffers": buffers})


@pytest.mark.parametrize(
    ("second", "problem"),
    [
        (buffer("acetate", **{**MIX, "mm": 10}), "is one bottle: its buffers need one share, mm"),
        (buffer("acetate", from_ph=5, **MIX), "is one bottle: its buffers need one share, mm"),
        (
            buffer("MES", from_ph=6, **{**MIX, "stock_mm": 100}),
            "is one bottle: its buffers need one share, mm",
        ),
        (buffer("acetate", acid_stock="Acid mix"), '"Acid mix" is written "acid mix" elsewhere'),
        (buffer("acetate", acid_stock="base mix"), "is the name of another bottle"),
    ],
)
def test_a_bottle_serves_its_buffers_alike(tmp_path, second, problem):
    below = {"below_ph": 6} if second["name"] == "MES" else {}
    found = faults(tmp_path, buffer("MES", **below, **MIX), second)
    assert found
    assert all(problem in fault for fault in found)


@pytest.mark.parametrize(
    ("bench", "fault"),
    [
        (
            {"salt_factor": "sallt"},
            'salt_factor: "sallt" is not a factor with a range (did you mean "salt"?)',
        ),
        ({"salt_factor": "ph"}, 'salt_factor: "ph" is the pH already'),
        (
            {"salt_stock_mm": None},
            "salt_stock_mm: is missing; salt_factor needs a stock of the salt",
        ),
        (
            {"ph_factor": None},
            "ph_factor: must name the factor that is the pH where there are [[bench.buffers]]",
        ),
        (
            {"salt_stock": "load"},
            'salt_stock: "load" is the name of another bottle, of water or of load',
        ),
    ],
)
def test_faults_between_keys(tmp_path, bench, fault):
    assert fault in faults(tmp_path, buffer("MES"), **bench)


def test_a_unit_that_is_no_concentration(tmp_path):
    conductive = {**SALT, "unit": "mS/cm"}
    assert faults(tmp_path, buffer("MES"), factors=(PH, conductive)) == [
        'salt_factor, salt, unit: "mS/cm" is no unit in which buffers count the salt; it must be '
        "one of mM, mmol/L, M, mol/L"
    ]
