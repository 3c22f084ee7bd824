"""Plans with random damage: every one is read, or refused with an error of this program that names the file."""

import random
import re

import pytest

from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.errors import AquabufError
from aquabuf.tables import read_table

PLAN = '''[plan]
name = "Upper Mill"
use = "drinking water"
currency = "EUR"
date = 2026-03-14
[flow]
now = "9.6 ML/d"
least = "4 ML/d"
most = "600 m3/h"
[water]
readings = "year.csv"
sample = "R14-05"
"alkalinity (mg/L as CaCO3)" = 57.4
ph = 7.68
ph_u = 0.02
temperature = "11.2 °C"
calcium = "18 mg/L"
[sources.well]
share = "30 %"
alkalinity = "5 meq/L"
ph = 7.2
temperature_c = 9
[products.lime]
is = "hydrated lime"
strength = "92 %"
price = "0.31 per kg"
density = "0.5 kg/L"
pump = { largest = "20 L/h", stroke = "60 %", curve = [[20, 3.9], [40, 8.1]], curve_unit = "L/h" }
slurry = "10 %"
slurry_density = "1.06 kg/L"
day_tank = "250 L"
store = "5 m3"
delivery = "1000 kg"
shipping = "7 d"
[products.co2]
is = "carbon dioxide"
strength = "100 %"
feeder = { largest = "15 kg/h", range = ["10 %", "90 %"], turndown = 10 }
[products.pacl]
is = "polyaluminum chloride"
strength = "17 %"
strength_as = "Al2O3"
basicity = "70 %"
[products.mine]
is = "own"
formula = "Mg(OH)2"
adds = { magnesium = 1, alkalinity = 2 }
solids = { "SiO2" = 0.1 }
strength = "60 %"
form = "slurry"
groups = ["base"]
[[steps]]
do = "coagulate"
product = "pacl"
dose = "3 mg/L as Al"
floor = "30 mg/L as CaCO3"
[[steps]]
do = "aerate"
kla = "2 per h"
time = "20 min"
[[steps]]
do = "blend"
with = ["well"]
[[steps]]
do = "contact"
product = "lime"
co2 = "co2"
co2_dose = "5 mg/L"
[[steps]]
do = "recarbonate"
product = "co2"
ph = [10.3, 8.6]
[[steps]]
do = "adjust"
products = ["lime", "co2"]
target = { ph = [8.2, 8.6], alkalinity = "at least 45 mg/L as CaCO3", ccpp = ["4 mg/L as CaCO3", "10 mg/L as CaCO3"] }
[hold]
ph = 8.4
intensity = "0.5 meq/L per pH"
basin = "50 m3"
fault = "0.5 meq/L"
[drift]
readings = "year.csv"
errors = { ph = 0.1, alkalinity = "2 mg/L as CaCO3" }
feed_error = "5 %"
draws = 500
[limits."my pH"]
quantity = "ph"
[guards]
ph = [6.0, 9.5]
over_dose = 1.2
'''
VALUES = ("3", "-3", "0", "1e308", "-1e-308", "nan", "inf", "true", '""', '" "', '"3"', '"-3 mg/L"', '"1e308 mg/L"', '"1e-320 %"', '"9e299 ML/d"', '"0 %"', '"3 mg/L as Qq"', "[]", "[1]", "[[1, 2], [3, 4]]", "[[]]", '["a", 3]',
          "{}", "{ a = 1 }", "{ ph = {} }", "2026-01-01", "07:30:00", "9" * 320, '"at least"', '"at most 3 µeq/L"', '"all"', '"lime"', '"own"', '"\\u0000"', '"../../x"', '"year.csv"', '"é" ', "'''a\nb'''", '"(mg/L) mg/L"', '"%"')
WORDS = sorted({row[cell] for row in read_table("plan_keys") for cell in ("key", "example") if row[cell]})


def damaged(rng):
    """The plan after one to three random changes."""
    lines = PLAN.splitlines()
    for _ in range(rng.randrange(1, 4)):
        at, other = rng.randrange(len(lines)), rng.randrange(len(lines))
        kind = rng.randrange(8)
        if kind == 0:
            del lines[at]
        elif kind == 1:
            lines[at], lines[other] = lines[other], lines[at]
        elif kind == 2 and "=" in lines[at]:
            lines[at] = lines[at].split("=")[0] + "= " + rng.choice(VALUES)
        elif kind == 3 and "=" in lines[at] and "=" in lines[other]:
            lines[at] = lines[at].split("=", 1)[0] + "=" + lines[other].split("=", 1)[1]
        elif kind == 4 and "=" in lines[at]:
            lines[at] = rng.choice(WORDS) + " = " + lines[at].split("=", 1)[1]
        elif kind == 5 and lines[at]:
            cut = rng.randrange(len(lines[at]))
            lines[at] = lines[at][:cut] + rng.choice(["", "x", '"', "-", "0", "%", "[", "= "]) + lines[at][cut + 1:]
        elif kind == 6:
            lines.insert(at, f"{rng.choice(WORDS)} = {rng.choice((*VALUES, *WORDS))}")
        else:
            lines[at] = re.sub(r"[\d.]+", lambda m: rng.choice(["-1", "1e6", "0", "1e-9", m[0]]), lines[at])
        lines = "\n".join(lines).splitlines() or [""]
    return "\n".join(lines) + "\n"


@pytest.fixture
def outcome(tmp_path):
    """What reading a text brings: "" where it is read, else the message."""
    (tmp_path / "year.csv").write_text("sample_id,temperature_c,ph,alkalinity_mg_l_caco3\nR14-05,10.0,7.5,40\n", encoding="utf-8")
    path = tmp_path / "plan.toml"

    def of(text):
        path.write_text(text, encoding="utf-8")
        try:
            read_plan(path)
        except AquabufError as error:
            return str(error)
        return ""
    return of


def test_undamaged(outcome):
    """The plan that is damaged below is a good one, without notes on its own keys."""
    assert outcome(PLAN) == ""


@pytest.mark.parametrize("seed", range(4))
def test_random_damage(outcome, seed):
    """Only errors of this program, each naming the file; many plans are still read and many refused."""
    rng = random.Random(seed)
    found = [outcome(damaged(rng)) for _ in range(120)]
    refused = [message for message in found if message]
    assert [m for m in refused if not m.startswith("plan.toml")] == []
    assert 20 < len(refused) < 118
    assert len({re.sub(r"\W", "", m.split(":", 1)[-1])[:40] for m in refused}) > 15


def test_every_value_at_every_key(outcome):
    """Each key of the plan with each odd value."""
    lines = PLAN.splitlines()
    rng = random.Random(3)
    for at, line in enumerate(lines):
        if "=" in line:
            for value in rng.sample(VALUES, 5):
                message = outcome("\n".join([*lines[:at], line.split("=")[0] + "= " + value, *lines[at + 1:]]))
                assert not message or message.startswith("plan.toml"), f"{line} {value}: {message}"
