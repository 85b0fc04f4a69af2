"""What ``report`` shows on the screen: its answers and what is left out."""

from __future__ import annotations

from typing import Any

from earthwork.reporting.page import Block, Facts, Notes, Page
from earthwork.reporting.report.answers import answers, verdict
from earthwork.site import Site


def page(site: Site, result: Any) -> Page:
    """The page of a **report** result."""
    parts = result.parts
    blocks: list[Block] = [
        Notes(lines=(verdict(parts),)),
        Facts(rows=tuple((a.question, a.value, a.note) for a in answers(parts))),
    ]
    if parts.left_out:
        lines = tuple(f"{name}: {why}" for name, why in parts.left_out.items())
        blocks.append(Notes(heading="Not in this report", lines=lines))
    return Page(title=f"{site.name}: report", blocks=tuple(blocks))
