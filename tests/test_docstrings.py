"""The examples in docstrings give what they say."""

from __future__ import annotations

import doctest
import importlib
import pkgutil

import numpy as np
import pytest

import ngm

#: Pages run as scripts when they are imported; `__main__` is the command line.
MODULES = [
    module.name
    for module in pkgutil.walk_packages(ngm.__path__, "ngm.")
    if not module.name.startswith(("ngm.screens.", "ngm.__main__"))
]


@pytest.mark.parametrize("name", MODULES)
def test_examples(name):
    module = importlib.import_module(name)
    result = doctest.testmod(module, extraglobs={"np": np, "ngm": ngm}, optionflags=doctest.NORMALIZE_WHITESPACE)
    assert result.failed == 0
