"""Profiles as files: what headers mean, house units, and every slip named with row, column, value and remedy."""

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.errors import FileError, HeaderError, InputError
from aquabuf.readings.profile_columns import profile_quantities
from aquabuf.readings.profile_file import read_profile

# m3/h of one unit: US gallon 3.785411784 L, cubic foot 0.3048^3 m3 (definitions)
FLOWS = {"m3/h": 1.0, "m³/h": 1.0, "m3/d": 1 / 24, "L/s": 3.6, "L/min": 0.06, "gpm": 3.785411784e-3 * 60,
         "gal/min": 3.785411784e-3 * 60, "MGD": 3785.411784 / 24, "gpd": 3.785411784e-3 / 24, "cfs": 0.3048**3 * 3600}


@pytest.mark.parametrize("unit", FLOWS)
def test_flow_units(table, unit):
    """The unit stands in the heading; inside it is m3/h."""
    got = read_profile(table(f"time (h),flow ({unit})\n0,2\n1,0\n2,5\n"))
    assert_allclose(got.flow_m3_h, np.array([2.0, 0.0, 5.0]) * FLOWS[unit], rtol=1e-9)


@pytest.mark.parametrize(("heading", "cells", "seconds"), [
    ("time (h)", ("0", "0.5", "1"), (0, 1800, 3600)),
    ("hours", ("5", "6", "7"), (0, 3600, 7200)),
    ("elapsed_min", ("0", "15", "30"), (0, 900, 1800)),
    ("time [d]", ("0", "1", "2"), (0, 86400, 172800)),
    ("time (s)", ("0", "10", "20"), (0, 10, 20)),
    ("time", ("2026-02-28 23:00", "2026-03-01 00:00", "2026-03-01 01:00"), (0, 3600, 7200)),
    ("Date time", ("2026-03-01T00:00:00", "2026-03-01T00:00:30", "2026-03-01T00:01:00"), (0, 30, 60)),
    ("time", ("2026-03-29 01:00+01:00", "2026-03-29 03:00+02:00", "2026-03-29 04:00+02:00"), (0, 3600, 7200)),
    ("date", ("2026-03-01", "2026-03-02", "2026-03-03"), (0, 86400, 172800)),
])  # fmt: skip
def test_times(table, heading, cells, seconds):
    """Dates with time of day, or a unit; counted from the first row. The last row holds for the usual step."""
    got = read_profile(table(f"{heading},flow_m3_h\n" + "".join(f"{c},1\n" for c in cells)))
    assert_allclose(got.time_s, seconds, rtol=1e-12)
    assert_allclose(got.step_s, seconds[2] - seconds[1], rtol=1e-12)
    assert got.start == (cells[0] if "-" in cells[0] else "")


def test_strengths_of_wastes(table):
    """A strength, a base and an acidity, each of its waste; acidity is acid positive and so turned. 50.0435 g CaCO3 per eq."""
    text = ("time (h),flow (m3/h),Strength rinse,spent caustic base (meq/L),acidity pickle (mg/L as CaCO3)\n"
            "0,1,0.5,20,500.435\n1,2,1.5,40,-50.0435\n")
    got = read_profile(table(text), ["rinse", "spent caustic", "pickle"])
    assert_allclose(got.strength["rinse"], [0.5, 1.5])
    assert_allclose(got.base_eq_l["spent caustic"], [0.02, 0.04], rtol=1e-12)
    assert_allclose(got.base_eq_l["pickle"], [-0.01, 0.001], rtol=1e-4)
    assert any("acidity pickle" in note and "sign is turned" in note for note in got.notes)


def test_base_of_the_stream_is_signed(table):
    """Acid is negative; temperature comes along."""
    got = read_profile(table("time (h),flow (m3/h),base (eq/L),temperature (°F)\n0,1,-0.02,212\n1,2,0.01,32\n"))
    assert_allclose(got.base_eq_l[""], [-0.02, 0.01])
    assert_allclose(got.t_c, [100.0, 0.0], atol=1e-9)


def test_another_dialect(table):
    """Semicolons and decimal commas, and it is said."""
    got = read_profile(table("time (h);flow (m3/h)\n0;1,5\n1;2,5\n"))
    assert_allclose(got.flow_m3_h, [1.5, 2.5])
    assert any("decimal comma" in note for note in got.notes)


def test_rows_are_lines_of_the_file(table):
    """Comments and blank lines count."""
    got = read_profile(table("# made by hand\ntime (h),flow (m3/h)\n\n0,1\n# night\n1,2\n"))
    assert_array_equal(got.rows, [4, 6])


GAP = "time (h),flow (m3/h),strength\n0,1,1\n1,2,3\n2,4,1\n5,8,\n6,16,5\n"


