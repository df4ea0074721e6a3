"""Self-contained pages: templates, one style element, and the policy that admits nothing else."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Mapping, Sequence
from html import escape
from typing import Any

from jinja2 import TemplateError
from markupsafe import Markup

from hdetermine.errors import InputError
from hdetermine.report.figure_style import DARK, LIGHT
from hdetermine.report.figure_svg import Picture
from hdetermine.report.templates import Templates

STYLE_SHEET = "page.css"


def content_security_policy(style: str, scripts: Sequence[str] = ()) -> str:
    """Return a policy that admits one style element, named scripts and nothing from outside.

    Parameters
    ----------
    style : str
        Text of the style element, exactly as it stands on the page.
    scripts : sequence of str
        Texts of the inline scripts; none by default, and then no script runs at all.

    Returns
    -------
    str
        Value of a Content-Security-Policy (W3C, Content Security Policy Level 3).
    """
    admitted = " ".join(_hashed(script) for script in scripts) or "'none'"
    return (
        f"default-src 'none'; script-src {admitted}; style-src {_hashed(style)}; "
        "img-src data:; base-uri 'none'; form-action 'none'"
    )


def _hashed(text: str) -> str:
    digest = hashlib.sha256(text.encode()).digest()
    return f"'sha256-{base64.b64encode(digest).decode()}'"


def page_style(templates: Templates) -> str:
    """Style sheet of a page: the template's, and the figures' colours for both schemes."""
    sheet = templates.find(STYLE_SHEET).read_text(encoding="utf-8")
    dark = f"@media screen and (prefers-color-scheme: dark) {{\n{_figure_colours(DARK)}\n}}"
    return f"{sheet}\n{_figure_colours(LIGHT)}\n{dark}\n"


def _figure_colours(colours: Mapping[str, str]) -> str:
    return "\n".join(
        f".f-{name} {{ fill: {colour}; }} .s-{name} {{ stroke: {colour}; }}"
        for name, colour in colours.items()
    )


def inline_picture(picture: Picture) -> Markup:
    """Markup of a picture with its alternative text, for a page."""
    head = f'<svg role="img" aria-label="{escape(picture.alt, quote=True)}" '
    return Markup(head + picture.svg.removeprefix("<svg "))


def render_page(
    templates: Templates, name: str, content: Mapping[str, Any], scripts: Sequence[str] = ()
) -> bytes:
    """Fill a page template.

    The template finds `style` and `policy` (for the head), `wording`, the function
    `picture_markup`, and whatever `content` holds; all text is escaped.

    Parameters
    ----------
    templates : Templates
        Where to look.
    name : str
        File name of the template; it ends in ``.html``.
    content : mapping
        Names the template uses.
    scripts : sequence of str
        Inline scripts the policy admits.

    Returns
    -------
    bytes
        The page, UTF-8.

    Raises
    ------
    InputError
        If a template of the laboratory's own is at fault.
    """
    style = page_style(templates)
    try:
        text = (
            templates.environment()
            .get_template(name)
            .render(
                style=Markup(style),
                policy=content_security_policy(style, scripts),
                wording=templates.wording(),
                picture_markup=inline_picture,
                **content,
            )
        )
    except TemplateError as error:
        raise InputError(
            f"The template {name} cannot be used: {error}; mend it or take it away."
        ) from error
    return text.encode("utf-8", errors="replace")
