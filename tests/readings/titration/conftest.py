"""Titrations given as text."""

import pytest

from aquabuf.readings.titration.reader import read_titrations

GOOD = "{name},0,7,50,0.1\n{name},0.5,4,50,0.1\n"
HEADER = "sample_id,titrant_ml,ph,sample_volume_ml,titrant_eq_l\n"


@pytest.fixture
def titrations(table):
    """Read points, samples and their maps, all given as text; None leaves a file out."""

    def read(points, samples=None, points_map=None, samples_map=None):
        return read_titrations(
            table(points, "points.csv"),
            None if samples is None else table(samples, "samples.csv"),
            points_map=None if points_map is None else table(points_map, "points.toml"),
            samples_map=None if samples_map is None else table(samples_map, "samples.toml"),
        )

    return read


@pytest.fixture
def among_good(titrations):
    """Read the rows of a sample "x" between two samples that are good; its lines of `rejected`.

    The neighbors must come out whole whatever becomes of it.
    """

    def read(rows, header=HEADER, samples=None):
        width = header.count(",") + 1
        good = ["".join(line + "," * (width - 5) + "\n" for line in GOOD.format(name=name).split()) for name in "ab"]
        found = titrations(header + good[0] + rows + good[1], samples)
        assert found.samples["sample_id"].tolist() == ["a", "x", "b"]
        assert found.usable[[0, 2]].all()
        assert found.samples["sample_volume_ml"].tolist()[::2] == [50, 50]
        of_x = found.rejected[found.rejected["sample_id"] == "x"]
        assert len(of_x) == len(found.rejected)
        assert bool(len(of_x)) == (not found.usable[1])
        return of_x

    return read
