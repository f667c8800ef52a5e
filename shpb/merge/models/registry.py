"""Finding the laws: every :class:`~shpb.merge.models.model.Model` in a module of this folder."""

from __future__ import annotations

import difflib
import importlib
import pkgutil

from shpb.errors import InputError
from shpb.merge.models.model import Model


def all_models() -> tuple[Model, ...]:
    """Every law there is, by the names of their modules."""
    from shpb.merge import models

    names = sorted(module.name for module in pkgutil.iter_modules(models.__path__))
    modules = [importlib.import_module(f"{models.__name__}.{name}") for name in names]
    # A law that builds on another imports it: each counts once, where it stands first.
    found = {
        value.key: value for module in modules for value in vars(module).values() if isinstance(value, Model)
    }
    return tuple(found.values())


def model_named(key: str) -> Model:
    """The law with this key, e.g. ``model_named("johnson-cook")``; InputError if there is none."""
    by_key = {model.key: model for model in all_models()}
    if key in by_key:
        return by_key[key]
    close = difflib.get_close_matches(key.casefold().replace("_", "-"), list(by_key), n=1)
    raise InputError(
        f"no law is called {key!r}; there are {', '.join(sorted(by_key))}",
        where="model",
        mend=f"Did you mean {close[0]}?" if close else "",
    )
