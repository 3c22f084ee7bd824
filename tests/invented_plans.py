"""Plans for invented works, and the answer of each, worked out once."""

import math
import tempfile
from functools import cache
from pathlib import Path

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.answer_json import answer_record
from aquabuf.assess.plant.plan_file import read_plan

UPLAND = '''[plan]
name = "Ambrel Dam"
currency = "EUR"
date = 2026-10-14

[flow]
now = "10 ML/d"
least = "4 ML/d"

[water]
temperature_c = 8.0
ph = 6.5
alkalinity = "20 mg/L as CaCO3"
"calcium (mg/L)" = 5.0
"magnesium (mg/L)" = 1.2
"sodium (mg/L)" = 6.0
"chloride (mg/L)" = 8.4
"sulfate (mg/L)" = 9.6

[products.lime]
is = "hydrated lime"
strength = "92 %"
price = "0.31 per kg"
slurry = "10 %"
slurry_density = "1.06 kg/L"
day_tank = "6000 L"
stock = "4000 kg"
store = "12000 kg"
delivery = "5000 kg"
shipping = "7 d"
pump = { largest = "250 L/h", stroke = "80 %" }

[products.gas]
is = "carbon dioxide"
strength = "99.9 %"
price = "0.22 per kg"
feeder = { largest = "15 kg/h" }

[[steps]]
do = "adjust"
name = "final pH"
products = ["lime", "gas"]
target = { ph = 8.4, alkalinity = "55 mg/L as CaCO3" }

[[steps]]
do = "temperature"
name = "tap in summer"
to = "18 °C"

[hold]
ph = 8.4
intensity = "0.2 meq/L per pH"

[drift]
draws = 100
'''
FIXED = '''[plan]
name = "Fixed feed"

[flow]
now = "10 ML/d"

[water]
temperature_c = 15
ph = 7.5
alkalinity = "60 mg/L as CaCO3"

[products.caustic]
is = "caustic soda"
strength = "50 %"
density = "1.525 kg/L"
day_tank = "246 L"
pump = { largest = "20 L/h" }

[[steps]]
do = "dose"
name = "feed"
product = "caustic"
dose = "15 mg/L"
'''
RIVER = '''[plan]
name = "Tarn Weir"

[flow]
now = "15 MGD"

[water]
temperature_c = 12.0
ph = 7.6
alkalinity = "60 mg/L as CaCO3"
"calcium (mg/L)" = 18.0

[products.alum]
is = "liquid alum as 14-water"
strength = "48.5 %"
density = "1.335 kg/L"
pump = { largest = "120 L/h" }

[products.lime]
is = "hydrated lime"
strength = "93 %"
feeder = { largest = "60 kg/h" }

[[steps]]
do = "coagulate"
name = "rapid mix"
product = "alum"
dose = "40 mg/L"
floor = "30 mg/L as CaCO3"

[[steps]]
do = "adjust"
name = "final pH"
products = ["lime"]
target = { ph = 8.2 }
'''
BLEND = '''[plan]
name = "Well with permeate"

[flow]
now = "5 ML/d"

[water]
temperature_c = 14
ph = 7.2
alkalinity = "290 mg/L as CaCO3"
"calcium (mg/L)" = 110

[sources.permeate]
temperature_c = 14
ph = 5.8
alkalinity = "6 mg/L as CaCO3"
"calcium (mg/L)" = 1

[[steps]]
do = "blend"
name = "blend"
with = ["permeate"]
shares = ["60 %"]
'''
TWO_STAGES = '''[plan]
name = "Two stages of gas"

[flow]
now = "10 ML/d"

[water]
temperature_c = 11
ph = 10.8
alkalinity = "90 mg/L as CaCO3"
"calcium (mg/L)" = 25

[products.gas]
is = "carbon dioxide"
strength = "99.9 %"
feeder = { largest = "6 kg/h" }

[[steps]]
do = "recarbonate"
name = "gas"
product = "gas"
ph = [10.0, 8.4]
'''
IMPOSSIBLE = FIXED[:FIXED.index("[[steps]]")] + '''[[steps]]
do = "adjust"
name = "final pH"
products = ["caustic"]
target = { ph = 8.4, alkalinity = "90 mg/L as CaCO3" }
'''
OVER_RAIL = FIXED.replace('dose = "15 mg/L"', 'dose = "80 mg/L"')
SMALLEST = '''[plan]
name = "Look only"
[flow]
now = "100 m3/d"
[water]
temperature_c = 10
ph = 6.8
alkalinity = "30 mg/L as CaCO3"
[[steps]]
do = "temperature"
to = "15 °C"
'''
SEASON = UPLAND.replace("draws = 100", 'draws = 100\nreadings = "year.csv"')
PLANS = {"upland": UPLAND, "fixed": FIXED, "river": RIVER, "blend": BLEND, "impossible": IMPOSSIBLE,
         "over rail": OVER_RAIL, "smallest": SMALLEST, "season": SEASON}


def year(rows=24):
    """A year of raw water that swings once."""
    lines = ["sample_id,temperature_c,ph,alkalinity (mg/L as CaCO3),calcium (mg/L),magnesium (mg/L)"]
    for k in range(rows):
        swing = math.sin(2.0 * math.pi * k / rows)
        lines.append(f"R{k + 1},{9 - 6 * swing:.1f},{6.6 - 0.3 * swing:.2f},{22 - 8 * swing:.1f},5.5,1.2")
    return "\n".join(lines) + "\n"


def write_plan(folder, name="upland", text=None):
    """Write a plan, and the season beside it; its path."""
    path = Path(folder) / "plan.toml"
    path.write_text(PLANS[name] if text is None else text, encoding="utf-8")
    path.with_name("year.csv").write_text(year(), encoding="utf-8")
    return path


@cache
def answered(name):
    """The answer to a plan, and its record."""
    with tempfile.TemporaryDirectory() as folder:
        answer = solve_plan(read_plan(write_plan(folder, name)))
    return answer, answer_record(answer)
