"""Wastes of a stream file: concentrations in every unit, names, titrations, flows, and what is taken for granted."""

import numpy as np
import pytest
from numpy.testing import assert_allclose
from stream_texts import changed, holds, reader

from aquabuf.assess.tank.job_contents import free_acids
from aquabuf.chem.acids import acid_table


@pytest.fixture
def read(tmp_path):
    """Reads a text as a stream file."""
    return reader(tmp_path)


@pytest.fixture
def waste(read):
    """The one waste of the stream with these contents."""
    return lambda content, more="": read(holds(content, more)).wastes[0]


PH = "ph = 4.0"


@pytest.mark.parametrize(("content", "name", "mol_l"), [  # IUPAC masses: P 30.974, PO4 94.97, Fe 55.845, Zn 65.38, N 14.007
    ('phosphate = "180 mg/L as P"', "phosphate", 0.18 / 30.974), ('phosphate = "94.97 mg/L as PO4"', "phosphate", 1e-3),
    ('ammonium = "14.007 mg/L as N"', "ammonium", 1e-3), ('acetate = "5 mmol/L"', "acetate", 5e-3),
    ('"iron(III)" = "55.845 mg/L"', "iron(III)", 1e-3), ('"iron(III)" = "55.845 mg/L as Fe"', "iron(III)", 1e-3),
    ('zinc = "0.6538 g/L"', "zinc", 1e-2), ('Zinc = "653.8 mg/L"', "zinc", 1e-2), ('nickel = "2 mmol/L"', "nickel", 2e-3),
    ('manganese = "54.938 mg/L"', "manganese(II)", 1e-3), ('"magnesium hydroxide" = "58.32 mg/L"', "magnesium", 1e-3), ('"inorganic carbon" = "12.011 mg/L as C"', "carbon", 1e-3),
    ('"inorganic carbon" = "2 mmol/L"', "carbon", 2e-3), ('silica = "60.083 mg/L as SiO2"', "silica", 1e-3),
    ('acetate = "1 mmol/L", calcium = "40.078 mg/L"', "calcium", 1e-3),
    ('acetate = "1 mmol/L", calcium = "2 meq/L"', "calcium", 1e-3),
    ('"acetic acid" = "60.052 mg/L"', "acetate", 1e-3), ('"acetic acid" = "0.1 N"', "acetate", 0.1), ('"Citric acid" = "192.12 mg/L"', "citrate", 1e-3),
    ('"ferric chloride" = "162.2 mg/L"', "iron(III)", 1e-3), ('magnesium = "24.305 mg/L"', "magnesium", 1e-3)])
def test_amounts(waste, content, name, mol_l):
    """Mass, moles and equivalents, with what the mass counts. [mol/L]"""
    assert_allclose(waste(content, PH).total(name), mol_l, rtol=2e-4)


@pytest.mark.parametrize(("content", "base"), [
    ('"sulfuric acid" = "98.079 mg/L"', -2e-3), ('"sulfuric acid" = "0.1 N"', -0.1), ('"sulfuric acid" = "0.1N"', -0.1),
    ('"hydrochloric acid" = "10 meq/L"', -0.01), ('"muriatic acid" = "1 mmol/L"', -1e-3), ('HCl = "1 mmol/L"', -1e-3),
    ('"caustic soda" = "39.997 g/L"', 1.0), ('"soda ash" = "1 mmol/L"', 2e-3), ('"soda ash" = "0.1 N"', 0.1),
    ('"phosphoric acid" = "97.994 mg/L"', -1e-3), ('"acetic acid" = "0.1 N"', 0.0), ('ammonia = "0.1 N"', 0.1),
    ('"lactic acid" = "0.1 N"', -0.1), ('alkalinity = "50.043 mg/L as CaCO3"', 1e-3), ('alkalinity = "0.02 N"', 0.02),
    ('alkalinity = "-3 meq/L"', -3e-3), ('alkalinity = "0 meq/L"', 0.0),
    ('"caustic soda" = "3 mmol/L", "sulfuric acid" = "1 mmol/L"', 1e-3), ('"calcium chloride" = "1 g/L"', 0.0)])
