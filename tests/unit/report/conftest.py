"""The invented results, as fixtures."""

import importlib.util
from pathlib import Path

import pytest

SOURCE = Path(__file__).with_name("invented.py")


def load_invented():
    """Import the module by its path: the test folders are not packages."""
    spec = importlib.util.spec_from_file_location("mtest_tests_invented", SOURCE)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="session")
def invented():
    return load_invented()


@pytest.fixture(scope="session")
def four_arms(invented):
    return invented.four_arms()


@pytest.fixture(scope="session")
def crowded(invented):
    return invented.crowded()


@pytest.fixture(scope="session")
def two_families(invented):
    return invented.two_families()
