"""Make the hand-built models of this folder importable (tests run with --import-mode=importlib)."""

import importlib.util
import sys
from pathlib import Path

import pytest


def _load():
    name = "coldseam_report_models"
    if name not in sys.modules:
        spec = importlib.util.spec_from_file_location(name, Path(__file__).with_name("models.py"))
        sys.modules[name] = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(sys.modules[name])
    return sys.modules[name]


@pytest.fixture(scope="session")
def models():
    """The module of hand-built models."""
    return _load()


@pytest.fixture(scope="session")
def view(models):
    """Return a function name -> View, each made once."""
    made = {}

    def get(name):
        if name not in made:
            made[name] = getattr(models, name)()
        return made[name]

    return get
