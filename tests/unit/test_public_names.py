"""``__all__`` of each package is what is really public."""

import importlib
from types import ModuleType

import pytest


@pytest.mark.parametrize("name", ["materials", "modesolve", "phasematch"])
def test_all_is_what_is_public(name):
    package = importlib.import_module(name)
    public = {
        key
        for key, value in vars(package).items()
        if not key.startswith("_") and not isinstance(value, ModuleType)
    }
    assert set(package.__all__) - {"annotations"} == public - {"annotations"}
    assert len(set(package.__all__)) == len(package.__all__)
    for key in package.__all__:
        assert getattr(package, key).__doc__ or isinstance(getattr(package, key), str), key