def test_strong_acids_and_bases_tell_the_base(waste, content, base):
    """Without any pH. Lactic acid (pK 3.9) counts zero as lactate, acetic acid (4.8) as acid. [eq/L]"""
    assert_allclose(waste(content).base_eq_l, base, rtol=2e-4, atol=1e-12)


def test_free_acids_have_the_mass_of_their_formula():
    """Sums of IUPAC atomic masses by hand: C 12.011, H 1.008, O 15.999, S 32.06, N 14.007, F 18.998, Cl 35.45, B 10.81."""
    c, h, o = 12.011, 1.008, 15.999
    by_hand = {"acetic acid": 2 * c + 4 * h + 2 * o, "citric acid": 6 * c + 8 * h + 7 * o, "lactic acid": 3 * c + 6 * h + 3 * o,
               "oxalic acid": 2 * c + 2 * h + 4 * o, "phthalic acid": 8 * c + 6 * h + 4 * o, "formic acid": c + 2 * h + 2 * o,
               "propionic acid": 3 * c + 6 * h + 2 * o, "butyric acid": 4 * c + 8 * h + 2 * o, "benzoic acid": 7 * c + 6 * h + 2 * o,
               "hydrogen sulfide": 2 * h + 32.06, "hydrogen cyanide": h + c + 14.007, "hydrofluoric acid": h + 18.998,
               "hypochlorous acid": h + o + 35.45, "sulfurous acid": 2 * h + 32.06 + 3 * o, "boric acid": 3 * h + 3 * o + 10.81,
               "silicic acid": 28.085 + 4 * o + 4 * h}
    found = free_acids()
    assert set(found) == set(by_hand)
    for name, mass in by_hand.items():
        assert_allclose(found[name].molar_mass_g, mass, rtol=1e-4, err_msg=name)
    neutral = {a.meaning for a in acid_table().values() if a.charge_full == 0}
    assert neutral - set(found) == {"phosphoric acid"}  # which the products table has


def test_own_acids(read):
    """By moles, or by mass with a molar mass."""
    own = '[acids."humic"]\npk = [3.6, 8.1]\nmolar_mass = 200\n'
    (w,) = read(holds('humic = "20 mg/L"', PH) + own).wastes
    ((acid, mol),) = w.acids.items()
    assert (acid.name, acid.pk, acid.charge_full) == ("humic", (3.6, 8.1), 0)
    assert_allclose(mol, 1e-4)
    assert "[acids" not in "".join(read(holds('humic = "1 mmol/L"', PH) + own).notes)


# ---------------------------------------------------------------- assumptions


@pytest.mark.parametrize(("content", "more", "words"), [
    ('"nitric acid" = "1 g/L", phosphate = "50 mg/L as P"', "", "phosphate counts as H2PO4- with neutral counter-ions"),
    ('"caustic soda" = "1 g/L", cyanide = "10 mg/L"', "", "cyanide counts as HCN with neutral counter-ions"),
    ('"caustic soda" = "1 g/L", "inorganic carbon" = "10 mg/L as C"', "", "inorganic carbon counts as carbon dioxide"),
    ('acetate = "1 g/L"', PH, "an acid, base or metal that is not named is not counted"),
    ('acetate = "1 g/L"', PH, "its strength stays as stated, as the file gives no spread"),
    ('acetate = "1 g/L"', PH, "a steady flow, as the file gives neither a largest flow nor a daily cycle")])
def test_assumptions_of_contents(read, content, more, words):
    """What a name leaves open is told."""
    assert any(a.startswith("[wastes.rinse]") and words in a for a in read(holds(content, more)).assumptions)


def test_no_form_is_assumed_where_ph_tells_it(read):
    """With pH and no strong acid, the forms follow; sulfate and acids by name leave nothing open."""
    for text in (holds('phosphate = "50 mg/L as P"', PH), holds('"acetic acid" = "1 g/L"'), holds('"sulfuric acid" = "1 g/L", sulfate = "1 g/L"')):
        assert not any("counts as" in a for a in read(text).assumptions)


