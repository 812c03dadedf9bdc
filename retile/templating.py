"""The one place that knows where the templates are: ``templates/`` of a checkout, ``retile/templates`` when installed."""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import jinja2

_HERE = Path(__file__).resolve().parent
_PLACES = (_HERE / "templates", _HERE.parent / "templates")


@cache
def environment() -> jinja2.Environment:
    """The environment for generated text: an unknown name is an error, nothing is escaped, line ends are kept.

    Raises ``FileNotFoundError`` if neither place has templates, which means a broken installation.
    """
    import jinja2

    folder = next((place for place in _PLACES if place.is_dir()), None)
    if folder is None:
        raise FileNotFoundError("retile's templates are missing; install the package again")
    return jinja2.Environment(loader=jinja2.FileSystemLoader(folder), undefined=jinja2.StrictUndefined,
                              autoescape=False, trim_blocks=True, lstrip_blocks=True, keep_trailing_newline=True)
