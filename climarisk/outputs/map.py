r"""The one-file map of a study: page, style, scripts, Leaflet and data in one text.

Opened from disk the page asks for nothing, not even a marker image: every part is inside
it and its content security policy lets nothing else in.

Text that came from a file never passes through a folium object, because folium and branca
compile the text they are given as a template a second time, so that a field name could run
code on the machine that draws the map.  folium gets numbers and constants only.  Names,
findings and attributions travel in one JSON block in which ``<``, ``>``, ``&`` and
everything beyond ASCII are escapes such as ``\u003c``, and the page's own scripts show them
through ``textContent`` alone.
"""

from __future__ import annotations

import base64
import hashlib
import html
import json
import re
from collections.abc import Sequence
from importlib.resources import files
from typing import Any, cast

import folium
from folium.template import Template

from climarisk.fields import Field
from climarisk.outputs.background import drawn_longitudes, image_sources
from climarisk.outputs.map_data import payload
from climarisk.results import StudyResult

#: Scripts of the page in the order in which they are joined.
_SCRIPTS = (
    "dom.js",
    "data.js",
    "load.js",
    "format.js",
    "scale.js",
    "ground.js",
    "tiles.js",
    "cards.js",
    "labels.js",
    "markers.js",
    "list.js",
    "state.js",
    "controls.js",
    "grid.js",
    "chart.js",
    "air.js",
    "works.js",
    "weights.js",
    "engine.js",
    "evidence.js",
    "panel.js",
    "compare.js",
    "stacked.js",
    "bases.js",
    "schedule.js",
    "views.js",
    "method.js",
    "print.js",
    "app.js",
)

#: Style of the page in the order in which it is joined, after Leaflet's.
_STYLES = (
    "base.css",
    "view.css",
    "ground.css",
    "map.css",
    "list.css",
    "panel.css",
    "grid.css",
    "compare.css",
    "overview.css",
    "method.css",
    "narrow.css",
    "print.css",
)


class _FieldMap(folium.Map):
    """A Leaflet map with no links to load, no body styles and no ban on pinch zoom."""

    default_js: list[tuple[str, str]] = []
    default_css: list[tuple[str, str]] = []
    _template = Template(
        """
        {% macro script(this, kwargs) %}
        var {{ this.get_name() }} = L.map({{ this.get_name()|tojson }}, {
            center: {{ this.location|tojson }},
            ...{{ this.options|tojavascript }}
        });
        L.control.scale({imperial: false, maxWidth: 150}).addTo({{ this.get_name() }});
        {% endmacro %}
        """
    )


def render_map(result: StudyResult) -> str:
    """The whole HTML page of a study, the same text for the same result.

    Parameters
    ----------
    result : StudyResult
        Frames with the columns of the file contract.  ``settings["bands"]`` holds the
        increasing edges of the shortfall bands, shares in 0-1.

    Returns
    -------
    str
        A complete HTML document that needs no other file and no network.

    Raises
    ------
    ValueError
        A frame holds the same cell twice.
    """
    leaflet = _leaflet_script()
    chart = _map_script(result.fields)
    page = _page_script()
    parts = {
        "policy": _policy(image_sources(result.tiles), leaflet, chart, page),
        "title": html.escape(result.title),
        "style": _leaflet_style() + "".join(_page_text(name) for name in _STYLES),
        "data": _safe_json(payload(result)),
        "licence": _page_text("LEAFLET-LICENSE").strip(),
        "leaflet": leaflet,
        "map": chart,
        "page": page,
    }
    # One pass, so that a part which happens to hold a mark is not filled again.
    return re.sub(r"@@([a-z]+)@@", lambda mark: parts[mark[1]], _page_text("page.html"))


# Scripts, style, policy


def _page_text(name: str) -> str:
    return (files("climarisk.outputs") / "page" / name).read_text(encoding="utf-8")


def _leaflet_script() -> str:
    text = (files("xstatic.pkg.leaflet") / "data" / "leaflet.js").read_text(encoding="utf-8")
    # A source map would be one more file to ask for.
    return re.sub(r"\n//# sourceMappingURL=\S+\s*$", "\n", text)


def _leaflet_style() -> str:
    data = files("xstatic.pkg.leaflet") / "data"

    def image(match: re.Match[str]) -> str:
        encoded = base64.b64encode((data / "images" / match[1]).read_bytes()).decode("ascii")
        return f"url(data:image/png;base64,{encoded})"

    text = (data / "leaflet.css").read_text(encoding="utf-8").replace("\r\n", "\n")
    return re.sub(r"url\(images/([\w-]+\.png)\)", image, text)


def _page_script() -> str:
    joined = "\n".join(_page_text(name) for name in _SCRIPTS)
    return f'\n(function () {{\n"use strict";\n{joined}}})();\n'


def _map_script(fields: Sequence[Field]) -> str:
    """The script that makes the Leaflet map, centred on the fields."""
    latitudes = [field.latitude for field in fields] or [0.0]
    longitudes = drawn_longitudes(fields) or [0.0]
    chart = _FieldMap(
        location=[_middle(latitudes), _middle(longitudes)],
        zoom_start=6,
        tiles=None,
        attribution_control=False,
        world_copy_jump=False,
        zoom_snap=0.25,
        max_zoom=14,
        min_zoom=1,
    )
    chart._id = "fields"  # folium draws a random one, which would change the page each time
    figure = cast(folium.Figure, chart.get_root())
    figure._id = "page"
    chart.render()
    return figure.script.render()


def _middle(values: Sequence[float]) -> float:
    return round((min(values) + max(values)) / 2.0, 4)


def _policy(images: str, *scripts: str) -> str:
    """A content security policy that lets exactly these scripts run and loads these images."""
    hashes = " ".join(
        f"'sha256-{base64.b64encode(hashlib.sha256(s.encode()).digest()).decode('ascii')}'"
        for s in scripts
    )
    return (
        f"default-src 'none'; script-src {hashes}; style-src 'unsafe-inline'; img-src {images}; "
        "base-uri 'none'; form-action 'none'"
    )


def _safe_json(value: Any) -> str:
    """JSON that cannot end the script element it stands in."""
    text = json.dumps(value, ensure_ascii=True, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")
