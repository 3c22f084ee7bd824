"""The document around the parts of a page: one file with its own style and script."""

from __future__ import annotations

from collections.abc import Iterable
from functools import cache
from importlib.resources import files
from string import Template

import aquabuf
from aquabuf.report.html.parts import shown_text

__all__ = ["document"]

@cache
def _shipped(name: str) -> str:
    return (files("aquabuf") / "data" / name).read_text(encoding="utf-8")


def document(title: str, subtitle: str, parts: Iterable[str], *, closing: str = "", script: str = "") -> str:
    """A whole page.

    `script` is added to that of the tables; title, subtitle and closing are escaped, parts are not.
    """
    body = "\n".join(part for part in parts if part)
    return Template(_shipped("page.html")).substitute(
        title=shown_text(title), subtitle=shown_text(subtitle), body=body, closing=shown_text(closing),
        version=aquabuf.__version__, style=_shipped("page.css"), script=_shipped("page.js") + script)
