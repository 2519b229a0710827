"""The examples in the docstrings are tests."""

import doctest
import pkgutil
from importlib import import_module

import pytest

import skipline

MODULES = [
    found.name
    for part in ("masks", "phantoms", "recon")
    for found in pkgutil.walk_packages(
        [f"{folder}/{part}" for folder in skipline.__path__], prefix=f"skipline.{part}."
    )
]


@pytest.mark.parametrize(
    "name", ["skipline", "skipline.masks", "skipline.phantoms", "skipline.recon", *MODULES]
)
def test_examples(name):
    failed, _ = doctest.testmod(import_module(name))
    assert failed == 0


def test_every_part_is_looked_at():
    assert len(MODULES) > 30
