"""The print-ready report of a study: one page of HTML without a script, from the map's numbers.

Every text that came from a file passes `climarisk.outputs.report.words.el`, which escapes it;
nothing is a template but the skeleton, and that is filled once.  The content security policy
lets the page's own style in and nothing else.
"""

from __future__ import annotations

import base64
import hashlib
import html
import re

from climarisk.outputs.report.air import air_section
from climarisk.outputs.report.aircraft import aircraft_sections
from climarisk.outputs.report.data import figures
from climarisk.outputs.report.overview import overview_section
from climarisk.outputs.report.sources import sources_section
from climarisk.outputs.report.style import report_text, style
from climarisk.outputs.report.tables import Sheet
from climarisk.results import StudyResult


def render_report(result: StudyResult) -> str:
    """The whole HTML page of a study's report, the same text for the same result.

    Parameters
    ----------
    result : StudyResult
        Frames with the columns of the file contract.  ``settings["bands"]`` holds the
        increasing edges of the shortfall bands, shares in 0-1.

    Returns
    -------
    str
        A complete HTML document that needs no other file and no network and holds no script;
        printed, it gives A4 pages: an overview, the aircraft, the air, method and sources.
    """
    sheet = Sheet(result, figures(result))
    sections = [
        overview_section(sheet),
        *aircraft_sections(sheet),
        air_section(sheet),
        sources_section(sheet),
    ]
    look = style(result.title, len(sheet.edges) + 1)
    parts = {
        "policy": _policy(look),
        "title": html.escape(result.title),
        "style": look,
        "sections": "\n".join(sections),
    }
    # One pass, so that a part which happens to hold a mark is not filled again.
    return re.sub(r"@@([a-z]+)@@", lambda mark: parts[mark[1]], report_text("report.html"))


def _policy(look: str) -> str:
    """A content security policy that lets exactly this style in and loads nothing."""
    digest = base64.b64encode(hashlib.sha256(look.encode()).digest()).decode("ascii")
    return (
        f"default-src 'none'; style-src 'sha256-{digest}'; img-src data:; "
        "base-uri 'none'; form-action 'none'"
    )
