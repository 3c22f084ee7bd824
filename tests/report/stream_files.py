"""Invented stream files for runs of the tank room, small enough to be simulated in a moment."""

HEAD = """
[tank]
name = "Invented rinse"
date = 2026-03-16
currency = "EUR"
"""
RINSE = """
[wastes.rinse]
temperature = "20 °C"
holds = { "hydrochloric acid" = "0.365 g/L", "acetic acid" = "0.9 g/L" }
flow = "6 m3/h"
least = "4 m3/h"
most = "8 m3/h"
strength = { spread = "10 %", lasting = "2 h" }
"""
WINDOW = """
[window]
ph = [6.0, 9.0]
source = "permit of the example"
"""
REAGENTS = """
[reagents.caustic]
is = "caustic soda"
strength = "25 %"
price = "0.31 per kg"

[reagents.lime]
is = "hydrated lime"
strength = "92 %"
slurry = "8 %"
slurry_density = "1.05 kg/L"
price = "0.24 per kg"

[reagents.acid]
is = "sulfuric acid"
strength = "38 %"
density = "1.28 kg/L"
price = "0.22 per kg"
"""
USE = """
[use]
base = "caustic"
acid = "acid"
"""
SHORT = """
[simulate]
days = "0.1 d"
step = "15 s"
cases = 2
"""

HOLDS = HEAD + RINSE + WINDOW + REAGENTS + USE + "\n[layout]\nstages = 2\nequalization = \"20 m3\"\n" + SHORT
"""Keeps its window: two tanks, equalization, a buffered waste."""

BREAKS = HEAD + RINSE.replace(', "acetic acid" = "0.9 g/L"', "").replace("10 %", "80 %") + WINDOW + REAGENTS + USE + \
    "\n[layout]\nstages = 1\nequalization = \"0 m3\"\n\n[site]\nfeed_error = \"20 %\"\n" + SHORT
"""Does not: nothing buffers it, one tank, a feed that errs by a fifth."""

MINIMAL = """
[tank]
name = "Least"

[wastes.w]
temperature = "20 °C"
holds = { "hydrochloric acid" = "0.365 g/L" }
flow = "6 m3/h"

[window]
ph = [6.0, 9.0]

[reagents.caustic]
is = "caustic soda"
strength = "25 %"

[simulate]
days = "0.1 d"
cases = 0
"""
"""Nothing that may be left out."""

CYANIDE = MINIMAL.replace('holds = { "hydrochloric acid" = "0.365 g/L" }', 'holds = { "caustic soda" = "2 g/L", cyanide = "60 mg/L" }') \
    .replace('[reagents.caustic]\nis = "caustic soda"\nstrength = "25 %"', '[reagents.acid]\nis = "sulfuric acid"\nstrength = "38 %"\ndensity = "1.28 kg/L"')
"""Acid for a stream that holds cyanide."""

PH_ALONE = MINIMAL.replace('holds = { "hydrochloric acid" = "0.365 g/L" }', "ph = 2.1")
"""A strength that nobody knows."""

TITRATED = MINIMAL.replace('holds = { "hydrochloric acid" = "0.365 g/L" }\nflow = "6 m3/h"', 'titration = "w.csv"') + \
    "\n[profile]\nfile = \"p.csv\"\n"
"""Known by tables: w.csv, p.csv."""

CURVE = "sample_id,base (meq/L),pH\na,-12,2.0\na,0,2.4\na,6,3.1\na,9,4.0\na,12,4.6\na,16,5.1\na,20,5.7\na,22,6.3\na,23,7.2\na,24,8.6\na,26,9.6\na,32,10.8\n"
PROFILE = "time (h),flow (m3/h),strength\n" + "".join(f"{h},{5 + h % 3},{1 + 0.1 * (h % 2)}\n" for h in range(24))


def write_stream(folder, text, name="stream.toml"):
    """The stream file in a folder, with the tables that it may name; returns its path."""
    (folder / "w.csv").write_text(CURVE, encoding="utf-8")
    (folder / "p.csv").write_text(PROFILE, encoding="utf-8")
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path
