"""The examples in the docstrings of the field hold."""

from __future__ import annotations

import doctest
import importlib

import pytest


@pytest.mark.parametrize("name", ["", ".gf256", ".polynomial", ".irreducible", ".prime", ".extension"])
def test_docstrings(name):
    result = doctest.testmod(importlib.import_module("shares.field" + name))
    assert result.attempted > 0
    assert result.failed == 0
