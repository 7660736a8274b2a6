"""The registry of observation kinds: one file a kind, and this dict is the only list of them.

To add a kind, write its file and its table of worked values under tests/kinds/; nothing else knows kinds by name.
"""

from __future__ import annotations

import importlib
import pkgutil

from adjust.kinds.base import Kind


def _discover() -> dict[str, Kind]:
    found = [
        importlib.import_module(f"{__name__}.{module.name}").KIND
        for module in pkgutil.iter_modules(__path__)
        if module.name != "base"
    ]
    return {kind.name: kind for kind in sorted(found, key=lambda kind: kind.order)}


KINDS: dict[str, Kind] = _discover()
"""Every kind by its singular name, in the order in which docs list them."""

TABLES: dict[str, Kind] = {kind.table: kind for kind in KINDS.values() if kind.table}
"""Kinds by the name of their table."""
