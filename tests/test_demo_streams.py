"""The demo streams: they are read, say that they are invented, and their chemistry is what their comments say.

Expected values come from the files as the TOML library reads them, IUPAC masses and balances written out here.
"""

import tomllib
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

from aquabuf.assess.tank.job_file import read_stream
from aquabuf.assess.tank.waste import chemistry

DATA = Path(__file__).parents[1] / "field_data"
FILES = ("stream_dairy.toml", "stream_plating.toml", "stream_regeneration.toml", "stream_seep.toml")
G_MOL = {"sulfuric acid": 98.079, "hydrochloric acid": 36.46, "nitric acid": 63.012, "caustic soda": 39.997, "iron(III)": 55.845,
         "chromium(III)": 51.996, "nickel": 58.693, "zinc": 65.38, "aluminum": 26.982, "manganese": 54.938}
SCALE = {"mg/L": 1e-3, "g/L": 1.0}


@cache
def job(name):
    """A demo stream, read."""
    return read_stream(DATA / name)


@cache
def chem(name):
    """Its chemistry."""
    return chemistry(job(name).wastes)


def mol_l(name, waste, substance):
    """What the file says a waste holds. [mol/L]"""
    number, unit = tomllib.loads((DATA / name).read_text(encoding="utf-8"))["wastes"][waste]["holds"][substance].split()[:2]
    return float(number) * SCALE[unit] / G_MOL[substance]


@pytest.mark.parametrize("name", FILES)
def test_every_stream_says_that_it_is_invented(name):
    """In its first lines and in its note, and no row of its tables is left out."""
    text = (DATA / name).read_text(encoding="utf-8")
    assert "nvented" in " ".join(line for line in text.splitlines()[:3] if line.startswith("#"))
    assert job(name).note == "invented example"
    assert not [n for n in job(name).notes if "left out" in n]


def test_every_stream_is_tested():
    """None is forgotten."""
    assert sorted(p.name for p in DATA.glob("stream_*.toml")) == sorted(FILES)


def test_plating_is_strong_acid_with_metals():
    """Base by its two acids; metals of 3 and 2 equivalents ask for the rest; the pH measured agrees."""
    name = "stream_plating.toml"
    strong = 2 * mol_l(name, "rinse", "sulfuric acid") + mol_l(name, "rinse", "hydrochloric acid")
    assert_allclose(chem(name).base_eq_l, [-strong], rtol=1e-3)
    metals = sum(z * mol_l(name, "rinse", m) for m, z in (("iron(III)", 3), ("chromium(III)", 3), ("nickel", 2), ("zinc", 2)))
    assert_allclose(chem(name).demand(9.0), strong + metals, rtol=0.03)
    assert abs(chem(name).ph[0] - job(name).wastes[0].ph) < 0.3
    assert 0.05 < metals / strong < 0.5


def test_dairy_washes_are_strong_and_its_process_water_is_titrated():
    """Caustic and acid batches by their products; the process water by its curve, near the pH measured."""
    name = "stream_dairy.toml"
    process, caustic, acid = job(name).arrivals
    assert process.waste.curve is not None
    assert process.batch is None
    assert caustic.batch is not None
    assert acid.batch is not None
    bases = chem(name).base_eq_l
    assert_allclose(bases[1:], [mol_l(name, "caustic wash", "caustic soda"), -mol_l(name, "acid wash", "nitric acid")], rtol=1e-3)
    assert abs(chem(name).ph[0] - process.waste.ph) < 0.3
    assert chem(name).ph[1] > 12.0 > 2.0 > chem(name).ph[2]
    assert len(process.samples) == 3


def test_regeneration_batches_nearly_neutralize_each_other():
    """Equivalents of a batch of each, by volume and product, differ by less than a tenth."""
    name = "stream_regeneration.toml"
    acid, caustic = job(name).arrivals
    eq = [acid.batch.size_m3 * 2 * mol_l(name, "acid rinse", "sulfuric acid"),
          caustic.batch.size_m3 * mol_l(name, "caustic rinse", "caustic soda")]
    assert abs(eq[0] - eq[1]) < 0.1 * eq[0]
    assert_allclose(np.abs(chem(name).base_eq_l), [eq[0] / acid.batch.size_m3, eq[1] / caustic.batch.size_m3], rtol=1e-3)
    assert acid.batch.every_h == caustic.batch.every_h


def test_metals_make_most_of_the_acidity_of_the_seep():
    """Kirby & Cravotta 2005 (facts 5.4): 3 for iron(III) and aluminum, 2 for manganese, 10^-pH for the rest. [eq/L]"""
    name = "stream_seep.toml"
    iron, aluminum, manganese = (mol_l(name, "seep", m) for m in ("iron(III)", "aluminum", "manganese"))
    metals, free = 3 * iron + 3 * aluminum + 2 * manganese, 10.0 ** -job(name).wastes[0].ph
    assert metals > 0.8 * (metals + free)
    assert_allclose(chem(name).demand(7.5), 3 * iron + 3 * aluminum + free, rtol=0.1)  # HSO4- and activity are not in the formula
