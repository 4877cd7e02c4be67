"""Bayesian decision and design analysis: what a planned or finished hypothesis test is worth.

Names are loaded when they are first used, so that importing the package costs next to nothing.
"""

import importlib
import sys
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from bayesdesign import design as families
    from bayesdesign import prior as distributions
    from bayesdesign import rule as rules
    from bayesdesign.core.errors import NotOffered as NotOffered
    from bayesdesign.core.errors import Refused as Refused
    from bayesdesign.core.errors import StudyError as StudyError
    from bayesdesign.evaluate import evaluate as evaluate
    from bayesdesign.interpret import Interpretation as Interpretation
    from bayesdesign.interpret import interpret as interpret
    from bayesdesign.result import Result as Result
    from bayesdesign.size import size as size
    from bayesdesign.study.read import load_study as load_study
    from bayesdesign.study.read import parse_study as parse_study
    from bayesdesign.study.study import Effect as Effect
    from bayesdesign.study.study import Prior as Prior
    from bayesdesign.study.study import Study as Study
    from bayesdesign.study.study import Target as Target

    __version__: str

__all__ = [
    "Effect",
    "Interpretation",
    "NotOffered",
    "Prior",
    "Refused",
    "Result",
    "Study",
    "StudyError",
    "Target",
    "__version__",
    "distributions",
    "evaluate",
    "families",
    "interpret",
    "load_study",
    "parse_study",
    "rules",
    "size",
]

_HOME = {
    "core.errors": ("NotOffered", "Refused", "StudyError"),
    "evaluate": ("evaluate",),
    "interpret": ("Interpretation", "interpret"),
    "result": ("Result",),
    "size": ("size",),
    "study.read": ("load_study", "parse_study"),
    "study.study": ("Effect", "Prior", "Study", "Target"),
}
_MODULES = {"distributions": "prior", "families": "design", "rules": "rule"}


def __getattr__(name: str) -> Any:
    if name == "__version__":
        from importlib import metadata

        found: Any = metadata.version("bayesdesign-toolkit")
    elif name in _MODULES:
        found = importlib.import_module(f"{__name__}.{_MODULES[name]}")
    else:
        home = next((home for home, names in _HOME.items() if name in names), None)
        if home is None:
            raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
        found = getattr(importlib.import_module(f"{__name__}.{home}"), name)
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return __all__


class _Package(ModuleType):
    def __setattr__(self, name: str, value: object) -> None:
        # The import system binds a loaded submodule to its name. Three of ours are named after the one
        # function they hold,
        # and what users call must stay the function, whoever loads the module first.
        if name in ("evaluate", "interpret", "size") and isinstance(value, ModuleType):
            value = getattr(value, name)
        super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Package