def test_solids_not_given(read):
    """Are none, and that is told."""
    assert "[wastes.rinse]: no suspended solids, as the file does not say" in read(changed(('solids = "20 mg/L"\n', ""))).assumptions
    assert not any("solids" in a for a in read().assumptions)


# ---------------------------------------------------------------- titrations

CURVES = changed(('holds = { "sulfuric acid" = "0.98 g/L" }', 'titration = "curves.csv"'))


def test_middle_sample(read):
    """B asks for least, C for most: A is in the middle; its samples stay beside it."""
    job = read(CURVES)
    assert job.wastes[0].curve.sample_id == "A"
    assert [c.sample_id for c in job.arrivals[0].samples] == ["A", "B", "C"]
    assert_allclose(job.wastes[0].curve.base_eq_l[-1], 0.015)
    assert "[wastes.rinse]: designed for sample A, the middle one of 3 by demand" in job.assumptions
    assert "[wastes.rinse]: titrated at its own 25 °C, as curves.csv has no temperature" in job.assumptions


def test_sample_by_name_and_its_temperature(read):
    """The sample that is named; a temperature in the table is that of the curve."""
    job = read(CURVES.replace('"curves.csv"', '"curves.csv"\nsample = "C"'))
    assert job.wastes[0].curve.sample_id == "C"
    assert not any("designed for" in a for a in job.assumptions)
    warm = read(CURVES.replace("curves.csv", "warm.csv"))
    assert (warm.wastes[0].curve.t_c, warm.wastes[0].t_c) == (30.0, 25.0)
    assert not any("titrated at" in a for a in warm.assumptions)


def test_titration_and_contents(read):
    """The curve decides, and that is told."""
    job = read(CURVES.replace('titration =', 'holds = { calcium = "40 mg/L" }\ntitration ='))
    assert "[wastes.rinse]: its titration decides the demand; what it holds serves ionic strength and side effects" in job.assumptions
    assert_allclose(job.wastes[0].total("calcium"), 1e-3, rtol=2e-3)


# ---------------------------------------------------------------- how they come


def test_flow_strength_and_daily_cycle(read):
    """In m3/h, h and shares; 100 gpm is 22.712 m3/h (US gallon of 231 cubic inches)."""
    text = changed(('flow = "6 m3/h"', 'flow = "100 gpm"\nleast = "1 L/s"\nmost = "2 ML/d"\nstrength = { spread = "30 %", lasting = "90 min" }\n'
                    'daily = { swing = "40 %", peak = "14 h" }'))
    (a,) = read(text).arrivals
    assert_allclose([a.mean_m3_h, a.least_m3_h, a.most_m3_h], [100 * 231 * 0.0254**3 * 60, 3.6, 2000 / 24], rtol=1e-9)
    assert_allclose([a.spread.relative_sd, a.spread.lasting_h, a.daily.swing, a.daily.peak_h], [0.3, 1.5, 0.4, 14.0])
    short = read(text.replace(', lasting = "90 min"', "").replace(', peak = "14 h"', ""))
    assert '[wastes.rinse] strength: lasting = "1 h", as the file does not say' in short.assumptions
    assert '[wastes.rinse] daily: peak = "12 h", as the file does not say' in short.assumptions


def test_batches(read):
    """Mean flow is volume by interval; the dump takes half an hour unless told."""
    job = read(changed(('flow = "6 m3/h"', 'batch = { size = "6 m3", every = "8 h" }')))
    (a,) = job.arrivals
    assert_allclose([a.batch.size_m3, a.batch.every_h, a.batch.over_h, a.batch.first_h, a.mean_m3_h], [6.0, 8.0, 0.5, 0.0, 0.75])
    assert '[wastes.rinse] batch: over = "30 min", as the file does not say' in job.assumptions
    assert not any("steady flow" in x for x in job.assumptions)


def test_several_wastes_in_order(read):
    """Names with spaces too."""
    more = '[wastes."acid wash"]\ntemperature = "48 °C"\nholds = { "nitric acid" = "4 g/L" }\nflow = "2 m3/h"\n[window]'
    job = read(changed(("[window]", more)))
    assert [w.name for w in job.wastes] == ["rinse", "acid wash"]
    assert np.all([w.curve is None for w in job.wastes])
