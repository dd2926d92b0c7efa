"""The room's own templates."""

from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from jinja2 import Environment


def own(name: str) -> str:
    """A file of the room's templates as it stands."""
    return (files("rtpaudit.listen") / "templates" / name).read_text("utf-8")


@cache
def environment() -> "Environment":
    """Templates that escape whatever is put into them."""
    from jinja2 import Environment, FunctionLoader, StrictUndefined

    return Environment(
        loader=FunctionLoader(own), autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
    )
