"""`aquabuf columns --results --lake`: what each column of a lake assessment means."""

import re

from aquabuf.tables import read_table


def test_every_column_of_the_lake_results_is_listed(call):
    """Name, mark of an interval, meaning and unit of each, in the order of the table; lines fit a screen."""
    done = call("columns", "--results", "--lake")
    assert (done.exit_code, done.stderr) == (0, "")
    lines = done.stdout.splitlines()
    assert max(map(len, lines)) <= 100
    head, listed = re.match(r"(.*?the interval\)) (.*)", " ".join(done.stdout.split())).groups()
    assert "`aquabuf lake`" in head
    place = 0
    for row in read_table("lake_results"):
        mark = "± " if row["interval"] == "yes" else ""
        unit = f" [{row['unit']}]" if row["unit"] not in ("", "-") else ""
        entry = f"{row['name']} {mark}{' '.join(row['meaning'].split())}{unit}"
        place = listed.index(entry, place) + len(entry)
    assert place == len(listed)


def test_readings_of_lakes_are_the_ordinary_ones(call):
    """Without --results the list of what readings may hold does not change."""
    assert call("columns", "--lake").stdout == call("columns").stdout


def test_lake_and_titration_exclude_each_other(call):
    """Wrong usage, exit code 2."""
    done = call("columns", "--results", "--lake", "--titration")
    assert done.exit_code == 2
    assert "--lake and --titration must not come together. Drop one." in done.stderr
