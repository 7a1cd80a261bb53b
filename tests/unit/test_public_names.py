"""``__all__`` of each package is what is really public."""

import importlib
from types import ModuleType

import pytest


def test_lazy_names_of_phasematch_are_all_there_are():
    import phasematch

    assert dir(phasematch) == sorted(phasematch.__all__)
    assert set(phasematch._HOME) == set(phasematch.__all__)
    with pytest.raises(AttributeError, match="nothing"):
        _ = phasematch.nothing


@pytest.mark.parametrize("name", ["materials", "modesolve"])
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


def test_every_public_name_of_phasematch_says_what_it_is():
    import phasematch

    for key in phasematch.__all__:
        value = getattr(phasematch, key)
        assert value.__doc__ or isinstance(value, str), key
