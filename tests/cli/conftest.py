"""The command run in this process, on small tables in a temporary folder. All waters are invented."""

import pytest
from click.testing import CliRunner

from aquabuf.cli.main import main


@pytest.fixture
def call(tmp_path, monkeypatch):
    """Run `aquabuf` with these words from within the temporary folder; a defect of ours shows as an exception."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("AQUABUF_TRACEBACK", "1")

    def go(*words):
        done = CliRunner().invoke(main, [str(w) for w in words], prog_name="aquabuf")
        if done.exception is not None and not isinstance(done.exception, SystemExit):
            raise done.exception
        return done
    return go


@pytest.fixture
def table(tmp_path):
    """Write text or bytes as a file and return its name."""
    def write(content="sample_id,temperature_c,ph,alkalinity_meq_l\na,10,7.6,2\nb,10,6.5,0.03\n", name="t.csv"):
        (tmp_path / name).write_bytes(content if isinstance(content, bytes) else content.encode())
        return name
    return write
