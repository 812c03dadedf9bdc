"""The integer set library, loaded without what ``sets`` does not need; for ``sets`` alone.

The package islpy is a compiled module with all operations, and around it Python code that adds conveniences (operators,
conversions) and looks up the package's own version.  That code takes three quarters of the time of ``import islpy``, as
much as the answer to a question, so only the compiled module is loaded, under its own name.  A later ``import islpy``
finds it there.  Where it cannot be found, the whole package is imported, which has the same names.
"""

from __future__ import annotations

import sys
from importlib.machinery import PathFinder
from importlib.util import find_spec, module_from_spec
from typing import TYPE_CHECKING, Any

_NAME = "islpy._isl"


def _compiled() -> Any:
    if _NAME in sys.modules:
        return sys.modules[_NAME]
    package = find_spec("islpy")
    spec = PathFinder.find_spec(_NAME, package.submodule_search_locations) if package else None
    if spec is None or spec.loader is None:
        import islpy

        return islpy
    module = module_from_spec(spec)
    sys.modules[_NAME] = module  # before it runs, as an import does it
    try:
        spec.loader.exec_module(module)
    except BaseException:
        del sys.modules[_NAME]
        raise
    return module


if TYPE_CHECKING:
    from islpy import _isl as isl
else:
    isl = _compiled()
