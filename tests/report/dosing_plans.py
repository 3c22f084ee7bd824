"""Invented plans for the figures of dosing: from one product and no pump to six products and ten steps."""

from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

from aquabuf.assess.plant.answer import solve_plan
from aquabuf.assess.plant.plan_file import read_plan

SOFT = """
[flow]
now = "9.6 ML/d"
[water]
temperature_c = 8.0
ph = 6.5
alkalinity = "20 mg/L as CaCO3"
"calcium (mg/L)" = 5.0
"magnesium (mg/L)" = 1.2
"sodium (mg/L)" = 6.0
"chloride (mg/L)" = 8.4
"sulfate (mg/L)" = 9.6
"""
LIME = """
[products.lime]
is = "hydrated lime"
strength = "92 %"
slurry = "10 %"
slurry_density = "1.06 kg/L"
pump = { largest = "250 L/h", stroke = "80 %" }
"""
GAS = """
[products.gas]
is = "carbon dioxide"
strength = "99.9 %"
feeder = { largest = "15 kg/h" }
"""
FINAL = """
[[steps]]
do = "adjust"
name = "final pH"
products = ["lime", "gas"]
target = { ph = 8.4, alkalinity = "55 mg/L as CaCO3" }
[[steps]]
do = "temperature"
name = "tap in summer"
to = "18 °C"
"""
LONG = "hydrated lime from the north silo"
MANY = f"""
[products."{LONG}"]
is = "hydrated lime"
strength = "92 %"
[products.alum]
is = "liquid alum as 14.3-water"
density = "1.335 kg/L"
pump = {{ largest = "10 L/h" }}
[products.chlorine]
is = "sodium hypochlorite"
strength = "12 %"
density = "1.2 kg/L"
pump = {{ largest = "3 L/h" }}
[products.FSA]
is = "fluosilicic acid"
strength = "24 %"
density = "1.21 kg/L"
[products."phosphoric acid"]
is = "phosphoric acid"
density = "1.7 kg/L"
[products.gas]
is = "carbon dioxide"
strength = "99.9 %"
[[steps]]
do = "dose"
name = "pre-lime ahead of the rapid mix, as the wall says"
product = "{LONG}"
dose = "10 mg/L"
[[steps]]
do = "coagulate"
name = "rapid mix"
product = "alum"
dose = "20 mg/L"
[[steps]]
do = "aerate"
name = "cascade"
efficiency = "40 %"
[[steps]]
do = "chlorinate"
name = "contact tank number one"
product = "chlorine"
dose = "2 mg/L"
[[steps]]
do = "dose"
name = "fluoride"
product = "FSA"
dose = "0.7 mg/L"
[[steps]]
do = "dose"
name = "phosphate"
product = "phosphoric acid"
dose = "1.5 mg/L"
[[steps]]
do = "adjust"
name = "final pH"
products = ["{LONG}", "gas"]
target = {{ ph = 8.2, alkalinity = "60 mg/L as CaCO3" }}
[[steps]]
do = "temperature"
name = "mains in winter"
to = "4 °C"
[[steps]]
do = "temperature"
name = "mains in summer"
to = "18 °C"
[[steps]]
do = "temperature"
name = "in the boiler of a house at the end of the line"
to = "45 °C"
"""
PLANS = {
    "upland": f'[plan]\nname = "Ambrel Dam"\ndate = 2026-10-14\n{SOFT}{LIME}{GAS}{FINAL}',
    "minimal": """
[plan]
name = "M"
[flow]
now = "500 m3/d"
[water]
temperature_c = 10
ph = 6.8
alkalinity = "30 mg/L as CaCO3"
[products.soda]
is = "soda ash"
[[steps]]
do = "adjust"
products = ["soda"]
target = { ph = [7.5, 7.9] }
""",
    "no dose": """
[plan]
name = "Only air"
[flow]
now = "500 m3/d"
[water]
temperature_c = 10
ph = 6.8
alkalinity = "30 mg/L as CaCO3"
[[steps]]
do = "aerate"
to_air = true
""",
    "infeasible": f"""
[plan]
name = "Impossible Mill"
{SOFT}{LIME}
[[steps]]
do = "adjust"
products = ["lime"]
target = {{ ph = 8.0, alkalinity = "120 mg/L as CaCO3" }}
""",
    "guarded": f"""
[plan]
name = "Guarded Mill"
{SOFT}{LIME}
[[steps]]
do = "adjust"
products = ["lime"]
target = {{ ph = 9.8 }}
[guards]
ph = [6.2, 9.4]
over_ph = 9.9
""",
    "many": f'[plan]\nname = "The Great Northern and Upper Vale Joint Works at Long Stretton by the Reservoir, stream B, '
            f'second half of the year"\n{SOFT}{MANY}',
    "many, stopped": f'[plan]\nname = "Long Stretton"\n{SOFT}{MANY.replace("ph = 8.2", "ph = 9.8")}',
    "many, no dose": f'[plan]\nname = "Long Stretton"\n{SOFT}{MANY.replace("60 mg/L as CaCO3", "2 mg/L as CaCO3")}',
    "ten feeds": f'[plan]\nname = "Ten"\n{SOFT}{LIME}{GAS}' + "".join(
        f'[[steps]]\ndo = "dose"\nname = "feed number {k}"\nproduct = "{"lime" if k % 2 else "gas"}"\ndose = "4 mg/L"\n'
        for k in range(10)),
    "nitrify": """
[plan]
name = "Low Marsh sewage works"
use = "wastewater"
[flow]
now = "2.35 MGD"
[water]
temperature_c = 16
ph = 7.3
alkalinity = "230 mg/L as CaCO3"
"ammonium (mg/L as N)" = 30
[products.soda]
is = "soda ash"
[[steps]]
do = "nitrify"
name = "aeration tanks"
oxidize = "all"
[[steps]]
do = "dose"
name = "behind the tanks"
product = "soda"
dose = "60 mg/L"
""",
    "blend": f"""
[plan]
name = "Marrow Hill"
[flow]
now = "12 ML/d"
[water]
temperature_c = 14
ph = 7.3
alkalinity = "280 mg/L as CaCO3"
"calcium (mg/L)" = 105
[sources.permeate]
temperature_c = 20
ph = 5.9
alkalinity = "4 mg/L as CaCO3"
"calcium (mg/L)" = 0.5
[sources.lake]
temperature_c = 10
ph = 8.1
alkalinity = "90 mg/L as CaCO3"
"calcium (mg/L)" = 35
{LIME}
[[steps]]
do = "blend"
name = "tank"
with = ["permeate", "lake"]
shares = ["50 %", "20 %"]
[[steps]]
do = "adjust"
name = "to the mains"
products = ["lime"]
target = {{ ph = "at least 7.8" }}
""",
    "season": f'[plan]\nname = "Ambrel Dam, a year"\n{SOFT}{LIME}{GAS}{FINAL}\n[drift]\nreadings = "year.csv"\n',
}
MISSED_ROWS, UNREAD_ROWS = (12, 13, 14), (20,)
ROWS = 60


def _year() -> str:
    """Raw water of sixty days: three with more alkalinity than the target, one without readings."""
    lines = ["sample_id,temperature_c,ph,alkalinity (mg/L as CaCO3),calcium (mg/L)"]
    for row in range(1, ROWS + 1):
        alkalinity = 80.0 if row in MISSED_ROWS else 15.0 + 0.2 * row
        lines.append(f"d{row},,,," if row in UNREAD_ROWS else f"d{row},9,6.6,{alkalinity:.2f},{0.28 * alkalinity:.2f}")
    return "\n".join(lines) + "\n"


@cache
def answer_of(name):
    """A plan solved, errors of readings left out."""
    with TemporaryDirectory() as folder:
        path = Path(folder) / "plan.toml"
        path.write_text(PLANS[name], encoding="utf-8")
        (Path(folder) / "year.csv").write_text(_year(), encoding="utf-8")
        return solve_plan(read_plan(path), draws=0)
