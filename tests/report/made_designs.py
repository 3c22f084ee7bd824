"""Small made designs for the tests of figures and pages: each worked out once. All numbers are invented."""

import tempfile
from functools import cache
from pathlib import Path

from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from aquabuf.assess.tank.design import design
from aquabuf.assess.tank.job_file import read_stream

__all__ = ["LONG", "NAMES", "POINTS", "SIMULATED", "STRONGER", "WINDOW", "axis", "design_of", "page_of", "texts"]

LONG = "caustic of the northern supplier, by tanker"
TEXT = """
[tank]
name = "{name}"
date = 2026-02-03

[wastes.rinse]
temperature = "20 °C"
{holds}
flow = "4 m3/h"
least = "2 m3/h"
most = "7 m3/h"
strength = {{ spread = "20 %", lasting = "2 h" }}

[window]
ph = [6.0, 9.0]
source = "permit of the example"

[reagents."{base}"]
is = "caustic soda"
strength = "25 %"
price = "0.31 per kg"

[reagents.acid]
is = "{acid}"
{strength}

[use]
base = "{base}"
acid = "acid"

[layout]
{layout}

[simulate]
days = "0.1 d"
cases = {cases}
"""
ACID = 'holds = { "sulfuric acid" = "0.6 g/L", acetate = "30 mg/L", sodium = "30 mg/L" }'
CYANIDE = 'holds = { "caustic soda" = "0.8 g/L", cyanide = "40 mg/L", sodium = "90 mg/L" }'
TITRATED = 'ph = 2.5\ntitration = "curve.csv"'
# Two samples of one waste, the second a fifth stronger at every pH
POINTS = ((2.5, 0.0), (3.0, 4.0), (3.6, 6.0), (4.4, 7.0), (5.2, 8.0), (6.0, 8.6), (6.8, 9.0), (8.0, 9.4), (9.2, 10.0),
          (10.0, 11.0))
STRONGER = 1.2
USUAL = {"name": "Rinse", "holds": ACID, "base": "caustic", "acid": "sulfuric acid", "cases": 2,
         "strength": 'strength = "38 %"\ndensity = "1.28 kg/L"', "layout": "stages = 2"}
MADE = {
    "two": {},
    "one": {"layout": 'stages = 1\nequalization = "0 m3"'},
    "four": {"layout": 'stages = 4\nequalization = "8 m3"', "base": LONG, "name": f"Rinse water, {'long ' * 30}name"},
    "gas": {"holds": CYANIDE.replace('cyanide = "40 mg/L", ', ""), "acid": "carbon dioxide", "strength": 'strength = "99.9 %"',
            "layout": "stages = 1", "cases": 0},
    "stopped": {"holds": CYANIDE},
    "sampled": {"holds": TITRATED},
}
WINDOW = (6.0, 9.0)  # of all of them
BARE = ("sampled",)  # not simulated
NAMES = tuple(MADE)
SIMULATED = ("two", "one", "four", "gas")


def _curve_csv():
    lines = ["sample_id,base (meq/L),pH"]
    for name, factor in (("A", 1.0), ("B", STRONGER)):
        lines += [f"{name},{factor * base:.4f},{ph}" for ph, base in POINTS]
    return "\n".join(lines) + "\n"


@cache
def design_of(name):
    """The design by its name."""
    with tempfile.TemporaryDirectory() as folder:
        (Path(folder) / "curve.csv").write_text(_curve_csv(), encoding="utf-8")
        path = Path(folder) / "stream.toml"
        path.write_text(TEXT.format(**(USUAL | MADE[name])), encoding="utf-8")
        job = read_stream(path)
    return design(job, simulate=name not in BARE, processes=1)


@cache
def page_of(draw, name):
    """A page of the design by its name, drawn once."""
    return draw(design_of(name))


def axis(wide=4.0, high=2.5):
    """An axis of so many inches on a figure of its own."""
    figure = Figure(figsize=(wide + 1.0, high + 1.0))
    FigureCanvasAgg(figure)
    return figure.add_axes((0.5 / (wide + 1.0), 0.5 / (high + 1.0), wide / (wide + 1.0), high / (high + 1.0)))


def texts(ax):
    """Words in a panel."""
    return [t.get_text() for t in ax.texts]
