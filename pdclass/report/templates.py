"""The templates of the reports, and what they may be given besides words."""

from __future__ import annotations

from pathlib import Path

import jinja2
from markupsafe import Markup


def template(name: str) -> jinja2.Template:
    """A template beside this module: what is put in is escaped, and a name that is not given is an error."""
    environment = jinja2.Environment(
        loader=jinja2.FileSystemLoader(Path(__file__).parent),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters["begin"] = begin
    return environment.get_template(name)


def begin(words: str) -> str:
    """Words with their first letter large, the rest as it was (units keep theirs)."""
    return words[:1].upper() + words[1:]


def drawn(figure: str) -> Markup:
    """A figure of `pdclass.report.plots`, to be put in as it is."""
    return Markup(figure)  # noqa: S704
