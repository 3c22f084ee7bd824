"""Small tables written to a temporary folder."""

import pytest


@pytest.fixture
def table(tmp_path):
    """Write text (or bytes) as a file and return its path."""

    def write(content, name="table.csv"):
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write