def test_gaps_are_held_only_if_told(table):
    """Two rows are missing behind row 4, and one cell in row 5."""
    with pytest.raises(InputError, match=r"row 5, column 'time \(h\)': rows must follow within 1\.5 usual steps of 1 h; "
                                         r"found 3 h after '2'\. Add the missing rows, or allow a gap of 2 h to be held"):
        read_profile(table(GAP))
    with pytest.raises(InputError, match="found 3 h after '2'"):
        read_profile(table(GAP), hold_gap_s=7199.0)
    got = read_profile(table(GAP), hold_gap_s=7200.0)
    assert_allclose(got.time_s, np.array([0, 1, 2, 5, 6]) * 3600.0)
    assert_allclose(got.flow_m3_h, [1, 2, 4, 8, 16])
    assert_allclose(got.strength[""], [1, 3, 1, 1, 5])
    assert "1 x rows missing, held at the value before (2 h in all)" in got.notes
    assert "1 x cells missing in 'strength', held at the value before (1 h in all)" in got.notes


def test_missing_cells(table):
    """Named with how long nothing is known; a first row has nothing before it to hold."""
    with pytest.raises(InputError, match=r"row 3, column 'flow \(m3/h\)': each row needs a value; found none for 2 h\. "
                                         "Fill it in, or allow a gap of 2 h"):
        read_profile(table("time (h),flow (m3/h)\n0,1\n1,\n2,n/a\n3,2\n"))
    with pytest.raises(InputError, match=r"row 2, column 'strength': .*none for 1 h\. Fill it in \(any value where nothing "
                                         r"flows\)\.$"):
        read_profile(table("time (h),flow (m3/h),strength\n0,1,\n1,1,2\n"), hold_gap_s=1e6)
    with pytest.raises(InputError, match="found none for 2 h"):  # the last two rows, to the end of the profile
        read_profile(table("time (h),flow (m3/h)\n0,1\n1,1\n2,\n3,\n"), hold_gap_s=3600.0)
    got = read_profile(table("time (h),flow (m3/h)\n0,1\n1,7\n2,\n3,\n"), hold_gap_s=7200.0)
    assert_allclose(got.flow_m3_h, [1, 7, 7, 7])


def test_stated_step(table):
    """An hourly day, then daily composites: no gaps if the longest step is stated, and it is how long the last one holds."""
    hours = [*range(24), 24, 48, 72]
    text = "time (h),flow (m3/h)\n" + "".join(f"{h},1\n" for h in hours)
    with pytest.raises(InputError, match="usual steps of 1 h"):
        read_profile(table(text))
    assert read_profile(table(text), usual_step_s=86400.0).step_s == 86400.0


HOURLY = "time (h),flow (m3/h)\n"
CLOCK = "time,flow (m3/h)\n"
BAD = {
    "negative flow": (HOURLY + "0,1\n1,-2\n", r"p\.csv, row 3, column 'flow \(m3/h\)': flow must be 0 or more; found -2 m³/h\. "
                      "Correct it; leave water that flows back out"),
    "time back": (HOURLY + "0,1\n1,1\n0.5,1\n", r"row 4, column 'time \(h\)': times must rise; the row before has '1'; found '0\.5'\. "
                  r"Sort the rows, remove the repeated one\.$"),
    "clock set back": (CLOCK + "2026-10-25 02:00,1\n2026-10-25 02:00,1\n", r"times must rise; .* found '2026-10-25 02:00'\. "
                       r".*where the clock was set back, write the zone \(\+01:00\) behind all times"),
    "mixed units": (HOURLY + "0,1\n1,2 gpm\n", r"row 3, column 'flow \(m3/h\)': one unit for the whole column, m³/h; found '2 gpm'\. "
                    "Convert it to m³/h and write the number alone"),
    "no number": (HOURLY + "0,1\n1,some\n", r"row 3, column 'flow \(m3/h\)': must be a number; found 'some'\. Correct it"),
    "too much": (HOURLY + "0,1\n1,1e7\n", r"flow must be 0 to 1e\+05 m³/h; found 1e7 m³/h\. Check the value and the unit"),
    "strength": ("time (h),flow (m3/h),acidity (meq/L)\n0,1,1\n1,1,-1e6\n", r"acidity must be -4e\+04 to 4e\+04 meq/L; "
                 "found -1e6 meq/L"),
    "time missing": (HOURLY + "0,1\n,1\n2,1\n", r"row 3, column 'time \(h\)': each row needs its time; found none\. Fill it in or "
                     "remove the row"),
    "time no number": (HOURLY + "0,1\nnoon,1\n", r"row 3, column 'time \(h\)': must be a number of h; found 'noon'\. Write all times in"),
    "time order": (CLOCK + "3/1/2026 8:00,1\n2026-03-01 09:00,1\n", r"row 2, column 'time': must be a date with a time of day, year "
                   r"first; found '3/1/2026 8:00'\. Write 2026-03-01 08:00, or give hours"),
    "mixed zones": (CLOCK + "2026-03-01 08:00,1\n2026-03-01 09:00+01:00,1\n", r"row 3, column 'time': all times must name their zone "
                    r"or none; found '2026-03-01 09:00\+01:00'\. Write all in one way"),
    "fields": (HOURLY + "0,1\n1,1,1\n", r"row 3: each row needs 2 fields, as the header has; found 3\. Check delimiters"),
    "one row": (HOURLY + "0,1\n", r"p\.csv: a profile needs at least 2 rows; found 1\. Add rows, or describe the stream"),
    "no flow": (HOURLY + "0,0\n1,0\n", r"something must flow at some time; found zero flow in all 2 rows\. Check the column"),
    "many": (HOURLY + "0,-1\n" + "".join(f"{h},-1\n" for h in range(1, 9)), r"row 2, .* row 3, .* row 4, .*And 6 more, from row 5 on\.$"),
}  # fmt: skip


