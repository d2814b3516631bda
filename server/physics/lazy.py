"""pvlib, imported late and from one place."""

import importlib
import threading
from types import ModuleType

_lock = threading.Lock()


def pvlib_module(name: str) -> ModuleType:
    """The pvlib submodule `name`, imported under one lock.

    pvlib takes a second or more to import, so nothing imports it at start. Two threads that import it in different
    forms at once can meet a half-made module, so every use of pvlib comes through here.
    """
    with _lock:
        return importlib.import_module("pvlib." + name)
