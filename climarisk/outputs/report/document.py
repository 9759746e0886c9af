"""The print-ready report of a study: one page of HTML without a script, from the map's numbers.

Every text that came from a file passes `climarisk.outputs.report.words.el`, which escapes it;
nothing is a template but the skeleton, and that is filled once.  The content security policy
lets the page's own style in and nothing else.
"""

from __future__ import annotations

from climarisk.outputs.report.air import air_section
from climarisk.outputs.report.aircraft import aircraft_sections
from climarisk.outputs.report.bases import bases_section
from climarisk.outputs.report.data import figures
from climarisk.outputs.report.overview import overview_section
from climarisk.outputs.report.planning import planning_sections
from climarisk.outputs.report.schedule import schedule_section
from climarisk.outputs.report.sources import sources_section
from climarisk.outputs.report.style import paper_page, report_text, style
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
        printed, it gives A4 pages: an overview, the aircraft, their weights and working
        hours, bases and schedule, the air, method and sources.
    """
    sheet = Sheet(result, figures(result))
    sections = [
        overview_section(sheet),
        *aircraft_sections(sheet),
        *planning_sections(sheet),
        bases_section(sheet),
        schedule_section(sheet),
        air_section(sheet),
        sources_section(sheet),
    ]
    look = style(result.title, len(sheet.edges) + 1) + report_text("bases.css")
    return paper_page(result.title, look, sections)
