"""The same readings long and wide, the wide table made by a pivot of pandas: both readers must agree; pieces change nothing."""

import pandas as pd
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from pandas.testing import assert_frame_equal
from wqx_rows import PH, as_text, result

from aquabuf.readings.reader import read_readings
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import open_any

WHATS = {  # characteristic, fraction, speciation, unit -> header of a wide table
    ("pH", "", "", "std units"): "pH",
    ("Temperature, water", "", "", "deg F"): "temperature (°F)",
    ("Conductivity", "", "", "uS/cm"): "conductivity_raw (µS/cm)",
    ("Salinity", "", "", "PSU"): "salinity",
    ("Alkalinity, total", "Total", "as CaCO3", "mg/l"): "alkalinity (mg/L as CaCO3)",
    ("Inorganic carbon", "Dissolved", "", "umol/kg"): "DIC (µmol/kg)",
    ("Calcium", "Dissolved", "", "mg/l"): "calcium (mg/L)",
    ("Nitrate", "Total", "as N", "mg/l"): "nitrate (mg/L as N)",
    ("Aluminum", "Dissolved", "", "ug/l"): "aluminum (µg/L)",
}
LIMITED = ("Calcium", "Nitrate", "Aluminum")  # may be below detection
numbers = st.decimals(min_value="0.1", max_value="30", places=2).map(str)
ELSE = {"pH": st.just("4.5"), "Temperature, water": st.decimals("29", "90", places=1).map(str)}  # inside their limits


@st.composite
def long_rows(draw):
    """Results in any order: numbers, blanks, and values below detection in each way of saying so."""
    rows = []
    for name in draw(st.lists(st.sampled_from("ABCDEFGH"), min_size=1, unique=True)):
        for what, fraction, speciation, unit in draw(st.lists(st.sampled_from(list(WHATS)), min_size=1, unique=True)):
            value, more = draw(ELSE.get(what, numbers)), {"fraction": fraction, "speciation": speciation, "id": name, "site": f"S{name}"}
            how = draw(st.sampled_from(["value", "blank", "<", "condition"] if what in LIMITED else ["value", "blank"]))
            if how == "condition":
                rows.append(result(what, condition="Not Detected", limit=value, limit_unit=unit, **more))
            else:
                cell = {"blank": "", "<": "<" + value, "value": value}[how]
                rows.append(result(what, cell, unit, **more))
    return draw(st.permutations(rows))


def as_wide(rows):
    """The pivot: one row per sample in order of first appearance, cells as a person would type them."""
    frame = pd.DataFrame(rows)
    below = frame["condition"] == "Not Detected"
    frame["cell"] = frame["value"].where(~below, "<" + frame["limit"])
    unit = frame["unit"].where(~below, frame["limit_unit"])
    frame["header"] = [WHATS[key] for key in zip(frame["what"], frame["fraction"], frame["speciation"], unit, strict=True)]
    order = frame["id"].drop_duplicates()
    wide = frame.pivot(index="id", columns="header", values="cell").reindex(order).fillna("")
    known = frame.drop_duplicates("id").set_index("id")[["site", "date", "time"]].reindex(order)
    wide = known.join(wide).reset_index()
    wide.insert(0, "sample_id", "ORG_" + wide.pop("id"))
    return wide.to_csv(index=False)


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(rows=long_rows())
def test_long_and_wide_agree(tmp_path, rows):
    """Every number, half limit, spread, derived column and flag, whatever the order of the rows."""
    long, wide = tmp_path / "long.csv", tmp_path / "wide.csv"
    long.write_text(as_text(rows), encoding="utf-8")
    wide.write_text(as_wide(rows), encoding="utf-8")
    found, expected = join_readings(open_any(long, "wqx")), read_readings(wide)
    assert found.rejected.empty
    assert expected.rejected.empty
    names = found.frame.columns.drop("row")
    assert sorted(names) == sorted(expected.frame.columns.drop("row"))
    assert_frame_equal(found.frame[names], expected.frame[names], check_exact=True)
    assert flags_of(found) == flags_of(expected)


def flags_of(readings):
    """Flags without their rows, and without the densities that a wide table flags for blank cells too."""
    listed = readings.flags[["sample_id", "column", "value", "what"]].values.tolist()
    return sorted(flag for flag in listed if "density" not in flag[-1])


def faulty(rows):
    """The rows with faults of each kind among them."""
    more = [
        result("Calcium", "x", "mg/l", id="A"), result("pH", "7", id=""), result("pH", "99", id="H"), PH,
        result("pH", "7.2", id="A", site="elsewhere"), result("Nitrate", "1", "mg/l", id="C"), result("pH", "7.3", id="A"),
    ]  # fmt: skip
    return [row for pair in zip(rows, more * len(rows), strict=False) for row in pair]


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(rows=long_rows(), size=st.integers(1, 5))
def test_pieces_change_nothing(tmp_path, rows, size):
    """Frame, refusals, flags and notes of the pieces together are those of the whole."""
    path = tmp_path / "long.csv"
    path.write_text(as_text(faulty(rows)), encoding="utf-8")
    parts, whole = list(open_any(path, "wqx", size)), join_readings(open_any(path, "wqx"))
    assert max(len(part.frame) for part in parts) <= size
    joined = join_readings(parts)
    for name in ("frame", "rejected", "flags"):
        assert_frame_equal(getattr(joined, name), getattr(whole, name))
    assert joined.notes == whole.notes
    assert len(whole.rejected)


def test_what_refuses_a_row_of_a_wide_table_costs_a_result_here(tmp_path):
    """The words of both readers are the same, but for where the unit stands."""
    rows = [result("Calcium", "-3", "mg/l"), result("pH", "7")]
    (tmp_path / "long.csv").write_text(as_text(rows), encoding="utf-8")
    (tmp_path / "wide.csv").write_text("sample_id,calcium (mg/L),ph\nORG_A,-3,7\n", encoding="utf-8")
    found, expected = join_readings(open_any(tmp_path / "long.csv", "wqx")), read_readings(tmp_path / "wide.csv")
    about = ["row", "sample_id", "value", "rule", "remedy"]
    assert found.rejected[about].values.tolist() == expected.rejected[about].values.tolist()
    assert (len(found.frame), len(expected.frame)) == (1, 0)
    assert found.frame["ph"].tolist() == pytest.approx([7])
