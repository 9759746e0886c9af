"""How the tests start Chromium, the views they look at, and a page that notes what it does."""

from __future__ import annotations

from dataclasses import dataclass, field

FLAGS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]
VIEWS = {
    "desktop": {"viewport": {"width": 1280, "height": 800}},
    "desktop dark": {"viewport": {"width": 1280, "height": 800}, "color_scheme": "dark"},
    "phone": {"viewport": {"width": 390, "height": 844}, "has_touch": True, "is_mobile": True},
    "phone dark": {
        "viewport": {"width": 390, "height": 844},
        "has_touch": True,
        "is_mobile": True,
        "color_scheme": "dark",
    },
}


@dataclass
class OpenPage:
    """A page with everything it asked for and complained about."""

    page: object
    url: str
    requests: list[str] = field(default_factory=list)
    complaints: list[str] = field(default_factory=list)

    def open(self, fragment: str = "") -> object:
        """Load the page and wait until its script is through."""
        self.page.goto(self.url + fragment)
        self.page.wait_for_selector("html[data-ready=yes]", timeout=20_000)
        return self.page
