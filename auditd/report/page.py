"""The page: one HTML document that asks the network for nothing, and forbids itself to."""

from __future__ import annotations

import base64
import hashlib
from importlib import resources

from jinja2 import Environment, StrictUndefined
from markupsafe import Markup

from auditd.report.content import Content
from auditd.report.labels import visible

POLICY = "default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"
"""Content Security Policy Level 3: no script, no request, no style but the one whose hash is stated."""


def page_html(content: Content) -> str:
    """Return the page as text."""
    files = resources.files("auditd.report")
    style = (files / "page.css").read_text(encoding="utf-8")
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()
    environment = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True, finalize=_final
    )
    template = environment.from_string((files / "page.html.jinja").read_text(encoding="utf-8"))
    return template.render(
        page=content,
        style=Markup(style),  # noqa: S704 - our own file
        policy=POLICY.format(digest=digest),
        drawing=Markup,  # drawings made by svg_cleaning, in which all text is escaped
    )


def _final(value: object) -> object:
    """Make control and format characters visible in everything that is set, other than our own mark-up."""
    return value if isinstance(value, Markup) else visible_lines(value) if isinstance(value, str) else value


def visible_lines(text: str) -> str:
    """Return text of several lines with its control characters visible; line ends and tabs stay."""
    return "\n".join("    ".join(visible(part) for part in line.split("\t")) for line in text.split("\n"))
