"""From content to HTML text: templates, typesetting, drawings inside the page."""

import re
from importlib import resources
from typing import Any

from jinja2 import ChoiceLoader, Environment, PackageLoader, StrictUndefined
from markupsafe import Markup, escape

from regimes.analysis import Analysis, SinglesOnly
from regimes.report.captions import TITLES, caption, description


def render(template: str, content: dict[str, Any], room: str = "regimes.report") -> str:
    """A self-contained page: style and figures inside, no script, no network.

    Templates are looked for in `room` first, then among those of the report.
    """
    loader = ChoiceLoader([PackageLoader(name, "") for name in dict.fromkeys((room, "regimes.report"))])
    environment = Environment(loader=loader, autoescape=True, undefined=StrictUndefined)
    environment.trim_blocks = environment.lstrip_blocks = True
    environment.filters["typeset"] = typeset
    style = resources.files("regimes.report").joinpath("page.css").read_text(encoding="utf-8")
    return environment.get_template(template).render(style=Markup(style), **content)


def typeset(text: object) -> Markup:
    """Text for the page: ``k^{-2}`` with a raised exponent, a true minus sign before a number."""
    safe = re.sub(r"(?<![\w.])-(?=[\d.])", "\u2212", str(escape(text)))
    return Markup(re.sub(r"\^\{([^{}]*)\}", r"<sup>\1</sup>", safe).replace("<sup>-", "<sup>\u2212"))


def figures_content(analysis: Analysis | SinglesOnly, figures: dict[str, str]) -> dict[str, dict[str, Any]]:
    """What the page shows of each figure by its name, numbered in order of appearance."""
    return {
        name: {
            "name": name,
            "number": number,
            "title": TITLES[name],
            "svg": inline(svg, name, description(name, analysis)),
            "caption": caption(name, analysis),
        }
        for number, (name, svg) in enumerate(figures.items(), 1)
    }


def inline(svg: str, name: str, words: str) -> Markup:
    """SVG as part of the page: no header, scalable, with a name and a description in words."""
    drawing = svg[svg.index("<svg") :]
    drawing = re.sub(r"<metadata>.*?</metadata>\s*", "", drawing, flags=re.DOTALL)
    head, body = drawing.split(">", 1)
    head = re.sub(r'\s(width|height)="[^"]*"', "", head)
    label = f"{name}-words"
    return Markup(f'{head} role="img" aria-labelledby="{label}"><title id="{label}">{escape(words)}</title>{body}')