@pytest.mark.parametrize("slip", BAD)
def test_slips_in_cells(table, slip):
    """Row, column, rule, value and remedy."""
    text, words = BAD[slip]
    with pytest.raises(InputError, match=words) as caught:
        read_profile(table(text, "p.csv"))
    assert "\n" not in str(caught.value)


HEADERS = {
    "time (h),flow": r"column 'flow' needs a unit: flow can be in m³/d, m³/h, .*gal/min, .*MGD.*'flow \(m³/h\)'",
    "time (h),flow (furlongs)": r"'furlongs' is not a unit of flow\. Use one of: m³/d",
    "time (h),flow (m3/h),base (mg/L)": r"'mg_l' is not a unit of base\. Use one of: meq/L, .*mg/L as CaCO3",
    "time (h),flow (m3/h),base (mg/L as N)": "is not a unit of base",
    "time (h),flow (m3/h),base (meq/kg)": "is not a unit of base",
    "time (h),flow (m3/h),strength sludge": r"'sludge' is not a unit of strength or the name of a waste \(rinse, pickle\)",
    "time (h),flow (m3/h),color": r"column 'color' is not known; a profile has time, flow, temperature, and strength, base, acidity, each "
                                  r"alone or with the name of a waste \(rinse, pickle\)\. Rename it",
    "time (h),flow (m3/h),strength rinse,base rinse (eq/L)": r"columns 'strength rinse' and 'base rinse \(eq/L\)' both give the strength "
                                                             r"of rinse; one is needed\. Remove one",
    "time (h),flow (m3/h),flow (m3/h)": r"both give flow; one is needed",
    "time (h),strength": r"a profile needs a column of flow; found none\. Add one, with its unit",
    "flow (m3/h),strength": r"a profile needs a column of time; found none",
}


@pytest.mark.parametrize("header", HEADERS)
def test_slips_in_headers(table, header):
    """What each column may be."""
    rows = "".join(",".join(["1"] * (header.count(",") + 1)) + "\n" for _ in range(2))
    with pytest.raises(HeaderError, match=HEADERS[header]):
        read_profile(table(f"{header}\n{rows}"), ["rinse", "pickle"])


def test_columns_left_out_are_said(table):
    """Only by name."""
    got = read_profile(table("time (h),flow (m3/h),remarks\n0,1,x\n1,1,y\n"), ignore=["remarks"])
    assert got.notes == ("columns left out: remarks",)


def test_settings(table):
    """A gap and a step have their ranges."""
    path = table("time (h),flow (m3/h)\n0,1\n1,1\n")
    with pytest.raises(InputError, match=r"the gap to be held must be 0 s or more; found -1\. Correct it"):
        read_profile(path, hold_gap_s=-1.0)
    with pytest.raises(InputError, match=r"the usual step must be above 0 s; found 0\. Correct it"):
        read_profile(path, usual_step_s=0.0)


def test_no_file(tmp_path):
    """As with every table."""
    with pytest.raises(FileError, match="no such file"):
        read_profile(tmp_path / "p.csv")


def test_every_quantity_can_be_read(table):
    """Each row of the table of columns, by each of its names."""
    for q in profile_quantities().values():
        for name in q.aliases:
            unit = {"flow": "m3/h", "base": "eq/L", "acidity": "eq/L", "time": "h"}.get(q.name, "")
            other = "flow (m3/h)" if q.name == "time" else "time (h)"
            third = "" if q.name in ("time", "flow") else ",flow (m3/h)"
            heading = f"{other},{name} ({unit}){third}" if unit else f"{other},{name}{third}"
            columns = heading.count(",") + 1
            got = read_profile(table(f"{heading}\n" + "".join(",".join([str(k)] * columns) + "\n" for k in (1, 2))))
            found = {"time": got.time_s + 3600, "flow": got.flow_m3_h, "strength": got.strength.get(""),
                     "base": got.base_eq_l.get(""), "acidity": got.base_eq_l.get(""), "temperature": got.t_c}[q.name]
            assert_allclose(np.abs(found), [3600, 7200] if q.name == "time" else [1, 2])
