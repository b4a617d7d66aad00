"""Templates, style sheet and scripts put together to a page that needs nothing else."""

from __future__ import annotations

from functools import cache
from importlib import resources
from typing import TYPE_CHECKING, Any

import jinja2
from markupsafe import Markup

from pipeline.reporting.embedding import safe_json, security_policy
from pipeline.reporting.wording import digits, many, short, visible
from pipeline.version import VERSION

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

# The drawing library's own files, as its package brings them: models and rendering, and making figures from script.
_LIBRARY = ("bokeh.min.js", "bokeh-api.min.js")


def render(template: str, data: Mapping[str, Any], scripts: Sequence[str], **context: Any) -> bytes:
    """Return a page.

    Parameters
    ----------
    template
        Name of the template.
    data
        The data of its figures, embedded once.
    scripts
        Names of our own scripts, in the order in which they run.
    context
        What the template names. All text is escaped where it is put in.

    """
    parts = [*(_library(name) for name in _LIBRARY), "\n".join(_static(name) for name in scripts)]
    page = _environment().get_template(template)
    text = page.render(
        **context,
        version=VERSION,
        style=Markup(_static("page.css")),  # noqa: S704 - our own file
        data=Markup(safe_json(data)),  # noqa: S704 - safe_json leaves nothing that could end the element
        scripts=[Markup(part) for part in parts],  # noqa: S704 - the library's and our own
        policy=security_policy(parts),
    )
    return text.encode()


@cache
def _environment() -> jinja2.Environment:
    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("pipeline.reporting"),
        autoescape=True,
        undefined=jinja2.StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        finalize=lambda value: value if isinstance(value, Markup) else visible(value),
    )
    environment.filters |= {"short": short, "many": many, "digits": digits}
    return environment


@cache
def _static(name: str) -> str:
    return resources.files("pipeline.reporting").joinpath("static", name).read_text(encoding="utf-8")


@cache
def _library(name: str) -> str:
    """Return a script of the drawing library as it may stand in a page."""
    script = resources.files("bokeh").joinpath("server", "static", "js", name).read_text(encoding="utf-8")
    return script.replace("</script", "<\\/script").replace("<!--", "\\u003c!--")
