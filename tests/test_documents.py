"""The front pages keep their word: examples run, links lead somewhere, both commands are what they say."""

from __future__ import annotations

import doctest
import re
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
PAGES = [ROOT / "README.md", ROOT / "DEVELOPERS.md", *sorted((ROOT / "docs").glob("*.md")), ROOT / "field_data" / "README.md"]


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.name)
def test_examples_run(page):
    """Every Python example of the page gives what it shows."""
    failed, _ = doctest.testfile(str(page), module_relative=False)
    assert failed == 0


@pytest.mark.parametrize("page", PAGES, ids=lambda p: p.name)
def test_links_lead_to_files(page):
    """A relative link names a file or folder of the project."""
    links = re.findall(r"\]\((?!https?:)([^)#]+)\)", page.read_text(encoding="utf-8"))
    assert [link for link in links if not (page.parent / link).exists()] == []


def test_readme_opens_with_the_job_and_has_two_commands():
    """The job in one paragraph at the top, then one command for the main job and one for the tests."""
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    first = text.split("\n\n")[1]
    assert all(word in first for word in ("operator", "ecologist", "engineer", "alkalinity", "error bar"))
    commands = re.findall(r"```sh\n(.*?)```", text, flags=re.S)
    assert len(commands) == 2
    assert "aquabuf assess field_data/" in commands[0]
    assert commands[1].rstrip().endswith("-m pytest")


def test_public_names_are_pinned():
    """What a Python user may import; adding a name here is a decision."""
    import aquabuf

    assert sorted(aquabuf.__all__) == ["Acid", "Water", "__version__", "mix"]
    assert all(getattr(aquabuf, name) is not None for name in aquabuf.__all__)
