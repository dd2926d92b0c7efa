"""The page as a file: templates, stylesheet, script and the plotting library put into one, closed to any network.

Texts of a capture become markup nowhere: they are escaped by the template, or stand in JSON, of which the script makes
text nodes. Besides, the browser is told to run no script but those of the report, and to load nothing from anywhere.
"""

from __future__ import annotations

import base64
import hashlib
import json
from collections.abc import Mapping, Sequence
from functools import cache
from importlib.resources import files
from importlib.util import find_spec
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rtpaudit.errors import UnusableOutput

if TYPE_CHECKING:
    from jinja2 import Environment

LIBRARY = ("bokeh.min.js", "bokeh-api.min.js")
SCRIPTS = (
    "words.js", "list.js", "picture.js", "tape.js", "player.js", "budget.js", "sections.js", "page.js",
)  # fmt: skip

POLICY = (
    "default-src 'none'; script-src {digests} 'self' file:; style-src 'unsafe-inline'; img-src data: blob:; "
    "media-src 'self' file: blob:; connect-src 'none'; form-action 'none'; base-uri 'none'"
)
"""Scripts: those of the page, and those of calls beside it. No connection of any kind."""


def as_json(value: Any) -> str:
    """JSON that can stand within a script element, and in a script, whatever texts are in it."""
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for sign in "<>&\u2028\u2029":
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return text


def render(name: str, context: Mapping[str, Any]) -> str:
    """A template filled in."""
    return _environment().get_template(name).render(context)


def library() -> str:
    """The script of the plotting library, as its package ships it."""
    spec = find_spec("bokeh")
    if spec is None or not spec.submodule_search_locations:
        raise UnusableOutput("the page needs the package bokeh: install it, which puts rtpaudit in order as well")
    place = Path(next(iter(spec.submodule_search_locations))) / "server" / "static" / "js"
    return "\n".join(_closed((place / name).read_text("utf-8")) for name in LIBRARY)


def script() -> str:
    """The page's own script, whose names stay within it."""
    return '(() => {\n"use strict";\n' + "\n".join(_own(name) for name in SCRIPTS) + "})();\n"


def stylesheet() -> str:
    """The page's own stylesheet."""
    return _own("page.css")


def policy(scripts: Sequence[str]) -> str:
    """What the browser may run and load; the scripts are named by their digests."""
    digests = [base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode("ascii") for text in scripts]
    return POLICY.format(digests=" ".join(f"'sha256-{one}'" for one in digests))


def _own(name: str) -> str:
    return (files("rtpaudit.report") / "templates" / name).read_text("utf-8")


def _closed(text: str) -> str:
    """Script without what would end its element; within strings the two are the same to the browser."""
    return text.replace("</script", "<\\/script").replace("<!--", "<\\!--")


@cache
def _environment() -> Environment:
    from jinja2 import Environment, FunctionLoader, StrictUndefined

    return Environment(
        loader=FunctionLoader(_own), autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
