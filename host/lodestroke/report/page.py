"""One self-contained HTML page from sections of text, tables and figures."""

from __future__ import annotations

import contextlib
import os
from dataclasses import dataclass, field
from datetime import datetime, timezone
from pathlib import Path
from typing import Any

import jinja2
import markupsafe
import plotly.graph_objects as go
from plotly.offline import get_plotlyjs

from .. import __version__, cautions
from ..errors import Exit, LodestrokeError


class PageError(LodestrokeError):
    """A page that cannot be written."""

    exit_code = Exit.BAD_INPUT


@dataclass(frozen=True)
class Table:
    """A table with its caption; cells are text or numbers."""

    caption: str
    head: tuple[str, ...]
    rows: list[tuple[Any, ...]]


@dataclass(frozen=True)
class Section:
    """A part of a page."""

    head: str
    text: str = ""
    tables: list[Table] = field(default_factory=list)
    figures: list[go.Figure] = field(default_factory=list)


def write(
    out: Path, title: str, subtitle: str, verdict: str, bad: bool, sections: list[Section]
) -> Path:
    """Write the page in one go, so that nobody ever opens half of it. Raises PageError."""
    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("lodestroke.report", "."), autoescape=True
    )
    text = environment.get_template("page.html.j2").render(
        title=title,
        subtitle=subtitle,
        verdict=verdict,
        bad=bad,
        cautions=cautions.CAUTIONS,
        plotly_js=markupsafe.Markup(get_plotlyjs()),
        version=__version__,
        now=datetime.now(timezone.utc).isoformat(timespec="seconds"),
        sections=[
            {
                "head": section.head,
                "text": section.text,
                "tables": section.tables,
                "plots": [
                    figure.to_html(
                        full_html=False,
                        include_plotlyjs=False,
                        config={"displaylogo": False, "responsive": True},
                    )
                    for figure in section.figures
                ],
            }
            for section in sections
        ],
    )
    part = out.with_name(out.name + f".{os.getpid()}.part")
    try:
        out.parent.mkdir(parents=True, exist_ok=True)
        part.write_text(text, encoding="utf-8")
        os.replace(part, out)
    except OSError as fault:
        with contextlib.suppress(OSError):
            part.unlink(missing_ok=True)
        raise PageError(
            "the page cannot be written",
            at=str(out),
            got=str(fault),
            bound="a file in a folder that can be written",
            try_="name another with --out",
        ) from fault
    return out
